//! Instruments that print text, against what truly happened: an indicator at 80 lines a second, a polled display, a board that
//! prints encoder and accelerometer at 500 lines a second.

#[path = "support/virtual_trial.rs"]
mod virtual_trial;

use std::path::Path;

use tautrail::calibration::Signal;
use tautrail::reading::{Outcome, Reading, ResultRow, read};
use tautrail::rig::{Rig, Role};
use virtual_rig::device::catalogue::SensorSet;
use virtual_rig::performance::Options;
use virtual_trial::{VirtualTrial, play};

/// The rig file with its records.
fn rig_text() -> String {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal/north-pier-text.toml");
    tautrail::rig::read_joined(&path).unwrap_or_else(|error| panic!("{error}"))
}

fn rig(text: &str) -> Rig {
    tautrail::rig::parse(text).unwrap_or_else(|findings| panic!("{findings:#?}"))
}

/// A launch whose masses, winds, calibration errors, clocks and noise are drawn and hidden.
fn launch(scenario: &str, seed: u64, rig: &Rig) -> VirtualTrial {
    let scenario = scenario.to_owned();
    play(&Options { scenario, seed, pace: 0.3, vary: true, sensors: SensorSet::Text, ..Options::default() }, rig)
}

fn true_speed_mps(trial: &VirtualTrial) -> f64 {
    trial.truth.launch.as_ref().map_or(f64::NAN, |launch| launch.speed_ground_mps)
}

#[track_caller]
fn row<'r>(reading: &'r Reading, name: &str) -> &'r ResultRow {
    reading.result(name).unwrap_or_else(|| panic!("{name}: {:?}", reading.absence(name)))
}

fn without(signals: &[Signal], role: Role) -> Vec<Signal> {
    signals.iter().filter(|signal| signal.role != role).cloned().collect()
}

/// Of 24 intervals of 8 seeds, how many may miss: at 95 % five or more of independent ones do in 0.6 % of all cases
/// (binomial distribution).
const MISSED_MOST: usize = 4;

#[test]
fn the_truth_is_inside_the_interval_of_the_launch_speed() {
    let rig = rig(&rig_text());
    let (mut missed, mut half_widths) = (Vec::new(), [const { Vec::new() }; 3]);
    for seed in 1..=8 {
        let trial = launch("nominal", seed, &rig);
        let reading = read(&trial.signals, &rig);
        assert_eq!(reading.outcome, Outcome::Launched, "seed {seed}: {:?}", reading.outcome_evidence);
        let truth = true_speed_mps(&trial);
        let by_arrival_s = trial.signals[0].time_uncertainty_s;
        let by_own_time_s = trial.signals[2].time_uncertainty_s;
        assert!(by_own_time_s < 0.5 * by_arrival_s, "the board's time: {by_own_time_s} s, by arrival {by_arrival_s} s");
        let sets = [
            ("both", trial.signals.clone()),
            ("encoder", without(&trial.signals, Role::ShuttleSpecificForce)),
            ("accelerometer", without(&trial.signals, Role::ShuttlePosition)),
        ];
        for ((name, signals), half_widths) in sets.into_iter().zip(&mut half_widths) {
            let reading = read(&signals, &rig);
            let speed = row(&reading, "launch_speed");
            half_widths.push(0.5 * (speed.high - speed.low) / truth);
            if !(speed.low..=speed.high).contains(&truth) {
                missed.push(format!("seed {seed}, {name}: {} to {} m/s for {truth}", speed.low, speed.high));
            }
        }
        let release = row(&reading, "release_time");
        let release_s = trial.event_s("release").unwrap_or(f64::NAN);
        assert!((release.low..=release.high).contains(&release_s), "seed {seed}: {release:?} for {release_s}");
        assert!(release.standard_uncertainty < 0.003, "seed {seed}: {release:?}");
    }
    assert!(missed.len() <= MISSED_MOST, "{missed:#?}");
    let medians = half_widths.map(|mut widths| {
        widths.sort_by(f64::total_cmp);
        widths[widths.len() / 2]
    });
    assert!(medians[0] < 0.003 && medians[1] < 0.006 && medians[2] < 0.012, "half of the intervals: {medians:?}");
}

#[test]
fn a_filter_that_the_rig_file_does_not_state_costs_little() {
    let stated = ", delay = \"1.876 ms\", bandwidth_hz = 120, least = -40, greatest = 40";
    let text = rig_text();
    assert!(text.contains(stated));
    let rig = rig(&text.replace(stated, ""));
    for seed in 1..=4 {
        let trial = launch("nominal", seed, &rig);
        let reading = read(&trial.signals, &rig);
        let error = row(&reading, "launch_speed").value / true_speed_mps(&trial) - 1.0;
        assert!(error.abs() < 0.003, "seed {seed}: {:.3} %", 100.0 * error);
    }
}

/// What the board would have printed with an accelerometer of another range.
fn clipped(trial: &VirtualTrial, range_g: f64) -> Vec<Signal> {
    let limit_mps2 = range_g * 9.80665;
    let mut signals = trial.signals.clone();
    for signal in signals.iter_mut().filter(|signal| signal.role == Role::ShuttleSpecificForce) {
        signal.value.iter_mut().for_each(|value| *value = value.clamp(-limit_mps2, limit_mps2));
    }
    signals
}

#[test]
fn an_accelerometer_that_clips_does_not_spoil_the_speed() {
    let rig = rig(&rig_text());
    for seed in 1..=2 {
        let trial = launch("nominal", seed, &rig);
        let truth = true_speed_mps(&trial);
        for range_g in [6.0, 3.2, 2.0] {
            let reading = read(&clipped(&trial, range_g), &rig);
            let speed = row(&reading, "launch_speed");
            assert!((speed.low..=speed.high).contains(&truth), "seed {seed}, ±{range_g} g: {speed:?} for {truth}");
        }
    }
}

#[test]
fn sensors_that_contradict_each_other_give_no_speed_but_the_reason() {
    let rig = rig(&rig_text());
    let trial = launch("nominal", 1, &rig);
    let mut signals = trial.signals.clone();
    // A board that prints a third of what its accelerometer feels, as one set to another range does.
    for signal in signals.iter_mut().filter(|signal| signal.role == Role::ShuttleSpecificForce) {
        signal.value.iter_mut().for_each(|value| *value /= 3.0);
    }
    let reading = read(&signals, &rig);
    let reason = &reading.absence("launch_speed").unwrap_or_else(|| panic!("{:?}", reading.results)).reason;
    assert!(reason.contains("one of them is wrong"), "{reason}");
    assert_eq!(reading.outcome, Outcome::Launched, "{:?}", reading.outcome_evidence);
}
