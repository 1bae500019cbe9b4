use std::sync::LazyLock;

use super::*;
use crate::reading::synthetic::{Ending, Played, Trial, play};
use crate::reading::{CfcFilter, Decision, Outcome, StartUp};

fn reading_of(trial: &Trial) -> (Played, Reading) {
    let played = play(trial);
    let reading = read(&played.signals, &trial.rig);
    (played, reading)
}

/// Nominal launches of seeds 1 to 24 and what is read of them, once for all tests.
static SEEDS: LazyLock<Vec<(Played, Reading)>> =
    LazyLock::new(|| (1..=24).map(|seed| reading_of(&Trial::nominal(seed))).collect());

/// How often the interval held the truth, the errors' spread and the mean half-width, over seeds.
struct Tally {
    errors: Vec<f64>,
    half_widths: Vec<f64>,
    n_inside: usize,
}

impl Tally {
    fn over(name: &str, truth: impl Fn(&Played) -> f64) -> Self {
        let mut tally = Self { errors: Vec::new(), half_widths: Vec::new(), n_inside: 0 };
        for (played, reading) in SEEDS.iter() {
            let row = reading.result(name).unwrap_or_else(|| panic!("{:?}", reading.absence(name)));
            let truth = truth(played);
            tally.errors.push(row.value - truth);
            tally.half_widths.push(0.5 * (row.high - row.low));
            tally.n_inside += usize::from((row.low..=row.high).contains(&truth));
        }
        tally
    }

    fn quantile(&self, share: f64) -> f64 {
        let mut sizes: Vec<f64> = self.errors.iter().map(|error| error.abs()).collect();
        sizes.sort_by(f64::total_cmp);
        sizes[((sizes.len() as f64 * share).ceil() as usize).clamp(1, sizes.len()) - 1]
    }

    fn mean_half_width(&self) -> f64 {
        self.half_widths.iter().sum::<f64>() / self.half_widths.len() as f64
    }

    fn show(&self, name: &str) {
        println!(
            "{name}: median |error| {:.3e}, 95 % |error| {:.3e}, mean half-width {:.3e}, inside {} of {}",
            self.quantile(0.5),
            self.quantile(0.95),
            self.mean_half_width(),
            self.n_inside,
            self.errors.len()
        );
    }
}

#[test]
fn launch_speed_is_that_at_separation_within_its_interval() {
    let tally = Tally::over("launch_speed", |played| played.launch_speed_mps);
    tally.show("launch speed, m/s");
    assert!(tally.quantile(0.95) < 0.002 * 17.0, "{}", tally.quantile(0.95));
    assert!(tally.n_inside >= 21, "{} of 24 inside", tally.n_inside);
    assert!(tally.mean_half_width() < 0.001 * 17.0, "{}", tally.mean_half_width());
}

#[test]
fn the_release_is_found_within_half_a_millisecond() {
    let tally = Tally::over("release_time", |played| played.release_s);
    tally.show("release, s");
    assert!(tally.quantile(1.0) < 5e-4);
    assert!(tally.n_inside >= 21, "{} of 24 inside", tally.n_inside);
}

#[test]
fn peak_g_is_that_of_the_noise_free_signal_through_the_same_filter() {
    let truth = |played: &Played| {
        let signal = &played.signals[2];
        let filter = CfcFilter::new(60, signal.nominal_rate_hz).unwrap();
        let filtered = filter.two_pass(&played.specific_force_mps2, StartUp::Hold);
        let stroke = signal.time_s.iter().zip(filtered);
        stroke.filter(|(t, _)| (played.release_s..played.separation_s).contains(t)).map(|(_, f)| f).fold(0.0, f64::max)
            / 9.80665
    };
    let tally = Tally::over("peak_g_cfc60_specific", truth);
    tally.show("peak g");
    assert!(tally.quantile(0.95) < 0.01 * 8.0);
    assert!(tally.n_inside >= 21, "{} of 24 inside", tally.n_inside);
}

