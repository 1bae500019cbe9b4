//! A rig file's text as spanned tables, and the findings collected while it is read.
//!
//! Reading goes on after a finding, so that one run reports them all: a value that could not be had is NaN (or empty),
//! and checks that compare with NaN stay silent. No [`Rig`](super::Rig) is made while there is an error, so no such
//! value escapes.

use std::collections::BTreeMap;
use std::ops::{Range, RangeInclusive};

use jiff::civil::Date;
use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::Given;
use super::finding::{Finding, Severity};
use super::resembling::resembling;
use crate::units::{self, Unit};

/// One value in the text, with where it stands.
pub(super) type Value<'t> = Spanned<DeValue<'t>>;

/// Collects findings, and remembers where each key that was read stands.
pub(super) struct Findings<'t> {
    text: &'t str,
    places: BTreeMap<String, usize>,
    found: Vec<Finding>,
}

impl<'t> Findings<'t> {
    pub(super) fn of(text: &'t str) -> Self {
        Self { text, places: BTreeMap::new(), found: Vec::new() }
    }

    /// A finding at a byte offset of the text.
    pub(super) fn at(&mut self, offset: usize, severity: Severity, key: &str, message: impl Into<String>) {
        let before = self.text.get(..offset).unwrap_or(self.text);
        let line_start = before.rfind('\n').map_or(0, |newline| newline + 1);
        self.found.push(Finding {
            severity,
            line: before.matches('\n').count() + 1,
            column: before[line_start..].chars().count() + 1,
            key: key.to_owned(),
            message: message.into(),
        });
    }

    /// An error about a key that was read before, or about the nearest table that holds it.
    pub(super) fn error(&mut self, key: &str, message: impl Into<String>) {
        self.at(self.place(key), Severity::Error, key, message);
    }

    /// A caution about a key that was read before, or about the nearest table that holds it.
    pub(super) fn caution(&mut self, key: &str, message: impl Into<String>) {
        self.at(self.place(key), Severity::Caution, key, message);
    }

    fn place(&self, key: &str) -> usize {
        let mut path = key;
        loop {
            if let Some(&offset) = self.places.get(path) {
                return offset;
            }
            match path.rfind(['.', '[']) {
                Some(end) => path = &path[..end],
                None => return 0,
            }
        }
    }

    fn remember(&mut self, key: &str, offset: usize) {
        self.places.insert(key.to_owned(), offset);
    }

    /// All findings in the order of the text.
    pub(super) fn in_order(mut self) -> Vec<Finding> {
        self.found.sort_by_key(|finding| (finding.line, finding.column));
        self.found
    }
}

/// A table being read: hands out its keys one by one and at the end reports those nobody asked for.
pub(super) struct Section<'d, 't> {
    path: String,
    offset: usize,
    table: Option<&'d DeTable<'t>>,
    asked: Vec<&'static str>,
}

impl<'d, 't> Section<'d, 't> {
    /// The whole document.
    pub(super) fn root(document: &'d Spanned<DeTable<'t>>) -> Self {
        Self { path: String::new(), offset: 0, table: Some(document.get_ref()), asked: Vec::new() }
    }

    /// The path of a key of this table.
    pub(super) fn key(&self, key: &str) -> String {
        if self.path.is_empty() { key.to_owned() } else { format!("{}.{key}", self.path) }
    }

    /// An optional key, remembered as known.
    pub(super) fn optional(&mut self, findings: &mut Findings<'_>, key: &'static str) -> Option<&'d Value<'t>> {
        if !self.asked.contains(&key) {
            self.asked.push(key);
        }
        let value = self.table?.get(key)?;
        findings.remember(&self.key(key), value.span().start);
        Some(value)
    }

    /// A key that must be there; a finding if it is not.
    pub(super) fn required(&mut self, findings: &mut Findings<'_>, key: &'static str) -> Option<&'d Value<'t>> {
        let value = self.optional(findings, key);
        if value.is_none() && self.table.is_some() {
            findings.at(self.offset, Severity::Error, &self.key(key), "is missing");
        }
        value
    }

    /// A table that must be there.
    pub(super) fn section(&mut self, findings: &mut Findings<'_>, key: &'static str) -> Section<'d, 't> {
        let value = self.required(findings, key);
        self.as_section(findings, self.key(key), value)
    }

