//! `tautrail forecast` and `tautrail stage` as a crew meets them.

#![allow(clippy::unwrap_used, reason = "a test that cannot go on stops here")]

#[path = "support/rehearsal_rig.rs"]
mod rehearsal_rig;

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
    for part in [
        "peak g, CFC 60: specific force along the rail at the payload",
        "window met under both limits",
        "no safety device",
    ] {
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
    let rig = rehearsal_rig::rig_text("north-pier.toml");
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
    let parted = tautrail(&["forecast", "--sweep", "cords=3:7:4", NORTH_PIER]);
    assert_eq!(parted.status.code(), Some(2));
    let said = String::from_utf8(parted.stderr).unwrap();
    assert!(said.contains("cords come whole") && said.contains("cords=3:7:5"), "{said}");
}

#[test]
fn the_forecasts_tables_fit_eighty_columns() {
    for args in [["forecast", "--draws", "100"], ["forecast", "--sweep", "cords=3:5:3"]] {
        let shown = text(&tautrail(&[args.as_slice(), &[NORTH_PIER]].concat()));
        let rows = shown.lines().filter(|line| line.contains("   "));
        let widths: Vec<usize> = rows.map(|line| line.chars().count()).collect();
        assert!(widths.len() > 3 && widths.iter().all(|width| *width <= 80), "{widths:?}: {shown}");
    }
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
}

#[test]
fn the_build_up_goes_from_few_cords_and_a_dummy_mass_to_the_payload() {
    let listed = tautrail(&["stage", "--json", "--draws", "100", NORTH_PIER]);
    assert_eq!(listed.status.code(), Some(0));
    let stages = json(&listed);
    let rows = stages["stages"].as_array().unwrap();
    let cords: Vec<u64> = rows.iter().filter_map(|row| row["cords"].as_u64()).collect();
    assert_eq!(cords, [3, 5, 6]);
    let speeds: Vec<f64> = rows.iter().filter_map(|row| row["forecast"]["launch_speed"]["best"].as_f64()).collect();
    assert!(speeds.len() == 3 && speeds.is_sorted(), "{speeds:?}");
}

#[test]
fn a_rig_without_stages_is_told_what_to_write() {
    let folder = tempfile::tempdir().unwrap();
    let path = folder.path().join("no-stages.toml");
    let rig = rehearsal_rig::rig_text("north-pier.toml");
    let (without, _) = rig.split_once("[[stage]]").unwrap();
    std::fs::write(&path, without).unwrap();
    let none = tautrail(&["stage", path.to_str().unwrap()]);
    assert_eq!(none.status.code(), Some(1));
    let shown = text(&none);
    assert!(shown.contains("names no stage") && shown.contains("add one [[stage]] table"), "{shown}");
}

#[test]
fn losses_still_to_be_fitted_are_flagged_in_every_output() {
    let folder = tempfile::tempdir().unwrap();
    let page = folder.path().join("forecast.html");
    let shown = text(&tautrail(&["forecast", "--draws", "100", "--page", page.to_str().unwrap(), SOUTH_MOLE]));
    assert!(shown.contains("NOT FITTED YET: constant friction"), "{shown}");
    assert!(std::fs::read_to_string(page).unwrap().contains("NOT FITTED YET"));
    for args in [["forecast", "--sweep", "cords=3:4:2"], ["stage", "--draws", "100"]] {
        let shown = text(&tautrail(&[args.as_slice(), &[SOUTH_MOLE]].concat()));
        assert!(shown.contains("NOT FITTED YET: viscous loss"), "{shown}");
    }
}

#[test]
fn an_uncertain_wind_widens_the_airspeed_more_than_the_launch_speed() {
    let value = json(&tautrail(&["forecast", "--json", "--draws", "1000", NORTH_PIER]));
    let of = |name: &str| {
        let quantity = value["quantities"].as_array().unwrap().iter().find(|entry| entry["name"] == name).unwrap();
        quantity["monte_carlo"]["standard_deviation"].as_f64().unwrap()
    };
    // The wind's 0.5 m/s adds to the launch speed's own spread, almost in quadrature.
    let expected = of("launch_speed").hypot(0.5);
    assert!((of("airspeed_at_separation") / expected - 1.0).abs() < 0.1, "{value}");
    let energy = value["energy_at_separation"].as_array().unwrap();
    assert!(energy.iter().all(|entry| entry["low"].as_f64() <= entry["high"].as_f64() && entry["n"] == 1000));
    assert!(energy.iter().any(|entry| entry["name"] == "payload kinetic"));
}