#[test]
fn a_launch_is_called_launched_and_its_phases_stand_in_order() {
    let (played, reading) = reading_of(&Trial::nominal(1));
    assert_eq!(reading.outcome, Outcome::Launched, "{:?}", reading.outcome_evidence);
    let names: Vec<&str> = reading.instants.iter().map(|instant| instant.name.as_str()).collect();
    assert_eq!(names, ["winch_back_start", "hold_start", "release", "separation", "brake_contact", "rest"]);
    let separation = reading.instant("separation").unwrap();
    assert!((separation.time_s - played.separation_s).abs() < 2e-3);
    assert!(reading.findings.is_empty(), "{:?}", reading.findings);
}

#[test]
fn other_masses_cords_and_offsets_change_the_reading_as_they_change_the_truth() {
    let mut trial = Trial::nominal(3);
    trial.payload_kg += 0.8;
    trial.stiffness_n_per_m *= 1.1;
    trial.line_offset_n = 20.0;
    let (played, reading) = reading_of(&trial);
    let speed = reading.result("launch_speed").unwrap();
    assert!((speed.value / played.launch_speed_mps - 1.0).abs() < 2e-3, "{speed:?}");
    let tension = reading.result("hold_tension").unwrap();
    assert!((tension.value - played.hold_tension_n).abs() < 4.0, "{tension:?} for {}", played.hold_tension_n);
    assert!(reading.findings.iter().any(|finding| finding.contains("line hanging free")), "{:?}", reading.findings);
    assert!(reading.findings.iter().any(|finding| finding.contains("mass × acceleration")), "{:?}", reading.findings);
}

#[test]
fn energy_closes_on_friction_where_that_is_the_only_loss() {
    let trial = Trial::nominal(5);
    let (_, reading) = reading_of(&trial);
    let lost = reading.result("energy_lost").unwrap();
    // The line did not have to overcome friction on the way back here; on the way out it takes 12 N over 3.93 m,
    // and ½·k·s² with s = 12 N/k stays in the cords.
    let truth_j = 12.0 * (4.0 - 12.0 / 175.0) + 0.5 * 12.0 * 12.0 / 175.0;
    assert!((lost.low..=lost.high).contains(&truth_j), "{lost:?} for {truth_j}");
    assert!(lost.standard_uncertainty < 10.0);
}

#[test]
fn a_let_down_has_no_launch_results_but_says_why() {
    let (_, reading) = reading_of(&Trial { ending: Ending::LetDown, ..Trial::nominal(2) });
    assert_eq!(reading.outcome, Outcome::LetDown, "{:?}", reading.outcome_evidence);
    assert!(reading.result("launch_speed").is_none());
    assert!(reading.absence("launch_speed").unwrap().reason.contains("no release"));
    assert!(reading.result("hold_tension").is_some());
    assert!(reading.instant("let_down_start").is_some());
}

#[test]
fn a_shuttle_that_sticks_is_a_hang_fire() {
    let (_, reading) = reading_of(&Trial { ending: Ending::HangFire, ..Trial::nominal(2) });
    assert_eq!(reading.outcome, Outcome::HangFire, "{:?}", reading.outcome_evidence);
    assert!(reading.result("launch_speed").is_none());
}

#[test]
fn a_record_that_ends_early_is_truncated() {
    for after_s in [-1.0, 0.2, 0.6] {
        let (_, reading) = reading_of(&Trial { ending: Ending::CutAfter(after_s), ..Trial::nominal(2) });
        assert_eq!(reading.outcome, Outcome::Truncated, "{after_s}: {:?}", reading.outcome_evidence);
    }
}

#[test]
fn a_release_short_of_the_plan_is_early() {
    let (_, reading) = reading_of(&Trial { draw_m: 3.0, ..Trial::nominal(2) });
    assert_eq!(reading.outcome, Outcome::EarlyRelease, "{:?}", reading.outcome_evidence);
    assert!(reading.result("launch_speed").is_some());
}

fn without(played: &Played, role: Role) -> Vec<Signal> {
    played.signals.iter().filter(|signal| signal.role != role).cloned().collect()
}

fn reversed(played: &Played, role: Role) -> Vec<Signal> {
    let flip = |signal: &Signal| {
        let value = signal.value.iter().map(|value| -value).collect();
        if signal.role == role { Signal { value, ..signal.clone() } } else { signal.clone() }
    };
    played.signals.iter().map(flip).collect()
}

