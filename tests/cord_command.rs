//! `tautrail cord` as a crew meets it: sheet to card, card to rig file, rig file to forecast.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

use std::fs;
use std::path::Path;
use std::process::{Command, Output};

use serde_json::Value;

#[path = "support/virtual_lot.rs"]
mod virtual_lot;

fn tautrail(folder: &Path, args: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_tautrail")).current_dir(folder).args(args).output().unwrap()
}

fn text(output: &Output) -> String {
    String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr)
}

/// A folder with the sheet and readings of a virtual lot.
fn bench(seed: u64) -> tempfile::TempDir {
    let folder = tempfile::tempdir().unwrap();
    let (sheet, csv) = virtual_lot::sheet(seed, 4);
    fs::write(folder.path().join("sheet.toml"), sheet).unwrap();
    fs::write(folder.path().join("lot.csv"), csv).unwrap();
    folder
}

/// The rehearsal's rig with its cords taken from a card, and what else is appended.
fn rig_with_card(more: &str) -> String {
    let rig = include_str!("../tools/rehearsal/north-pier.toml");
    let (before, after) = rig.split_once("[cords]").unwrap();
    let (_, losses) = after.split_once("[losses]").unwrap();
    format!("{before}[cords]\ncount = 6\ntravel_ratio = 1.0\ncard = \"card.toml\"\n\n[losses]{losses}\n{more}")
}

#[test]
fn a_sheet_becomes_a_card_that_the_forecast_uses_whole() {
    let folder = bench(1);
    let made = tautrail(folder.path(), &["cord", "card", "--out", "card.toml", "--page", "page.html", "sheet.toml"]);
    assert_eq!(made.status.code(), Some(0), "{}", text(&made));
    for part in [
        "straight line",
        "at steps left out",
        "lost in a cycle",
        "between cords",
        "one turning point",
        "no safety device",
    ] {
        assert!(text(&made).contains(part), "{part:?} is missing in {}", text(&made));
    }
    let again = tautrail(folder.path(), &["cord", "card", "--out", "card.toml", "sheet.toml"]);
    assert_eq!(again.status.code(), Some(2));
    assert!(text(&again).contains("already there"), "{}", text(&again));

    fs::write(folder.path().join("rig.toml"), rig_with_card("")).unwrap();
    let checked = tautrail(folder.path(), &["check", "--no-ports", "rig.toml"]);
    assert_eq!(checked.status.code(), Some(0), "{}", text(&checked));
    assert!(text(&checked).contains("card card.toml: lot virtual 1, 4 cords tested to"), "{}", text(&checked));
    let speed = |rig: &str| {
        let output = tautrail(folder.path(), &["forecast", "--json", "--draws", "200", rig]);
        let value: Value = serde_json::from_slice(&output.stdout).unwrap_or_else(|_| panic!("{}", text(&output)));
        value["quantities"][0]["best"].as_f64().unwrap()
    };
    let by_card = speed("rig.toml");
    let card = fs::read_to_string(folder.path().join("card.toml")).unwrap();
    let stiffer =
        card.replace("curve_cycle", "curve_relaxed_to = \"80 %\"\nloading_curve_relaxed_to = \"80 %\"\ncurve_cycle");
    fs::write(folder.path().join("card.toml"), stiffer).unwrap();
    assert!(
        speed("rig.toml") > 1.08 * by_card,
        "a quarter more tension must show: {} against {by_card}",
        speed("rig.toml")
    );
}

#[test]
fn a_card_that_is_missing_or_stands_beside_a_curve_is_an_error_with_its_place() {
    let folder = bench(2);
    fs::write(folder.path().join("rig.toml"), rig_with_card("")).unwrap();
    let checked = tautrail(folder.path(), &["check", "--no-ports", "rig.toml"]);
    assert_eq!(checked.status.code(), Some(1));
    assert!(text(&checked).contains("cords.card: card.toml can't be read"), "{}", text(&checked));
    assert_eq!(tautrail(folder.path(), &["cord", "card", "--out", "card.toml", "sheet.toml"]).status.code(), Some(0));
    let both = rig_with_card("").replace("card = \"card.toml\"", "card = \"card.toml\"\nfree_length = \"2.7 m\"");
    fs::write(folder.path().join("rig.toml"), both).unwrap();
    let checked = tautrail(folder.path(), &["check", "--no-ports", "rig.toml"]);
    assert!(text(&checked).contains("cords.free_length: stands beside card"), "{}", text(&checked));
}

#[test]
fn forty_six_kilograms_on_a_pair_of_wings_stand_for_ten_g() {
    // Common practice, no published source: 46 kg spread evenly over a pair of wings stands for a 10 g acceleration (implied
    // accelerated mass 4.6 kg).
    let proof = "[proof_load]\nstructure = \"survey-8, both wings\"\nmasses = \"46 kg\"\nspread = \"evenly over the span\"\n\
                 own_weight = \"not counted\"\naccelerated_mass = \"4.6 kg\"\ndirection = \"aft\"\nmargin = 1.25\n\
                 date = \"2031-04-02\"\ninspector = \"an inspector\"\n";
    let folder = bench(3);
    let rig = format!("{}\n{proof}", include_str!("../tools/rehearsal/north-pier.toml"));
    fs::write(folder.path().join("rig.toml"), rig).unwrap();
    let checked = text(&tautrail(folder.path(), &["check", "--no-ports", "rig.toml"]));
    for part in
        ["stand for 10.00 g aft", "limit 8.00 g", "structural sign-off is licensed practice", "10.00 g is above 8.00 g"]
    {
        assert!(checked.contains(part), "{part:?} is missing in {checked}");
    }
    let forecast = text(&tautrail(folder.path(), &["forecast", "--draws", "100", "rig.toml"]));
    assert!(forecast.contains("limit 8.00 g"), "{forecast}");
}

#[test]
fn the_sheets_mistakes_are_told_and_no_card_is_written() {
    let folder = bench(4);
    let csv = fs::read_to_string(folder.path().join("lot.csv")).unwrap();
    let refused = |csv: &str, part: &str| {
        fs::write(folder.path().join("lot.csv"), csv).unwrap();
        let output = tautrail(folder.path(), &["cord", "card", "--out", "card.toml", "sheet.toml"]);
        assert_eq!(output.status.code(), Some(2), "{}", text(&output));
        assert!(text(&output).contains(part), "{part:?} is missing in {}", text(&output));
        assert!(!folder.path().join("card.toml").exists());
    };
    refused(&csv.replace("weight [kg]", "force [kg]"), "\"kg\" is a mass, not a force");
    refused(&csv.replace("weight [kg]", "weight"), "has no unit");
    refused(&csv.replacen("load, 5,", "load, NaN,", 1), "no number");
    let two: Vec<&str> = csv.lines().take(3).collect();
    refused(&two.join("\n"), "at least 4 are needed");
    fs::remove_file(folder.path().join("lot.csv")).unwrap();
    let output = tautrail(folder.path(), &["cord", "card", "sheet.toml"]);
    assert!(text(&output).contains("lot.csv: cannot be read"), "{}", text(&output));
}