    /// A table that may be left out.
    pub(super) fn optional_section(
        &mut self,
        findings: &mut Findings<'_>,
        key: &'static str,
    ) -> Option<Section<'d, 't>> {
        let value = self.optional(findings, key)?;
        Some(self.as_section(findings, self.key(key), Some(value)))
    }

    fn as_section(&self, findings: &mut Findings<'_>, path: String, value: Option<&'d Value<'t>>) -> Section<'d, 't> {
        let offset = value.map_or(self.offset, |value| value.span().start);
        let table = value.and_then(|value| match value.get_ref() {
            DeValue::Table(table) => Some(table),
            other => {
                findings.at(offset, Severity::Error, &path, wrong_type("a table", other));
                None
            }
        });
        Section { path, offset, table, asked: Vec::new() }
    }

    /// The entries of `[[key]]` or of a list of inline tables.
    pub(super) fn sections(&mut self, findings: &mut Findings<'_>, key: &'static str) -> Vec<Section<'d, 't>> {
        let path = self.key(key);
        let Some(value) = self.required(findings, key) else { return Vec::new() };
        let DeValue::Array(entries) = value.get_ref() else {
            findings.error(&path, wrong_type("a list of tables", value.get_ref()));
            return Vec::new();
        };
        let mut sections = Vec::new();
        for (index, entry) in entries.iter().enumerate() {
            let entry_path = format!("{path}[{index}]");
            findings.remember(&entry_path, entry.span().start);
            sections.push(self.as_section(findings, entry_path, Some(entry)));
        }
        sections
    }

    /// A text, empty if it could not be had.
    pub(super) fn text(&mut self, findings: &mut Findings<'_>, key: &'static str) -> String {
        match self.required(findings, key).map(Spanned::get_ref) {
            Some(DeValue::String(text)) if !text.trim().is_empty() => text.clone().into_owned(),
            Some(DeValue::String(_)) => {
                findings.error(&self.key(key), "is empty");
                String::new()
            }
            Some(other) => {
                findings.error(&self.key(key), wrong_type("text in quotes", other));
                String::new()
            }
            None => String::new(),
        }
    }

    /// A text that may be left out; blanks are kept, since a separator may be one.
    pub(super) fn optional_text(&mut self, findings: &mut Findings<'_>, key: &'static str) -> Option<String> {
        match self.optional(findings, key)?.get_ref() {
            DeValue::String(text) if !text.is_empty() => Some(text.clone().into_owned()),
            DeValue::String(_) => {
                findings.error(&self.key(key), "is empty");
                None
            }
            other => {
                findings.error(&self.key(key), wrong_type("text in quotes", other));
                None
            }
        }
    }

    /// `true` or `false`, false if left out.
    pub(super) fn optional_flag(&mut self, findings: &mut Findings<'_>, key: &'static str) -> bool {
        let Some(value) = self.optional(findings, key) else { return false };
        value.get_ref().as_bool().unwrap_or_else(|| {
            findings.error(&self.key(key), wrong_type("true or false", value.get_ref()));
            false
        })
    }

    /// A date, `None` with a finding where it is none.
    pub(super) fn date(&mut self, findings: &mut Findings<'_>, key: &'static str) -> Option<Date> {
        let text = self.text(findings, key);
        let date = text.parse();
        if date.is_err() && !text.is_empty() {
            findings.error(&self.key(key), format!("{text:?} is no date, write it as \"2031-05-04\""));
        }
        date.ok()
    }

    /// A number without unit, within `allowed`; NaN if it could not be had.
    pub(super) fn number(
        &mut self,
        findings: &mut Findings<'_>,
        key: &'static str,
        allowed: RangeInclusive<f64>,
    ) -> f64 {
        let Some(value) = self.required(findings, key) else { return f64::NAN };
        let Some(number) = as_number(value.get_ref()) else {
            findings.error(&self.key(key), wrong_type("a plain number", value.get_ref()));
            return f64::NAN;
        };
        within(findings, &self.key(key), number, &allowed, "")
    }