#[test]
fn launch_speed_comes_from_the_encoder_or_the_accelerometer_alone_too() {
    let trial = Trial::nominal(4);
    let played = play(&trial);
    for role in [Role::ShuttleSpecificForce, Role::ShuttlePosition] {
        let reading = read(&without(&played, role), &trial.rig);
        let speed = reading.result("launch_speed").unwrap_or_else(|| panic!("{:?}", reading.absent));
        assert!(
            (speed.low..=speed.high).contains(&played.launch_speed_mps),
            "{speed:?} for {}",
            played.launch_speed_mps
        );
        assert!(speed.standard_uncertainty < 0.01 * speed.value, "{speed:?}");
        assert_eq!(reading.outcome, Outcome::Launched, "{:?}", reading.outcome_evidence);
    }
}

#[test]
fn without_motion_channels_the_launch_speed_is_absent_and_says_which_are_missing() {
    let trial = Trial::nominal(4);
    let played = play(&trial);
    let reading = read(&played.signals[..1], &trial.rig);
    let reason = &reading.absence("launch_speed").unwrap().reason;
    assert!(reason.contains("shuttle_position") && reason.contains("shuttle_specific_force"), "{reason}");
    assert!(reading.result("hold_tension").is_some());
    assert!(read(&[], &trial.rig).results.is_empty());
}

#[test]
fn a_reversed_channel_is_refused_and_never_gives_a_number() {
    let trial = Trial::nominal(4);
    let played = play(&trial);
    let line = read(&reversed(&played, Role::ReleaseLineTension), &trial.rig);
    assert!(line.result("max_tension").is_none());
    assert!(line.absence("max_tension").unwrap().reason.contains("reversed"));
    let encoder = read(&reversed(&played, Role::ShuttlePosition), &trial.rig);
    assert!(encoder.absence("draw").unwrap().reason.contains("backward"), "{:?}", encoder.absent);
    let speed = encoder.result("launch_speed").unwrap();
    assert!((speed.low..=speed.high).contains(&played.launch_speed_mps), "{speed:?}");
    let force = read(&reversed(&played, Role::ShuttleSpecificForce), &trial.rig);
    assert!(force.absence("peak_g_cfc60_specific").unwrap().reason.contains("reversed"), "{:?}", force.absent);
    assert!(force.result("launch_speed").is_some());
}

#[test]
fn a_gap_in_the_stroke_makes_the_filtered_peak_absent_but_not_the_speed() {
    let trial = Trial::nominal(6);
    let played = play(&trial);
    let signals: Vec<Signal> = played.signals.iter().map(|signal| cut(signal, played.release_s + 0.2, 0.02)).collect();
    let reading = read(&signals, &trial.rig);
    assert!(
        reading.absence("peak_g_cfc60_specific").unwrap().reason.contains("without samples"),
        "{:?}",
        reading.absent
    );
    let speed = reading.result("launch_speed").unwrap();
    assert!((speed.low..=speed.high).contains(&played.launch_speed_mps), "{speed:?}");
}

fn cut(signal: &Signal, from_s: f64, length_s: f64) -> Signal {
    let kept = |t: &f64| *t < from_s || *t >= from_s + length_s;
    let pairs: Vec<(f64, f64)> =
        signal.time_s.iter().copied().zip(signal.value.iter().copied()).filter(|(t, _)| kept(t)).collect();
    Signal { time_s: pairs.iter().map(|p| p.0).collect(), value: pairs.iter().map(|p| p.1).collect(), ..signal.clone() }
}

#[test]
fn a_wrong_clock_between_the_devices_is_reported() {
    let trial = Trial::nominal(7);
    let mut played = play(&trial);
    for time_s in &mut played.signals[0].time_s {
        *time_s += 2e-3;
    }
    let reading = read(&played.signals, &trial.rig);
    assert!(reading.findings.iter().any(|finding| finding.contains("ms apart")), "{:?}", reading.findings);
}

#[test]
fn time_that_runs_backward_refuses_the_channel() {
    let trial = Trial::nominal(7);
    let mut played = play(&trial);
    played.signals[2].time_s[5000] = 0.0;
    let reading = read(&played.signals, &trial.rig);
    assert!(reading.absence("peak_g_cfc60_specific").unwrap().reason.contains("time does not advance"));
}

