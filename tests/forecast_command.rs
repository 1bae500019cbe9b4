//! `tautrail forecast` and `tautrail stage` as a crew meets them.

#![allow(clippy::unwrap_used, reason = "a test that cannot go on stops here")]

use std::process::{Command, Output};

use serde_json::Value;

fn tautrail(args: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_tautrail")).current_dir(env!("CARGO_MANIFEST_DIR")).args(args).output().unwrap()
}

fn text(output: &Output) -> String {
    String::from_utf8(output.stdout.clone()).unwrap()
}

fn json(output: &Output) -> Value {
    serde_json::from_slice(&output.stdout).unwrap()
}

const NORTH_PIER: &str = "tools/rehearsal/north-pier.toml";
const SOUTH_MOLE: &str = "tools/rehearsal/every-key.toml";

#[test]
fn a_forecast_names_quantity_class_and_place_and_says_it_decides_nothing() {
    let output = tautrail(&["forecast", "--draws", "200", NORTH_PIER]);
    assert_eq!(output.status.code(), Some(0));
    let shown = text(&output);
    for part in
        ["specific force along the rail at the payload, CFC 60", "window met under both limits", "no safety device"]
    {
        assert!(shown.contains(part), "{part:?} is missing in {shown}");
    }
    assert!(!shown.contains("pressure-vessel"));
}

#[test]
fn a_gas_rig_is_pointed_to_pressure_vessel_rules() {
    let shown = text(&tautrail(&["forecast", "--draws", "100", SOUTH_MOLE]));
    assert!(shown.contains("pressure-vessel rules") && shown.contains("from gas"), "{shown}");
}

#[test]
fn programs_get_both_ways_with_their_intervals() {
    let output = tautrail(&["forecast", "--json", "--draws", "500", "--held-at", "590 N", NORTH_PIER]);
    let value = json(&output);
    assert_eq!((&value["kind"], &value["draws"]), (&Value::from("drawn"), &Value::from(500)));
    let speed = &value["quantities"][0];
    assert_eq!(speed["name"], "launch_speed");
    let (best, low, high) = (&speed["best"], &speed["monte_carlo"]["low"], &speed["monte_carlo"]["high"]);
    assert!(low.as_f64() < best.as_f64() && best.as_f64() < high.as_f64(), "{speed}");
    assert!(speed["first_order"]["standard_uncertainty"].as_f64() > Some(0.01));
    assert_eq!(json(&tautrail(&["forecast", "--json", "--draws", "500", "--held-at", "590 N", NORTH_PIER])), value);
}

#[test]
fn the_page_stands_alone_and_shows_the_band() {
    let folder = tempfile::tempdir().unwrap();
    let page = folder.path().join("forecast.html");
    let output = tautrail(&["forecast", "--draws", "100", "--page", page.to_str().unwrap(), NORTH_PIER]);
    assert_eq!(output.status.code(), Some(0));
    let html = std::fs::read_to_string(page).unwrap();
    assert!(html.contains("<svg") && html.contains("95 % of the draws") && html.contains("no safety device"));
    assert!(!html.contains("http://www.w3.org/1999/xhtml\"><script") && !html.contains("src=\"http"));
}

#[test]
fn solve_answers_with_a_setting_or_with_the_reason() {
    let found = tautrail(&["forecast", "--solve", "draw", "--json", NORTH_PIER]);
    assert_eq!(found.status.code(), Some(0));
    assert_eq!(json(&found)["surely"], true);
    let folder = tempfile::tempdir().unwrap();
    let slow = folder.path().join("slow.toml");
    let rig = std::fs::read_to_string(format!("{}/{NORTH_PIER}", env!("CARGO_MANIFEST_DIR"))).unwrap();
    let rig = rig.replace("\"15 m/s\"", "\"35 m/s\"").replace("\"18 m/s\"", "\"38 m/s\"");
    std::fs::write(&slow, rig).unwrap();
    let none = tautrail(&["forecast", "--solve", "draw", slow.to_str().unwrap()]);
    assert_eq!(none.status.code(), Some(1));
    assert!(text(&none).contains("no draw meets the window") && text(&none).contains("the window begins at 35.00"));
}

#[test]
fn a_sweep_has_a_row_for_each_setting_and_nonsense_is_refused() {
    let rows = json(&tautrail(&["forecast", "--json", "--sweep", "cords=3:7:5", NORTH_PIER]));
    assert_eq!(rows["rows"].as_array().unwrap().len(), 5);
    let wrong = tautrail(&["forecast", "--sweep", "draw=4:2:9", NORTH_PIER]);
    assert_eq!(wrong.status.code(), Some(2));
}

#[test]
fn stages_come_with_forecast_gate_and_what_to_inspect() {
    let stages = json(&tautrail(&["stage", "--json", "--draws", "100", SOUTH_MOLE]));
    let rows = stages["stages"].as_array().unwrap();
    assert_eq!(rows.len(), 2);
    assert!(
        rows[0]["forecast"]["launch_speed"]["best"].as_f64() < rows[1]["forecast"]["launch_speed"]["best"].as_f64()
    );
    assert_eq!(rows[1]["inspect"][0], "cord ends");
    let none = tautrail(&["stage", NORTH_PIER]);
    assert_eq!(none.status.code(), Some(1));
    assert!(text(&none).contains("names no stage"));
}
