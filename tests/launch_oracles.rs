//! The launch model against oracles in Python that share nothing with it but the numbers (tools/oracles/*.py).

#![allow(clippy::unwrap_used, reason = "a test that cannot go on stops here")]

#[path = "support/full_featured.rs"]
mod full_featured;
mod support;

use full_featured::{curve, full_featured, number, setup_of};
use serde_json::{Value, json};
use tautrail::model::{CordSet, Curve, EventKind, LaunchSetup, simulate};

#[track_caller]
fn assert_close(what: &str, found: f64, expected: f64, relative: f64) {
    let off = (found - expected).abs() / expected.abs();
    assert!(off <= relative, "{what}: found {found}, expected {expected}, off by {off:e}, allowed {relative:e}");
}

fn oracle(script: &str, numbers: &Value) -> Value {
    serde_json::from_str(&support::run_oracle(script, &[&numbers.to_string()])).unwrap()
}

fn name(kind: EventKind) -> String {
    match kind {
        EventKind::WaveOver { set } => format!("wave over {set}"),
        EventKind::CordsSlack { set } => format!("slack {set}"),
        EventKind::Separation => "separation 0".to_owned(),
        EventKind::BrakeContact => "brake 0".to_owned(),
        EventKind::Rest => "rest 0".to_owned(),
        other => format!("{other:?}"),
    }
}

#[test]
fn a_full_featured_launch_agrees_with_hamiltons_equations() {
    const RELATIVE: f64 = 1e-7;
    let numbers = full_featured();
    let run = simulate(&setup_of(&numbers)).unwrap();
    let expected = oracle(include_str!("../tools/oracles/launch_full.py"), &numbers);
    let events = expected["events"].as_array().unwrap();
    let names: Vec<String> = run.events[1..].iter().map(|event| name(event.kind)).collect();
    let wanted: Vec<&str> = events.iter().map(|event| event[0].as_str().unwrap()).collect();
    assert_eq!(names, wanted);
    for (event, wanted) in run.events[1..].iter().zip(events) {
        let of = |what: &str| format!("{} of {}", what, name(event.kind));
        assert_close(&of("time"), event.t_s, number(&wanted[1]), RELATIVE);
        assert_close(&of("place"), event.x_m, number(&wanted[2]), RELATIVE);
        if event.kind != EventKind::Rest {
            assert_close(&of("speed"), event.v_mps, number(&wanted[3]), RELATIVE);
            assert_close(&of("ground speed"), event.ground_v_mps, number(&wanted[4]), RELATIVE);
        }
    }
    assert_close("kinematic peak", run.answers.peak_kinematic_mps2, number(&expected["peak"]), RELATIVE);
    let energy = run.energy_at_end;
    assert!(energy.closure_j.abs() <= 1e-8 * energy.stored_j, "{energy:?}");
}

/// Invented cord with the usual course of rubber, N against elongation.
const RUBBER: &str = "[[0,0],[0.1,12],[0.25,24],[0.5,38],[0.75,50],[1.0,64],[1.25,83],[1.5,120]]";
const LINEAR: &str = "[[0,0],[1.5,120]]";

#[track_caller]
fn check_chain(card: &str, one_cord_kg: f64) {
    let card: Value = serde_json::from_str(card).unwrap();
    let numbers = json!({
        "curve": card, "count": 6.0, "free_length": 2.7, "mass": one_cord_kg, "stretch": 4.0, "carried": 8.6,
        "resistance": 20.0, "segments": 80,
    });
    let expected = oracle(include_str!("../tools/oracles/launch_chain.py"), &numbers);
    let mut setup = LaunchSetup::bare(2.4, 7.0);
    setup.payload_mass_kg = 6.2;
    setup.losses.friction_n = 20.0;
    setup.cords = vec![CordSet { mass_kg: one_cord_kg, ..CordSet::simple(6.0, 2.7, 4.0, curve(&card)) }];
    let run = simulate(&setup).unwrap();
    let top = run.samples.iter().map(|sample| sample.v_mps).fold(0.0, f64::max);
    assert_close("release acceleration", run.samples[0].a_mps2, number(&expected["acceleration"]), 0.01);
    assert_close("speed", top, number(&expected["speed"]), 0.007);
}

