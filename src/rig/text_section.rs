//! `[device.text]` and the serial settings of a device.

use std::ops::RangeInclusive;

use regex::Regex;

use super::channels::plain_name_of;
use super::document::{Findings, Section};
use super::instrument::{LineCut, Parity, SerialSettings, TIME_GROUP, TextColumn, TextInstrument, TextTime};
use super::resembling::advice;
use crate::units::{self, Dimension, Unit};

const DELAYS_MS: RangeInclusive<f64> = 0.0..=10_000.0;
const BANDWIDTHS_HZ: RangeInclusive<f64> = 0.01..=100_000.0;
/// What 32-bit floats hold with seven digits, generously.
const PRINTED: RangeInclusive<f64> = -1e12..=1e12;

pub(super) fn serial_settings(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> SerialSettings {
    let usual = SerialSettings::default();
    let mut whole = |key: &'static str, allowed, usual: u8| {
        let number = entry.optional_number(findings, key, allowed).unwrap_or(usual.into());
        if number.fract() > 0.0 {
            findings.error(&entry.key(key), format!("is {number}, bits come in whole numbers"));
        }
        number as u8
    };
    let data_bits = whole("data_bits", 5.0..=8.0, usual.data_bits);
    let stop_bits = whole("stop_bits", 1.0..=2.0, usual.stop_bits);
    SerialSettings { data_bits, parity: parity(entry, findings), stop_bits }
}