#[test]
fn verdicts_follow_the_results_and_a_wrong_mass_is_found_by_the_closure() {
    let (_, reading) = reading_of(&Trial::nominal(1));
    let verdict = |reading: &Reading, name: &str| reading.verdicts.iter().find(|v| v.name == name).unwrap().decision;
    assert_eq!(verdict(&reading, "tension_limit"), Decision::Met);
    assert_eq!(verdict(&reading, "planned_draw"), Decision::Met);
    let (_, short) = reading_of(&Trial { draw_m: 3.0, ..Trial::nominal(1) });
    assert_eq!(verdict(&short, "planned_draw"), Decision::Missed);
    let (_, let_down) = reading_of(&Trial { ending: Ending::LetDown, ..Trial::nominal(1) });
    assert_eq!(verdict(&let_down, "launch_speed_window"), Decision::NotDecidable);
    let closure = reading.result("closure_force").unwrap();
    assert!((closure.low..=closure.high).contains(&0.0), "{closure:?}");
}

#[test]
fn a_bandwidth_too_narrow_or_unknown_is_never_called_a_class() {
    let trial = Trial::nominal(4);
    let mut played = play(&trial);
    played.signals[2].bandwidth_hz = Some(500.0);
    let reading = read(&played.signals, &trial.rig);
    assert!(reading.result("peak_g_cfc180_specific").is_some());
    let reason = &reading.absence("peak_g_cfc600_specific").unwrap().reason;
    assert!(reason.contains("1000 Hz") && reason.contains("500 Hz"), "{reason}");
    played.signals[2].bandwidth_hz = None;
    let reading = read(&played.signals, &trial.rig);
    let row = reading.result("peak_g_cfc60_specific").unwrap();
    assert!(row.method.contains("filtered as CFC 60") && row.method.contains("not claimed"), "{row:?}");
    let mut strict = trial.rig.clone();
    strict.details.reading.least_rate_per_class = 100.0;
    let reading = read(&played.signals, &strict);
    let reason = &reading.absence("peak_g_cfc180_specific").unwrap().reason;
    assert!(reason.contains("minimum_rate 100") && reason.contains("18000"), "{reason}");
}

#[test]
fn left_and_right_anchors_give_an_asymmetry_and_a_verdict() {
    let mut trial = Trial::nominal(4);
    trial.rig.details.asymmetry_limit = Some(0.01);
    let mut played = play(&trial);
    for (role, share) in [(Role::LeftAnchorTension, 0.52), (Role::RightAnchorTension, 0.48)] {
        let line = &played.signals[0];
        let value = line.value.iter().map(|n| n * share).collect();
        let side = Signal { role, name: role.word().to_owned(), value, ..line.clone() };
        played.signals.push(side);
    }
    let reading = read(&played.signals, &trial.rig);
    let row = reading.result("anchor_asymmetry").unwrap();
    assert!((row.value - 0.04).abs() < 2.0 * row.standard_uncertainty, "{row:?}");
    let verdict = reading.verdicts.iter().find(|verdict| verdict.name == "asymmetry_limit").unwrap();
    assert_eq!(verdict.decision, Decision::Missed, "{verdict:?}");
    played.signals.pop();
    assert!(read(&played.signals, &trial.rig).absence("anchor_asymmetry").is_some());
}

#[test]
fn a_hole_in_the_hold_is_told() {
    let trial = Trial::nominal(6);
    let played = play(&trial);
    let signals: Vec<Signal> = played.signals.iter().map(|signal| cut(signal, played.release_s - 1.5, 0.3)).collect();
    let reading = read(&signals, &trial.rig);
    assert!(
        reading.findings.iter().any(|finding| finding.contains("hole of 300 ms in the hold")),
        "{:?}",
        reading.findings
    );
}

#[test]
fn a_slipping_encoder_is_told_and_does_not_move_the_speed() {
    let trial = Trial::nominal(6);
    let mut played = play(&trial);
    let encoder = &mut played.signals[1];
    let at = encoder.time_s.partition_point(|t| *t < played.release_s + 0.3);
    encoder.value[at..].iter_mut().for_each(|x_m| *x_m += 0.015);
    let reading = read(&played.signals, &trial.rig);
    assert!(reading.findings.iter().any(|finding| finding.contains("slipped")), "{:?}", reading.findings);
    let speed = reading.result("launch_speed").unwrap();
    assert!((speed.low..=speed.high).contains(&played.launch_speed_mps), "{speed:?}");
}
