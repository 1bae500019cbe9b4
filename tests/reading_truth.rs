//! Reading and replay against what truly happened on the virtual rig: hidden calibration errors, clocks, noise, recoil.

#[path = "support/virtual_trial.rs"]
mod virtual_trial;

use tautrail::reading::{Outcome, Reading, read};
use tautrail::replay::{Replay, replay};
use virtual_rig::performance::Options;
use virtual_trial::{VirtualTrial, play, rehearsal_rig};

fn nominal(seed: u64) -> Options {
    Options { seed, pace: 0.2, ..Options::default() }
}

fn value(reading: &Reading, name: &str) -> f64 {
    reading.result(name).unwrap_or_else(|| panic!("{name}: {:?}", reading.absence(name))).value
}

fn launch_speed_mps(trial: &VirtualTrial) -> f64 {
    trial.truth.launch.as_ref().map_or(f64::NAN, |launch| launch.speed_ground_mps)
}

#[test]
fn launch_speed_peak_and_release_keep_their_promises() {
    let rig = rehearsal_rig();
    for seed in 1..=6 {
        let trial = play(&nominal(seed), &rig);
        let reading = read(&trial.signals, &rig);
        assert_eq!(reading.outcome, Outcome::Launched, "seed {seed}: {:?}", reading.outcome_evidence);
        let speed = value(&reading, "launch_speed") / launch_speed_mps(&trial) - 1.0;
        assert!(speed.abs() < 0.002, "seed {seed}: launch speed off by {:.3} %", 100.0 * speed);
        let peak =
            trial.truth.peaks.iter().find(|peak| peak.filter == "cfc60").map_or(f64::NAN, |peak| peak.specific_g);
        let error = value(&reading, "peak_g_cfc60_specific") / peak - 1.0;
        assert!(error.abs() < 0.01, "seed {seed}: peak off by {:.2} %", 100.0 * error);
        let release_s = value(&reading, "release_time") - trial.event_s("release").unwrap_or(f64::NAN);
        assert!(release_s.abs() < 5e-4, "seed {seed}: release off by {:.3} ms", 1e3 * release_s);
    }
}

#[test]
fn every_outcome_is_called_by_its_name() {
    let rig = rehearsal_rig();
    let cases = [
        ("let-down", Outcome::LetDown),
        ("hang-fire", Outcome::HangFire),
        ("hook-slip", Outcome::HookSlip),
        ("early-release", Outcome::EarlyRelease),
        ("cord-failure-in-hold", Outcome::CordFailure),
        ("cord-failure-in-stroke", Outcome::CordFailure),
        ("payload-left-early", Outcome::PayloadLeftEarly),
        ("payload-not-separated", Outcome::PayloadNotSeparated),
        ("arrest-overrun", Outcome::ArrestOverrun),
        ("soft-rail", Outcome::Launched),
        ("stage-1", Outcome::Launched),
    ];
    for (scenario, wanted) in cases {
        for seed in 1..=2 {
            let trial = play(&Options { scenario: scenario.to_owned(), ..nominal(seed) }, &rig);
            let reading = read(&trial.signals, &rig);
            assert_eq!(reading.outcome, wanted, "{scenario} seed {seed}: {:?}", reading.outcome_evidence);
        }
    }
}

#[test]
fn a_saturated_accelerometer_gives_no_peak_and_does_not_spoil_the_speed() {
    let rig = rehearsal_rig();
    let trial = play(&Options { scenario: "clipped-accelerometer".to_owned(), ..nominal(1) }, &rig);
    let reading = read(&trial.signals, &rig);
    let reason = reading.absence("peak_g_cfc60_specific").map_or("", |absent| &absent.reason);
    assert!(reason.contains("saturates at 6"), "{reason}: {:?}", reading.result("peak_g_cfc60_specific"));
    let speed = value(&reading, "launch_speed") / launch_speed_mps(&trial) - 1.0;
    assert!(speed.abs() < 0.002, "{speed}");
}

