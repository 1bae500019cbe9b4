//! The launch model against oracles in Python that share nothing with it but the numbers (tools/oracles/*.py).

#![allow(clippy::unwrap_used, reason = "a test that cannot go on stops here")]

#[path = "support/full_featured.rs"]
mod full_featured;
mod support;

use full_featured::{curve, full_featured, number, setup_of};
use serde_json::{Value, json};
use tautrail::model::{CordSet, Curve, EventKind, FAST, GasPath, GasSource, LaunchRun, LaunchSetup, simulate};

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
    check_anchor(&run, expected["anchor"].as_array().unwrap());
}

/// Tension at the anchor: a few per cent of the hold's in the mean, and where waves arrive as far as their fronts are steep.
#[track_caller]
fn check_anchor(run: &LaunchRun, anchor: &[Value]) {
    let held_n = number(&anchor[0][1]);
    let off =
        |point: &Value| (run.at_time(number(&point[0])).unwrap().anchor_tension_n - number(&point[1])).abs() / held_n;
    let all: Vec<f64> = anchor.iter().map(off).collect();
    let rms = (all.iter().map(|off| off * off).sum::<f64>() / all.len() as f64).sqrt();
    let worst = all.iter().copied().fold(0.0, f64::max);
    assert!(rms < 0.02 && worst < 0.08, "anchor tension: rms {rms:.4}, worst {worst:.4} of the hold's");
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

#[test]
fn gas_through_a_valve_launches_as_an_implicit_method_says() {
    for valve_area_m2 in [4e-5, 1.2e-4, 1e-3] {
        let source = GasSource {
            charged_pressure_pa: 6e5,
            ambient_pressure_pa: 101_325.0,
            back_pressure_pa: 0.0,
            vessel_volume_m3: 0.004,
            dead_volume_m3: 5e-5,
            temperature_k: 290.0,
            polytropic_exponent: 1.3,
            piston_area_m2: 5e-4,
            travel_ratio: 1.0,
            stroke_m: 2.5,
            hold_s: 0.0,
            leak_time_s: f64::INFINITY,
            path: GasPath::Valve { valve_area_m2, line_area_m2: 2e-3, opening_s: 0.02 },
        };
        let numbers = json!({
            "exponent": 1.3, "charged": 6e5, "temperature": 290.0, "vessel": 0.004, "dead": 5e-5, "piston": 5e-4,
            "ambient": 101_325.0, "valve": valve_area_m2, "line": 2e-3, "opening": 0.02, "stroke": 2.5, "mass": 6.0,
        });
        let expected = oracle(include_str!("../tools/oracles/launch_gas.py"), &numbers);
        let mut setup = LaunchSetup::bare(6.0, 4.0);
        setup.gas = vec![source];
        for (relative_tolerance, relative) in [(1e-10, 1e-7), (FAST, 1e-5)] {
            setup.relative_tolerance = relative_tolerance;
            let run = simulate(&setup).unwrap();
            let end = run.event(EventKind::StrokeEnd { gas: 0 }).unwrap();
            assert_close(&format!("time, {valve_area_m2} m²"), end.t_s, number(&expected["time"]), relative);
            assert_close(&format!("speed, {valve_area_m2} m²"), end.v_mps, number(&expected["speed"]), relative);
        }
    }
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
