//! Tensions and draw: what was pulled, how far, how it stood, and the work that went in.
//!
//! After a release the line hangs free, so its indication then is its zero, whatever the calibration record says.
//! Without a release the recorded zero and its uncertainty stand.

use crate::calibration::{Signal, zero_shift_uncertainty_n};
use crate::rig::{Rig, Role};

use super::phases::Phases;
use super::release::Release;
use super::rows::{Book, Budget};
use super::sensors::Sensors;
use super::series::{BIN_S, Binned, Stats, longest_gap_s, stats_between};

/// Length of the means at both ends of the hold.
const HOLD_MEAN_S: f64 = 0.1;
/// The level that the release finds.
const NEWEST_S: f64 = 0.02;
/// Distance from the release in which the line is already moving.
const CLEAR_OF_RELEASE_S: f64 = 0.02;

/// What the hold was like, for energy, closure and replay.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub(super) struct Hold {
    /// At the release line, just before the release or the let-down; with its uncertainty.
    pub tension_n: Option<(f64, f64)>,
    pub x_m: Option<(f64, f64)>,
    /// Work of the release line since the tension began, with its uncertainty.
    pub work_j: Option<(f64, f64)>,
}

/// A channel's zero and how well it is known.
#[derive(Debug, Clone, Copy)]
struct Zero {
    n: f64,
    u_n: f64,
    words: &'static str,
}

pub(super) fn report(
    sensors: &Sensors<'_>,
    phases: &Phases,
    release: Option<&Release>,
    rig: &Rig,
    book: &mut Book,
) -> Hold {
    let mut hold = Hold::default();
    match sensors.line {
        Some(line) => hold.tension_n = line_rows(line, phases, release, rig, book),
        None => {
            for name in ["max_tension", "hold_tension", "hold_decay"] {
                book.absent(name, sensors.why_not(Role::ReleaseLineTension));
            }
        }
    }
    if let Some((from_s, to_s)) = phases.hold_start_s.zip(phases.hold_end_s) {
        let budget = Budget::default().with("bins of 10 ms", BIN_S / 12f64.sqrt());
        book.result(
            "hold_duration",
            to_s - from_s,
            "s",
            budget,
            "from the stop of the winch to the release or let-down",
        );
    } else {
        book.absent("hold_duration", "no hold was found");
    }
    holes(sensors, phases, book);
    hold.x_m = draw_rows(sensors, phases, rig, book);
    hold.work_j = work_row(sensors, phases, release, rig, book);
    hold
}

/// A channel that was silent in the hold is a matter for a person: a slip, a peak may hide there.
fn holes(sensors: &Sensors<'_>, phases: &Phases, book: &mut Book) {
    const LEAST_S: f64 = 0.02;
    let Some((from_s, to_s)) = phases.hold_start_s.zip(phases.hold_end_s) else { return };
    for signal in [sensors.line, sensors.anchor, sensors.position, sensors.specific_force].into_iter().flatten() {
        let gap_s = longest_gap_s(signal, from_s, to_s);
        if gap_s > f64::max(LEAST_S, 5.0 / signal.nominal_rate_hz) {
            book.findings.push(format!(
                "channel {} has a hole of {:.0} ms in the hold: what it would have shown then is not known, and nothing is filled in",
                signal.name,
                1e3 * gap_s
            ));
        }
    }
}

fn zero_of(line: &Signal, release: Option<&Release>, slack_n: f64, book: &mut Book) -> Zero {
    let shift_n = zero_shift_uncertainty_n(line, slack_n);
    let free = release.and_then(|release| release.free_line);
    let Some(Stats { n, mean, deviation }) = free.filter(|stats| stats.n > 100) else {
        return Zero { n: 0.0, u_n: line.zero_uncertainty.hypot(shift_n), words: "zero from the calibration" };
    };
    let u_n = (deviation / (n as f64).sqrt()).max(line.resolution);
    if mean.abs() > 3.0 * line.zero_uncertainty.hypot(u_n) {
        book.findings.push(format!(
            "channel {} indicates {mean:+.1} N with the line hanging free; its calibration allows {:.1} N. Tensions below use the free line as zero",
            line.name,
            3.0 * line.zero_uncertainty.hypot(u_n)
        ));
    }
    Zero { n: mean, u_n: u_n.hypot(shift_n), words: "zero from the line hanging free after the release" }
}