#[test]
fn work_of_the_winch_back_is_the_line_s() {
    let trial = play(&nominal(2), &rehearsal_rig());
    let reading = read(&trial.signals, &rehearsal_rig());
    let error = value(&reading, "winch_back_work") / trial.winch_work_j - 1.0;
    assert!(error.abs() < 0.004, "{error}");
}

fn replayed(options: &Options) -> (VirtualTrial, Reading, Replay) {
    let rig = rehearsal_rig();
    let trial = play(options, &rig);
    let reading = read(&trial.signals, &rig);
    let replay = replay(&trial.signals, &reading, &rig).unwrap_or_else(|error| panic!("{error}"));
    (trial, reading, replay)
}

fn bias(replay: &Replay, quantity: &str) -> f64 {
    replay
        .residuals
        .iter()
        .find(|residuals| residuals.quantity == quantity)
        .map_or(f64::NAN, |residuals| residuals.bias)
}

#[test]
fn a_heavier_payload_changes_the_reading_as_the_truth_and_shows_in_the_residual() {
    let (_, _, as_described) = replayed(&nominal(1));
    let (trial, reading, heavier) = replayed(&Options { payload_mass_kg: Some(7.2), ..nominal(1) });
    let speed = value(&reading, "launch_speed") / launch_speed_mps(&trial) - 1.0;
    assert!(speed.abs() < 0.002, "{speed}");
    // At the start force is what it was and mass is 9.6 in place of 8.6 kg (Newton's second law): 68 m/s² · (8.6/9.6 − 1).
    let at_start = |replay: &Replay| replay.residuals[0].residual[..10].iter().sum::<f64>() / 10.0;
    let shift = at_start(&heavier) - at_start(&as_described);
    assert!((shift + 7.1).abs() < 1.0, "{shift}");
    assert!(reading.findings.iter().any(|finding| finding.contains("mass × acceleration")), "{:?}", reading.findings);
}

#[test]
fn an_offset_cell_is_found_and_does_not_move_the_hold_tension() {
    let (trial, reading, replay) = replayed(&Options { cell_offset_n: Some(20.0), ..nominal(1) });
    let (_, _, as_described) = replayed(&nominal(1));
    let error_n = value(&reading, "hold_tension") - trial.truth.tension.hold_line_n;
    assert!(error_n.abs() < 3.0, "{error_n}");
    assert!(reading.findings.iter().any(|finding| finding.contains("hanging free")), "{:?}", reading.findings);
    let shift_n = bias(&replay, "anchor tension") - bias(&as_described, "anchor tension");
    assert!((shift_n - 20.0).abs() < 1.0, "{shift_n}");
}

#[test]
fn stronger_cords_are_taken_from_the_hold_and_still_read_true() {
    let (trial, reading, replay) = replayed(&Options { cord_force_factor: Some(1.1), ..nominal(1) });
    let speed = value(&reading, "launch_speed") / launch_speed_mps(&trial) - 1.0;
    assert!(speed.abs() < 0.002, "{speed}");
    let modelled = replay.modelled_launch_speed_mps.unwrap_or(f64::NAN) / launch_speed_mps(&trial) - 1.0;
    assert!(modelled.abs() < 0.03, "started from the measured hold, the model is off by {modelled}");
}

#[test]
fn a_let_down_s_hold_is_where_it_stood_drawn_furthest() {
    let rig = rehearsal_rig();
    let trial = play(&Options { scenario: "let-down".into(), ..nominal(1) }, &rig);
    let reading = read(&trial.signals, &rig);
    let error_n = value(&reading, "hold_tension") - trial.truth.tension.hold_line_n;
    // What the shuttle's own stiction may hide: 15 N either way.
    assert!(error_n.abs() < 15.0, "{error_n}");
    let error_m = value(&reading, "draw") - (rig.rail.zero_mark_x_m - trial.truth.tension.hold_x_m);
    assert!(error_m.abs() < 0.005, "{error_m}");
}
