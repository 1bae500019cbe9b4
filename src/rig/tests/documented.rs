//! RIG-FILE.md is held to the reader: the same keys, the same ranges.

use std::collections::BTreeSet;

use toml::{Table, Value};

use super::super::{attached, testing::EVERY_KEY};
use super::check;

const PAGE: &str = include_str!("../RIG-FILE.md");

/// Key and range of every row of the page's tables of keys.
fn documented() -> Vec<(&'static str, &'static str)> {
    let row = |line: &'static str| {
        let (key, _) = line.strip_prefix("| `")?.split_once('`')?;
        let range = line.trim_end_matches('|').rsplit('|').next()?.trim();
        Some((key, range))
    };
    PAGE.lines().filter_map(row).collect()
}

/// The file of every key with the first entry at `path` replaced by what `change` makes of it.
fn changed(path: &str, change: impl FnOnce(&mut Table, &str)) -> String {
    let mut table: Table = EVERY_KEY.parse().expect("it is TOML");
    let (parents, last) = path.rsplit_once('.').unwrap_or(("", path));
    let mut at = &mut table;
    for part in parents.split('.').filter(|part| !part.is_empty()) {
        let next = match at.get_mut(part).expect(path) {
            Value::Array(entries) => &mut entries[0],
            other => other,
        };
        at = next.as_table_mut().expect(path);
    }
    change(at, last);
    let records = attached::take_apart(&EVERY_KEY).1;
    attached::join(&toml::to_string(&table).expect("it can be written"), &records)
}

/// Keys that the reader knows in the table at `path`, from what it answers to one it does not know.
fn known_in(path: &str) -> Vec<String> {
    let bogus = if path.is_empty() { "zzzzzzzzzz".to_owned() } else { format!("{path}.zzzzzzzzzz") };
    let text = changed(&bogus, |table, key| {
        table.insert(key.to_owned(), Value::Boolean(true));
    });
    let findings = check(&text).findings;
    let answer = findings.iter().find(|finding| finding.key.ends_with("zzzzzzzzzz")).expect(path);
    let (_, known) = answer.message.split_once("known here: ").expect(path);
    let prefix = if path.is_empty() { String::new() } else { format!("{path}.") };
    known.split(", ").map(|key| format!("{prefix}{key}")).collect()
}

#[test]
fn the_file_of_every_key_is_understood_without_a_finding() {
    assert_eq!(check(&EVERY_KEY).findings, []);
}

#[test]
fn the_page_has_every_key_and_no_other() {
    let tables = [
        "site",
        "rail",
        "rail_support",
        "shuttle",
        "payload",
        "cords",
        "gas",
        "force_table",
        "losses",
        "limits",
        "plan",
        "reading",
        "correlation",
        "stage",
        "cord",
        "proof_load",
        "device",
        "input",
        "channel",
    ];
    let deeper = [
        "cords.curve",
        "cords.loading_curve",
        "cords.relaxation",
        "payload.thrust",
        "losses.along_x",
        "gas.valve",
        "device.text",
        "device.text.column",
        "force_table.points",
        "channel.calibration",
    ];
    let more_cords = "more_cords.zero_mark".to_owned();
    let mut known: BTreeSet<String> =
        known_in("").into_iter().filter(|key| !tables.contains(&key.as_str()) && key != "more_cords").collect();
    for path in tables.iter().chain(&deeper) {
        known.extend(known_in(path));
    }
    known.insert(more_cords.clone());
    let as_cords = known_in("cords").into_iter().map(|key| format!("more_{key}"));
    assert_eq!(known_in("more_cords").into_iter().collect::<BTreeSet<_>>(), as_cords.chain([more_cords]).collect());
    let documented: BTreeSet<String> = documented().into_iter().map(|(key, _)| key.to_owned()).collect();
    assert_eq!(documented, known);
}

#[test]
fn every_range_on_the_page_is_the_one_in_force() {
    let mut n_ranges = 0;
    for (key, range) in documented() {
        let Some((_, upper)) = range.split_once(" to ") else { continue };
        let (number, unit) = upper.split_once(' ').unwrap_or((upper, ""));
        let beyond = number.parse::<f64>().expect(range).abs() * 1.5 + 1.0;
        let text = changed(key, |table, key| {
            let old = table.get(key).expect("the file has every key");
            let new = match old.as_str().and_then(|text| text.split_once(' ')) {
                Some((_, old_unit)) => {
                    Value::String(format!("{beyond} {}", if unit.is_empty() { old_unit } else { unit }))
                }
                None => Value::Float(beyond),
            };
            table.insert(key.to_owned(), new);
        });
        let findings = check(&text).findings;
        let allowed = format!("allowed is {range}");
        let said =
            findings.iter().any(|finding| finding.key.replace("[0]", "") == key && finding.message.contains(&allowed));
        assert!(said, "{key}: {range}, but {findings:?}");
        n_ranges += 1;
    }
    assert!(n_ranges > 30, "{n_ranges} ranges were found on the page");
}

#[test]
fn the_page_lists_every_unit_that_is_understood() {
    use crate::units::Dimension;
    let rows = [
        ("length", Dimension::Length),
        ("area", Dimension::Area),
        ("mass", Dimension::Mass),
        ("density", Dimension::Density),
        ("duration", Dimension::Duration),
        ("speed", Dimension::Speed),
        ("acceleration", Dimension::Acceleration),
        ("force", Dimension::Force),
        ("angle", Dimension::Angle),
        ("ratio", Dimension::Ratio),
        ("volume", Dimension::Volume),
        ("stiffness", Dimension::Stiffness),
        ("temperature", Dimension::Temperature),
    ];
    for (word, dimension) in rows {
        let row = PAGE.lines().find(|line| line.starts_with(&format!("| {word} | "))).expect(word);
        let separators = |letter: char| letter == ' ' || matches!(letter, ',' | '(' | ')' | '|');
        let listed: BTreeSet<&str> = row.split(separators).collect();
        for unit in dimension.units() {
            assert!(listed.contains(unit.symbol), "{} in {row}", unit.symbol);
        }
    }
}
