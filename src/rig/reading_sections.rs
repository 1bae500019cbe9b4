//! `[reading]` and `[[input]]`: how trials are read, and what the devices' digital inputs mean.

use super::channels::known_device;
use super::details::{FilterStartUp, Input, InputMeaning, ReadingSettings, ThreeMs};
use super::document::{Findings, Section, as_number};
use super::{Device, Given};

const CLASSES: [u32; 4] = [60, 180, 600, 1000];

pub(super) fn reading(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> ReadingSettings {
    let usual = ReadingSettings::default();
    let Some(mut table) = root.optional_section(findings, "reading") else { return usual };
    let settings = ReadingSettings {
        classes: classes(&mut table, findings).unwrap_or(usual.classes),
        least_rate_per_class: table
            .optional_number(findings, "minimum_rate", 5.0..=100.0)
            .unwrap_or(usual.least_rate_per_class),
        start_up: one_of(
            &mut table,
            findings,
            "start_up",
            &[("hold", FilterStartUp::Hold), ("zero", FilterStartUp::Zero)],
        )
        .unwrap_or(usual.start_up),
        three_ms: one_of(
            &mut table,
            findings,
            "three_ms",
            &[("contiguous", ThreeMs::Contiguous), ("cumulative", ThreeMs::Cumulative)],
        )
        .unwrap_or(usual.three_ms),
    };
    table.finish(findings);
    settings
}

fn classes(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Option<Vec<u32>> {
    let value = table.optional(findings, "cfc")?;
    let known = |number: f64| CLASSES.into_iter().find(|class| f64::from(*class) == number);
    let entries = value.get_ref().as_array().map(|entries| {
        entries.iter().map(|entry| as_number(entry.get_ref()).and_then(known)).collect::<Option<Vec<u32>>>()
    });
    match entries.flatten().filter(|classes| !classes.is_empty()) {
        Some(mut classes) => {
            classes.sort_unstable();
            classes.dedup();
            Some(classes)
        }
        None => {
            findings.error(&table.key("cfc"), "must be a list of classes out of 60, 180, 600 and 1000");
            None
        }
    }
}

/// One of a few words; `None` when the key is left out or is none of them.
fn one_of<T: Copy>(
    table: &mut Section<'_, '_>,
    findings: &mut Findings<'_>,
    key: &'static str,
    words: &[(&str, T)],
) -> Option<T> {
    table.optional(findings, key)?;
    let text = table.text(findings, key);
    let found = words.iter().find(|(word, _)| *word == text).map(|(_, meaning)| *meaning);
    if found.is_none() && !text.is_empty() {
        let known: Vec<String> = words.iter().map(|(word, _)| format!("{word:?}")).collect();
        findings.error(&table.key(key), format!("{text:?} is not known, known: {}", known.join(", ")));
    }
    found
}

pub(super) fn inputs(root: &mut Section<'_, '_>, findings: &mut Findings<'_>, devices: &[Device]) -> Vec<Input> {
    let mut inputs: Vec<Input> = Vec::new();
    for mut entry in root.optional_sections(findings, "input") {
        let device = known_device(&mut entry, findings, devices);
        let key = entry.key("number");
        let number = entry.number(findings, "number", 0.0..=255.0);
        if number.fract() != 0.0 {
            findings.error(&key, format!("is {number}, inputs are counted in whole numbers from 0"));
        }
        let meaning = meaning(&mut entry, findings);
        let number = number as u8;
        if inputs.iter().any(|other| other.device == device && other.number == number) {
            findings.error(&key, format!("input {number} of device {device:?} stands here twice"));
        }
        entry.finish(findings);
        inputs.extend(meaning.map(|meaning| Input { device, number, meaning }));
    }
    inputs
}

fn meaning(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Option<InputMeaning> {
    let is_gate = one_of(entry, findings, "means", &[("release", false), ("beam_gate", true)]);
    let place = ["x", "x_uncertainty"];
    let flag = ["flag", "flag_uncertainty"];
    let mut given = |keys: [&'static str; 2], unit: &str, most: f64| -> Option<Given> {
        entry.optional_given(findings, keys, unit, 0.0..=most)
    };
    let (x_m, flag_m) = (given(place, "m", 200.0), given(flag, "mm", 5000.0));
    match (is_gate, x_m, flag_m) {
        (Some(false), None, None) => Some(InputMeaning::Release),
        (Some(true), Some(x_m), Some(flag_m)) => Some(InputMeaning::BeamGate { x_m, flag_m }),
        (Some(true), ..) => {
            findings.error(&entry.key("means"), "a beam gate needs x (where its beam crosses) and flag (its length)");
            None
        }
        (Some(false), ..) => {
            findings.error(&entry.key("means"), "a release input has neither x nor flag");
            None
        }
        (None, ..) => {
            findings.error(&entry.key("means"), "must be \"release\" or \"beam_gate\"");
            None
        }
    }
}