fn line_rows(
    line: &Signal,
    phases: &Phases,
    release: Option<&Release>,
    rig: &Rig,
    book: &mut Book,
) -> Option<(f64, f64)> {
    let zero = zero_of(line, release, rig.plan.slack_tension_n, book);
    let budget = |value_n: f64, noise_n: f64| {
        Budget::default()
            .with("calibration of the scale", value_n * line.scale_relative_uncertainty)
            .with("zero", zero.u_n)
            .with("noise", noise_n)
    };
    let noise = |stats: Stats| (stats.deviation / (stats.n as f64).sqrt()).max(line.resolution / 12f64.sqrt());
    let binned = Binned::new(line, phases.start_s, phases.end_s);
    let top = binned.filled().max_by(|a, b| a.1.mean.total_cmp(&b.1.mean)).map(|(_, bin)| bin.mean - zero.n);
    if let Some(top_n) = top {
        let words = format!("greatest 10 ms mean at the release line, whole launcher; {}", zero.words);
        book.result("max_tension", top_n, "N", budget(top_n, line.resolution), words);
        if top_n > rig.limits.tension_n {
            book.findings.push(format!(
                "the tension reached {top_n:.0} N, over the rig file's limit of {:.0} N (Tautrail advises and records only)",
                rig.limits.tension_n
            ));
        }
    }
    let Some(end_s) = phases.hold_end_s else {
        book.absent("hold_tension", "no hold was found: the tension never stood");
        book.absent("hold_decay", "no hold was found: the tension never stood");
        return None;
    };
    let end_s = release.map_or(end_s, |release| release.time_s) - CLEAR_OF_RELEASE_S;
    let Some(last) = stats_between(line, end_s - HOLD_MEAN_S, end_s) else {
        book.absent("hold_tension", "the release line has no samples in the last 0.1 s of the hold");
        return None;
    };
    // The shuttle may creep or slip while it is held: what the release finds is the newest level, not the mean.
    let Some(newest) = stats_between(line, end_s - NEWEST_S, end_s) else {
        book.absent("hold_tension", "the release line has no samples in the last 20 ms of the hold");
        return None;
    };
    let held_n = newest.mean - zero.n;
    let steadiness_n = drift_n(line, end_s).unwrap_or(0.0);
    let held = budget(held_n, noise(newest)).with("change within the window", steadiness_n);
    let u_held_n = held.total();
    let words = format!("mean of the last 20 ms of the hold, at the release line, whole launcher; {}", zero.words);
    book.result("hold_tension", held_n, "N", held, words);
    decay_row(line, phases, end_s, last, book);
    Some((held_n, u_held_n))
}

/// Half of the change between the halves of the newest window.
fn drift_n(line: &Signal, end_s: f64) -> Option<f64> {
    let earlier = stats_between(line, end_s - NEWEST_S, end_s - 0.5 * NEWEST_S)?;
    let later = stats_between(line, end_s - 0.5 * NEWEST_S, end_s)?;
    Some(0.5 * (later.mean - earlier.mean).abs())
}

fn decay_row(line: &Signal, phases: &Phases, end_s: f64, last: Stats, book: &mut Book) {
    let from_s = phases.hold_start_s.map(|from_s| from_s + CLEAR_OF_RELEASE_S);
    let first = from_s.filter(|from_s| end_s - from_s > 3.0 * HOLD_MEAN_S);
    match first.and_then(|from_s| stats_between(line, from_s, from_s + HOLD_MEAN_S)) {
        Some(first) => {
            let lost_n = first.mean - last.mean;
            let noise = |stats: Stats| stats.deviation / (stats.n as f64).sqrt();
            let budget = Budget::default()
                .with("calibration of the scale", lost_n * line.scale_relative_uncertainty)
                .with("noise", noise(first).hypot(noise(last)));
            book.result(
                "hold_decay",
                lost_n,
                "N",
                budget,
                "first 0.1 s of the hold less its last 0.1 s, at the release line; friction hides part of it",
            );
        }
        None => book.absent("hold_decay", "the hold was too short to see a decay"),
    }
}