#[test]
fn heavy_linear_cords_launch_as_a_chain_of_masses_does() {
    check_chain(LINEAR, 0.15);
    check_chain(LINEAR, 0.3);
}

#[test]
fn heavy_rubber_cords_launch_as_a_chain_of_masses_does() {
    check_chain(RUBBER, 0.15);
    check_chain(RUBBER, 0.3);
}

/// Rows (stretch, stress in MPa) of L. R. G. Treloar, Trans. Faraday Soc. 40 (1944) 59-70.
fn treloar() -> Vec<(f64, f64)> {
    let text = include_str!("reference/treloar_1944_uniaxial.csv");
    let rows = text.lines().filter(|line| !line.starts_with('#')).skip(1);
    rows.map(|row| {
        let cells: Vec<f64> = row.split(',').map(|cell| cell.parse().unwrap()).collect();
        (cells[0], cells[2])
    })
    .collect()
}

/// Force over its course, stored energy and launch speed of one massless rubber cord against quadrature.
#[track_caller]
fn check_rubber(what: &str, points: &[(f64, f64)], expected: &Value, relative: f64) {
    const FREE_LENGTH_M: f64 = 1.5;
    let elongation = 5.0;
    let zero_mark_x_m = elongation * FREE_LENGTH_M;
    let mut setup = LaunchSetup::bare(3.0, zero_mark_x_m + 1.0);
    setup.cords = vec![CordSet::simple(1.0, FREE_LENGTH_M, zero_mark_x_m, Curve::through(points).unwrap())];
    let curve = expected[format!("{what}_curve")].as_array().unwrap();
    for (i, force) in curve.iter().enumerate().skip(1) {
        let x_m = zero_mark_x_m * (1.0 - i as f64 / 12.0);
        assert_close(&format!("{what}: force at x = {x_m}"), setup.cord_pull_n(x_m), number(force), relative);
    }
    let run = simulate(&setup).unwrap();
    let slack = run.event(EventKind::CordsSlack { set: 0 }).unwrap();
    let wanted = &expected[what];
    assert_close(&format!("{what}: energy"), run.energy_at_end.stored_j, number(&wanted["energy_j"]), relative);
    assert_close(&format!("{what}: speed"), slack.v_mps, number(&wanted["speed_mps"]), relative);
}

#[test]
fn rubber_cords_launch_as_their_published_stress_says() {
    const AREA_M2: f64 = 1e-4;
    // Ogden's three terms for Treloar's rubber, MPa (tests/reference/ogden_treloar.toml; from memory there).
    let (mu, alpha) = ([0.63, 0.0012, -0.01], [1.3, 5.0, -2.0]);
    let numbers = json!({
        "mu": mu, "alpha": alpha, "area_m2": AREA_M2, "free_length_m": 1.5, "elongation": 5.0, "mass_kg": 3.0,
        "treloar": treloar(),
    });
    let expected = oracle(include_str!("../tools/oracles/rubber.py"), &numbers);
    let ogden_n = |e: f64| {
        let stretch = 1.0 + e;
        let terms = mu.iter().zip(alpha);
        terms.map(|(m, a)| m * (stretch.powf(a - 1.0) - stretch.powf(-a / 2.0 - 1.0))).sum::<f64>() * 1e6 * AREA_M2
    };
    let ogden: Vec<(f64, f64)> = (0..=300).map(|i| 6.0 * f64::from(i) / 300.0).map(|e| (e, ogden_n(e))).collect();
    check_rubber("ogden", &ogden, &expected, 2e-4);
    let measured: Vec<(f64, f64)> = treloar().iter().map(|(l, mpa)| (l - 1.0, mpa * 1e6 * AREA_M2)).collect();
    check_rubber("treloar", &measured, &expected, 1e-9);
}