fn parity(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Parity {
    let Some(word) = entry.optional_text(findings, "parity") else { return Parity::None };
    Parity::ALL.into_iter().find(|parity| parity.word() == word).unwrap_or_else(|| {
        findings.error(&entry.key("parity"), format!("{word:?} is not known, known: none, even, odd"));
        Parity::None
    })
}

pub(super) fn text_instrument(mut table: Section<'_, '_>, findings: &mut Findings<'_>) -> TextInstrument {
    let pattern = pattern(&mut table, findings);
    let separator = table.optional_text(findings, "separator");
    let columns = columns(&mut table, findings, pattern.as_ref());
    let time = time(&mut table, findings, pattern.as_ref());
    let last_field = columns.iter().map(|column| column.field).chain(time.map(|time| time.field)).max().unwrap_or(1);
    let n_fields = table.optional_number(findings, "fields", 1.0..=100.0).map_or(last_field, |n| n as usize);
    if n_fields < last_field {
        findings.error(&table.key("fields"), format!("is {n_fields}, but field {last_field} is asked for"));
    }
    let decimal_comma = table.optional_flag(findings, "decimal_comma");
    let key = table.key("separator");
    let cut = match (pattern, separator.as_deref()) {
        (Some(pattern), None) => LineCut::Pattern(pattern.as_str().to_owned()),
        (Some(_), Some(_)) => {
            findings.error(&key, "stands beside a pattern: one of them says how a line comes apart");
            LineCut::Spaces { n_fields }
        }
        (None, separator) => cut_at(separator, n_fields, decimal_comma, &key, findings),
    };
    let instrument = TextInstrument {
        cut,
        decimal_comma,
        columns,
        time,
        header_lines: table.optional_number(findings, "header_lines", 0.0..=1000.0).unwrap_or(0.0) as u32,
        skip_prefix: table.optional_text(findings, "skip_prefix"),
        interval_s: table.quantity(findings, "interval", "ms", 0.1..=10_000.0),
        start: table.optional_text(findings, "start"),
        poll: table.optional_text(findings, "poll"),
        delay_s: table.optional_quantity(findings, "delay", "ms", DELAYS_MS).unwrap_or(0.0),
        bandwidth_hz: table.optional_number(findings, "bandwidth_hz", BANDWIDTHS_HZ),
        arrival_uncertainty_s: table.optional_quantity(findings, "arrival_uncertainty", "ms", 0.01..=10_000.0),
    };
    table.finish(findings);
    instrument
}

fn cut_at(
    separator: Option<&str>,
    n_fields: usize,
    decimal_comma: bool,
    key: &str,
    findings: &mut Findings<'_>,
) -> LineCut {
    match separator {
        None | Some("spaces") => LineCut::Spaces { n_fields },
        Some(text) => {
            let mut letters = text.chars();
            let (Some(separator), None) = (letters.next(), letters.next()) else {
                let message = format!("{text:?} must be one character, such as \",\" or \"\\t\", or \"spaces\"");
                findings.error(key, message);
                return LineCut::Spaces { n_fields };
            };
            if decimal_comma && separator == ',' {
                findings.error(key, "is a comma, and so is the decimal mark: such lines can't be taken apart");
            }
            LineCut::At { separator, n_fields }
        }
    }
}

fn pattern(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Option<Regex> {
    let text = table.optional_text(findings, "pattern")?;
    match Regex::new(&text) {
        Ok(pattern) => Some(pattern),
        Err(error) => {
            let error = error.to_string();
            let last = error.lines().last().unwrap_or_default().trim_start_matches("error: ").to_owned();
            findings.error(&table.key("pattern"), format!("is no regular expression: {last}"));
            None
        }
    }
}

fn columns(table: &mut Section<'_, '_>, findings: &mut Findings<'_>, pattern: Option<&Regex>) -> Vec<TextColumn> {
    let mut columns: Vec<TextColumn> = Vec::new();
    for mut entry in table.sections(findings, "column") {
        let key = entry.key("name");
        let name = plain_name_of(&mut entry, findings, "name");
        if let Some(earlier) = columns.iter().position(|other| !name.is_empty() && other.name == name) {
            findings.error(&key, format!("{name:?} is already the name of column[{earlier}]"));
        }
        let field = field(&mut entry, findings, "field", pattern, &name, &key);
        let column = TextColumn {
            name,
            field,
            unit: unit(&mut entry, findings),
            delay_s: entry.optional_quantity(findings, "delay", "ms", DELAYS_MS),
            bandwidth_hz: entry.optional_number(findings, "bandwidth_hz", BANDWIDTHS_HZ),
            least: entry.optional_number(findings, "least", PRINTED),
            greatest: entry.optional_number(findings, "greatest", PRINTED),
        };
        if column.least.zip(column.greatest).is_some_and(|(least, greatest)| least >= greatest) {
            findings.error(&entry.key("least"), "is not below greatest: the sensor has no range");
        }
        entry.finish(findings);
        columns.push(column);
    }
    if columns.is_empty() {
        findings.error(&table.key("column"), "has no entry: no number of a line is asked for");
    }
    columns
}

/// The number of a field, or 0 where the pattern has a group of that name.
fn field(
    entry: &mut Section<'_, '_>,
    findings: &mut Findings<'_>,
    key: &'static str,
    pattern: Option<&Regex>,
    group: &str,
    group_key: &str,
) -> usize {
    let Some(pattern) = pattern else {
        return entry.number(findings, key, 1.0..=100.0) as usize;
    };
    if entry.optional_number(findings, key, 1.0..=100.0).is_some() {
        findings.error(&entry.key(key), "is a field number, but a pattern's groups are found by their names");
    }
    let groups = || pattern.capture_names().flatten();
    if !group.is_empty() && !groups().any(|name| name == group) {
        let advice = advice(group, groups());
        findings.error(group_key, format!("the pattern has no group (?P<{group}>…){advice}"));
    }
    0
}

/// The unit in which a column is printed. A mass is refused where the roles measure forces, with the advice.
fn unit(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Option<&'static Unit> {
    let symbol = entry.optional_text(findings, "unit")?;
    let named = Unit::named(&symbol);
    if named.is_some_and(|unit| unit.dimension != Dimension::Mass) {
        return named;
    }
    if let Err(error) = units::parse(&format!("1 {symbol}"), Dimension::Force) {
        findings.error(&entry.key("unit"), error.to_string());
    }
    // What was meant, so that its channel is not said to lack a calibration beside.
    named.and_then(|_| Unit::named("kgf"))
}

fn time(table: &mut Section<'_, '_>, findings: &mut Findings<'_>, pattern: Option<&Regex>) -> Option<TextTime> {
    let unit = table.optional_text(findings, "time_unit");
    let wrap = table.optional_number(findings, "time_wrap", 10.0..=1e19);
    let Some(unit) = unit else {
        let field = table.optional_number(findings, "time_field", 1.0..=100.0);
        if field.is_some() || wrap.is_some() {
            findings.error(&table.key("time_unit"), "is missing: a device's time needs its unit, such as \"ms\"");
        }
        return None;
    };
    let key = table.key("time_unit");
    let field = field(table, findings, "time_field", pattern, TIME_GROUP, &key);
    match units::parse(&format!("1 {unit}"), Dimension::Duration) {
        Ok(unit_s) => Some(TextTime { field, unit_s, wrap }),
        Err(error) => {
            findings.error(&key, error.to_string());
            None
        }
    }
}