fn draw_rows(sensors: &Sensors<'_>, phases: &Phases, rig: &Rig, book: &mut Book) -> Option<(f64, f64)> {
    let found = sensors.position.ok_or_else(|| sensors.why_not(Role::ShuttlePosition)).and_then(|position| {
        let end_s = phases.hold_end_s.ok_or("no hold was found: the shuttle never stood drawn")? - CLEAR_OF_RELEASE_S;
        let stood = stats_between(position, end_s - HOLD_MEAN_S, end_s)
            .ok_or("the encoder has no samples in the last 0.1 s of the hold")?;
        Ok((position, stood.mean))
    });
    let (position, x_m) = match found {
        Ok(found) => found,
        Err(reason) => {
            book.absent("draw", reason.clone());
            book.absent("elongation", reason);
            return None;
        }
    };
    let u = |travel_m: f64| {
        Budget::default()
            .with("zero of the encoder", position.zero_uncertainty)
            .with("scale of the encoder", travel_m * position.scale_relative_uncertainty)
            .with("resolution", position.resolution / 12f64.sqrt())
    };
    let u_x_m = u(x_m).total();
    let draw_m = rig.draw_m(x_m);
    book.result("draw", draw_m, "m", u(x_m), "from the zero mark back to the shuttle at the end of the hold");
    let per_metre = rig.cords.travel_ratio / rig.cords.free_length_m;
    let budget = Budget::default().with("draw", u_x_m * per_metre);
    book.result(
        "elongation",
        draw_m * per_metre,
        "1",
        budget,
        "draw times travel ratio over the rig file's free length, both taken as exact",
    );
    Some((x_m, u_x_m))
}

/// ∫ T dx of the release line over the winch-back, in 10 ms means.
fn work_row(
    sensors: &Sensors<'_>,
    phases: &Phases,
    release: Option<&Release>,
    rig: &Rig,
    book: &mut Book,
) -> Option<(f64, f64)> {
    let found = winch_back_work(sensors, phases, release, rig.plan.slack_tension_n);
    match found {
        Ok((work_j, budget)) => {
            let u_j = budget.total();
            book.result(
                "winch_back_work",
                work_j,
                "J",
                budget,
                "∫ T dx of the release line from first tension to the end of the hold, 10 ms means",
            );
            Some((work_j, u_j))
        }
        Err(reason) => {
            book.absent("winch_back_work", reason);
            None
        }
    }
}

fn winch_back_work(
    sensors: &Sensors<'_>,
    phases: &Phases,
    release: Option<&Release>,
    slack_n: f64,
) -> Result<(f64, Budget), String> {
    let line = sensors.line.ok_or_else(|| sensors.why_not(Role::ReleaseLineTension))?;
    let position = sensors.position.ok_or_else(|| sensors.why_not(Role::ShuttlePosition))?;
    let from_s = phases.loaded_from_s.ok_or("the tension never rose above slack")?;
    let to_s = phases.hold_end_s.ok_or("no hold was found: the winch-back has no end")? - CLEAR_OF_RELEASE_S;
    // The second before the slack threshold is passed holds the first newtons.
    let from_s = (from_s - 1.0).max(phases.start_s);
    if from_s == phases.start_s && phases.loaded_from_s.is_some_and(|loaded_s| loaded_s - phases.start_s < 0.05) {
        return Err("the record begins under tension: the start of the winch-back is missing".to_owned());
    }
    let zero_n = release.and_then(|release| release.free_line).map_or(0.0, |stats| stats.mean);
    let u_zero_n = if zero_n == 0.0 { line.zero_uncertainty } else { line.resolution };
    let (load, x) = (Binned::new(line, from_s, to_s), Binned::new(position, from_s, to_s));
    let both = load.bins.iter().zip(&x.bins).filter_map(|(t, x)| Some((t.as_ref()?.mean - zero_n, x.as_ref()?.mean)));
    let (mut work_j, mut missing) = (0.0, 0_usize);
    let mut previous: Option<(f64, f64)> = None;
    let mut travel_m = 0.0;
    let mut n_pairs = 0_usize;
    for (tension_n, x_m) in both {
        n_pairs += 1;
        if let Some((tension_before_n, x_before_m)) = previous {
            work_j += 0.5 * (tension_n + tension_before_n) * (x_before_m - x_m);
            travel_m += x_before_m - x_m;
        }
        previous = Some((tension_n, x_m));
    }
    missing += load.bins.len().saturating_sub(n_pairs);
    if missing as f64 > 0.05 * load.bins.len() as f64 {
        return Err(format!("{:.1} s of the winch-back are missing in one of its channels", missing as f64 * BIN_S));
    }
    let gaps_j = missing as f64 / load.bins.len().max(1) as f64 * work_j * 0.1;
    let budget = Budget::default()
        .with("calibration of the line's scale", work_j * line.scale_relative_uncertainty)
        .with("zero of the line", travel_m * u_zero_n)
        .with("shift of the line's zero over the trial", travel_m * zero_shift_uncertainty_n(line, slack_n))
        .with("scale of the encoder", work_j * position.scale_relative_uncertainty)
        .with("gaps", gaps_j);
    Ok((work_j, budget))
}