    /// A quantity with its unit, in SI; `allowed` is in `unit`, which also fixes the dimension.
    pub(super) fn quantity(
        &mut self,
        findings: &mut Findings<'_>,
        key: &'static str,
        unit: &str,
        allowed: RangeInclusive<f64>,
    ) -> f64 {
        let Some(value) = self.required(findings, key) else { return f64::NAN };
        quantity_of(findings, &self.key(key), value, unit, allowed)
    }

    /// A quantity that may be left out.
    pub(super) fn optional_quantity(
        &mut self,
        findings: &mut Findings<'_>,
        key: &'static str,
        unit: &str,
        allowed: RangeInclusive<f64>,
    ) -> Option<f64> {
        let value = self.optional(findings, key)?;
        Some(quantity_of(findings, &self.key(key), value, unit, allowed))
    }

    /// A quantity and, under `uncertainty_key`, its standard uncertainty; without one it is taken as exact, with a caution.
    pub(super) fn given(
        &mut self,
        findings: &mut Findings<'_>,
        [key, uncertainty_key]: [&'static str; 2],
        unit: &str,
        allowed: RangeInclusive<f64>,
    ) -> Given {
        let value = self.quantity(findings, key, unit, allowed.clone());
        let largest = 0.0..=allowed.end().abs();
        let uncertainty = self.optional_quantity(findings, uncertainty_key, unit, largest);
        if uncertainty.is_none() && !value.is_nan() {
            let key = self.key(key);
            findings.caution(&key, format!("has no {uncertainty_key}, so it is taken as exact"));
        }
        Given { value, standard_uncertainty: uncertainty.unwrap_or(0.0) }
    }

    /// A quantity and its standard uncertainty that may both be left out; without uncertainty it is taken as exact.
    pub(super) fn optional_given(
        &mut self,
        findings: &mut Findings<'_>,
        [key, uncertainty_key]: [&'static str; 2],
        unit: &str,
        allowed: RangeInclusive<f64>,
    ) -> Option<Given> {
        let largest = 0.0..=allowed.end().abs();
        let value = self.optional_quantity(findings, key, unit, allowed);
        let uncertainty = self.optional_quantity(findings, uncertainty_key, unit, largest);
        if value.is_none() && uncertainty.is_some() {
            findings.error(&self.key(uncertainty_key), format!("stands without {key}"));
        }
        value.map(|value| Given { value, standard_uncertainty: uncertainty.unwrap_or(0.0) })
    }

    /// A number without unit that may be left out.
    pub(super) fn optional_number(
        &mut self,
        findings: &mut Findings<'_>,
        key: &'static str,
        allowed: RangeInclusive<f64>,
    ) -> Option<f64> {
        self.optional(findings, key)?;
        Some(self.number(findings, key, allowed))
    }

    /// A pressure that says "gauge" or "absolute", as absolute Pa; gauge is over `ambient_pa`.
    pub(super) fn pressure_pa(
        &mut self,
        findings: &mut Findings<'_>,
        key: &'static str,
        ambient_pa: Option<f64>,
    ) -> f64 {
        let text = self.text(findings, key);
        if text.is_empty() {
            return f64::NAN;
        }
        let (number, over_pa) = match (text.strip_suffix("absolute"), text.strip_suffix("gauge"), ambient_pa) {
            (Some(number), _, _) => (number, 0.0),
            (None, Some(number), Some(ambient_pa)) => (number, ambient_pa),
            (None, Some(_), None) => {
                findings.error(&self.key(key), "is the reference that gauge pressures start from: give it as absolute");
                return f64::NAN;
            }
            (None, None, _) => {
                let message = format!("{text:?} must say which pressure it is: \"6 bar gauge\" or \"7 bar absolute\"");
                findings.error(&self.key(key), message);
                return f64::NAN;
            }
        };
        match units::parse(number, units::Dimension::Pressure) {
            Ok(pa) if pa + over_pa > 0.0 && pa < 1e9 => pa + over_pa,
            Ok(pa) => {
                findings.error(&self.key(key), format!("is {pa} Pa, which no vessel holds"));
                f64::NAN
            }
            Err(error) => {
                findings.error(&self.key(key), error.to_string());
                f64::NAN
            }
        }
    }

    /// The entries of a list of tables that may be left out.
    pub(super) fn optional_sections(&mut self, findings: &mut Findings<'_>, key: &'static str) -> Vec<Section<'d, 't>> {
        if self.optional(findings, key).is_some() { self.sections(findings, key) } else { Vec::new() }
    }

    /// A list of texts that may be left out.
    pub(super) fn texts(&mut self, findings: &mut Findings<'_>, key: &'static str) -> Vec<String> {
        let Some(value) = self.optional(findings, key) else { return Vec::new() };
        let entries = value.get_ref().as_array().map(|entries| {
            entries.iter().map(|entry| entry.get_ref().as_str().map(str::to_owned)).collect::<Option<Vec<_>>>()
        });
        entries.flatten().unwrap_or_else(|| {
            findings.error(&self.key(key), "must be a list of texts in quotes");
            Vec::new()
        })
    }

    /// Reports every key that was never asked for.
    pub(super) fn finish(self, findings: &mut Findings<'_>) {
        for (key, _) in self.table.into_iter().flat_map(DeTable::iter) {
            if self.asked.iter().any(|asked| asked == key.get_ref()) {
                continue;
            }
            let message = match resembling(key.get_ref(), self.asked.iter().copied()) {
                Some(known) => format!("unknown key, did you mean {known:?}?"),
                None => format!("unknown key, known here: {}", self.asked.join(", ")),
            };
            findings.at(key.span().start, Severity::Error, &self.key(key.get_ref()), message);
        }
    }
}

/// The SI value of a quoted quantity, NaN with a finding if it is none or lies outside `allowed` (in `unit`).
pub(super) fn quantity_of(
    findings: &mut Findings<'_>,
    key: &str,
    value: &Value<'_>,
    unit: &str,
    allowed: RangeInclusive<f64>,
) -> f64 {
    let Some(unit) = Unit::named(unit) else { return f64::NAN };
    let offset = value.span().start;
    let text = match value.get_ref() {
        DeValue::String(text) => text,
        number if as_number(number).is_some() => {
            let advice =
                format!("has no unit, write it in quotes with its unit, such as \"{} {}\"", shown(number), unit.symbol);
            findings.at(offset, Severity::Error, key, advice);
            return f64::NAN;
        }
        other => {
            findings.at(offset, Severity::Error, key, wrong_type("a quantity in quotes", other));
            return f64::NAN;
        }
    };
    match units::parse(text, unit.dimension) {
        Ok(si) => {
            let limits = unit.si_from(*allowed.start())..=unit.si_from(*allowed.end());
            if limits.contains(&si) || within(findings, key, unit.value_from_si(si), &allowed, unit.symbol).is_finite()
            {
                si
            } else {
                f64::NAN
            }
        }
        Err(error) => {
            findings.at(offset, Severity::Error, key, error.to_string());
            f64::NAN
        }
    }
}

/// The number itself if it is allowed, else NaN and a finding.
fn within(findings: &mut Findings<'_>, key: &str, number: f64, allowed: &RangeInclusive<f64>, unit: &str) -> f64 {
    if allowed.contains(&number) {
        return number;
    }
    let space = if unit.is_empty() { "" } else { " " };
    let number = units::brief(number, 6);
    let message = format!("is {number}{space}{unit}, allowed is {} to {}{space}{unit}", allowed.start(), allowed.end());
    findings.error(key, message);
    f64::NAN
}

/// A TOML integer or float as a number.
pub(super) fn as_number(value: &DeValue<'_>) -> Option<f64> {
    match value {
        DeValue::Integer(integer) => i64::from_str_radix(integer.as_str(), integer.radix()).ok().map(|n| n as f64),
        DeValue::Float(float) => float.as_str().parse().ok(),
        _ => None,
    }
}

fn shown(value: &DeValue<'_>) -> String {
    match value {
        DeValue::Integer(integer) => integer.as_str().to_owned(),
        DeValue::Float(float) => float.as_str().to_owned(),
        other => other.type_str().to_owned(),
    }
}

fn wrong_type(wanted: &str, found: &DeValue<'_>) -> String {
    format!("must be {wanted}, found {}", with_article(found.type_str()))
}

fn with_article(word: &str) -> String {
    let article = if word.starts_with(['a', 'e', 'i', 'o', 'u']) { "an" } else { "a" };
    format!("{article} {word}")
}

/// The byte range of a syntax error, or the start of the file.
pub(super) fn start_of(span: Option<Range<usize>>) -> usize {
    span.map_or(0, |span| span.start)
}
