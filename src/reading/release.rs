//! The release instant: the release line below half its hold tension.
//!
//! While the line lets go, the shuttle's specific force rises as the line's tension falls (m·f = cord force − line
//! tension − friction), so half of the step in specific force is the same instant seen by another sensor, often on
//! another clock. Both are fused by their uncertainty; a disagreement is reported, never averaged away in silence.
//! The anchor tension follows only after the wave's transit and takes no part. The encoder is a check.

use crate::calibration::Signal;

use super::beside::EdgeSeen;
use super::rows::{Book, Budget};
use super::sensors::Sensors;
use super::series::{Stats, span, stats_between};

/// Sum of squared disagreements over their variances that is not put down to chance (95 %, one and two degrees of freedom:
/// any table of chi-square quantiles).
const CHI_SQUARE_95: [f64; 2] = [3.841, 5.991];
/// How far from the other sensors an edge of the release input may lie and still be this release's.
const EDGE_WITHIN_S: f64 = 0.1;
/// Distance between the encoder's extrapolated start and the other sensors that is worth a word.
const ENCODER_CHECK_S: f64 = 0.003;
/// Where the extrapolation of the encoder to its start looks: metres after the start.
const ENCODER_FROM_M: f64 = 0.003;
const ENCODER_TO_M: f64 = 0.05;

/// After the release, where the level that the specific force steps to is looked at.
pub(super) const LEVEL_FROM_S: f64 = 0.003;
pub(super) const LEVEL_TO_S: f64 = 0.010;
/// Places after an uncertain first guess at which the level is looked for.
const N_GUESSES: u32 = 10;

#[derive(Debug, Clone, PartialEq)]
pub(super) struct Release {
    pub time_s: f64,
    pub u_s: f64,
    /// Indication of the line hanging free after the release, where there is a line.
    pub free_line: Option<Stats>,
    /// Mean specific force of the standing shuttle as indicated, and just after the release.
    pub standing_force_mps2: Option<f64>,
    pub started_force_mps2: Option<f64>,
}

#[derive(Debug, Clone)]
struct Seen {
    by: &'static str,
    time_s: f64,
    budget: Budget,
}

pub(super) fn find<'a>(
    hint_s: f64,
    sensors: &Sensors<'_>,
    edges: impl Iterator<Item = &'a EdgeSeen>,
    book: &mut Book,
) -> Option<Release> {
    let (line, specific_force, position) = (sensors.line, sensors.specific_force, sensors.position);
    let free_line = line.and_then(|line| stats_between(line, hint_s + 0.15, hint_s + 0.9));
    let standing = specific_force.and_then(|signal| stats_between(signal, hint_s - 0.3, hint_s - 0.03));
    let by_line = line.and_then(|line| seen_by_line(line, hint_s, free_line.map_or(0.0, |stats| stats.mean)));
    let near_s = by_line.as_ref().map_or(hint_s, |seen| seen.time_s);
    let u_near_s = by_line.as_ref().map_or(0.0, |seen| seen.budget.total());
    let step =
        specific_force.zip(standing).and_then(|(signal, standing)| seen_by_force(signal, near_s, u_near_s, standing));
    let started_force_mps2 = step.as_ref().map(|(_, level)| *level);
    let by_encoder = position.and_then(|position| seen_by_encoder(position, near_s));
    let by_edge = seen_by_edge(edges, near_s);
    let mut seen: Vec<Seen> = by_line.into_iter().chain(step.map(|(seen, _)| seen)).chain(by_edge).collect();
    if seen.is_empty() {
        seen.extend(by_encoder.clone());
    }
    let (time_s, u_s) = fuse(&seen, book)?;
    if let Some(check) = by_encoder.filter(|check| (check.time_s - time_s).abs() > ENCODER_CHECK_S) {
        book.findings.push(format!(
            "the encoder's movement points to a start {:+.1} ms from the release found by the other sensors",
            1e3 * (check.time_s - time_s)
        ));
    }
    Some(Release { time_s, u_s, free_line, standing_force_mps2: standing.map(|stats| stats.mean), started_force_mps2 })
}

/// Weighted mean; the uncertainty grows with the disagreement (Birge ratio).
fn fuse(seen: &[Seen], book: &mut Book) -> Option<(f64, f64)> {
    let weight = |one: &Seen| one.budget.total().powi(-2);
    let total: f64 = seen.iter().map(weight).sum();
    let time_s = seen.iter().map(|one| weight(one) * one.time_s).sum::<f64>() / total;
    if !time_s.is_finite() {
        return None;
    }
    let chi_square: f64 = seen.iter().map(|one| weight(one) * (one.time_s - time_s).powi(2)).sum();
    let mut u_s = total.sqrt().recip();
    let mut budget = Budget::default().with("fused sensors", u_s);
    let bound = CHI_SQUARE_95[seen.len().saturating_sub(2).min(1)];
    if seen.len() > 1 && chi_square > bound {
        let (a, b) = furthest_apart(seen);
        book.findings.push(format!(
            "{} and {} put the release {:.2} ms apart, {:.1} times what their clocks and noise allow: look for a wrong clock or a wire",
            a.by,
            b.by,
            1e3 * (a.time_s - b.time_s).abs(),
            (a.time_s - b.time_s).abs() / a.budget.total().hypot(b.budget.total())
        ));
        let half_apart_s = 0.5 * (a.time_s - b.time_s).abs();
        budget = budget.with("disagreement of the sensors", half_apart_s);
        u_s = budget.total();
    } else if let [only] = seen {
        budget = only.budget.clone();
    }
    let words: Vec<String> =
        seen.iter().map(|one| format!("{} {:.5} s ± {:.2} ms", one.by, one.time_s, 1e3 * one.budget.total())).collect();
    let evidence = words.join("; ");
    book.instant("release", time_s, u_s, evidence.clone());
    book.result(
        "release_time",
        time_s,
        "s",
        budget,
        format!("line below half its hold tension, half of the step in specific force, falling edge of the release input: {evidence}"),
    );
    Some((time_s, u_s))
}

/// Earliest and latest.
fn furthest_apart(seen: &[Seen]) -> (&Seen, &Seen) {
    seen.iter().fold((&seen[0], &seen[0]), |(first, last), one| {
        (if one.time_s < first.time_s { one } else { first }, if one.time_s > last.time_s { one } else { last })
    })
}

/// The falling edge of the release input nearest to where the other sensors put it.
fn seen_by_edge<'a>(edges: impl Iterator<Item = &'a EdgeSeen>, near_s: f64) -> Option<Seen> {
    let away_s = |edge: &EdgeSeen| (edge.time_s - near_s).abs();
    let edge = edges.filter(|edge| away_s(edge) < EDGE_WITHIN_S).min_by(|a, b| away_s(a).total_cmp(&away_s(b)))?;
    let budget = Budget::default().with("time axis", edge.time_uncertainty_s);
    Some(Seen { by: "release input", time_s: edge.time_s, budget })
}

/// First instant after which the signal stays past a level, between samples by straight line.
fn crossing(times_s: &[f64], values: &[f64], past: impl Fn(f64) -> bool, level: f64) -> Option<(f64, f64)> {
    const STAYS: usize = 3;
    let n = values.len();
    let idx = (1..n)
        .find(|&idx| !past(values[idx - 1]) && values[idx..n.min(idx + STAYS)].iter().all(|&value| past(value)))?;
    let (t0, t1) = (times_s[idx - 1], times_s[idx]);
    let share = (level - values[idx - 1]) / (values[idx] - values[idx - 1]);
    Some((t0 + share.clamp(0.0, 1.0) * (t1 - t0), t1 - t0))
}

/// Shares that a threshold crossing has in common: the clock, the sampling step, noise on a finite slope.
///
/// A front faster than the sampling lies anywhere in the step: rectangular distribution, GUM 4.3.7. A slower one is
/// followed by the samples: the straight line between two of them errs by the front's bend, which at the half of a
/// cosine-shaped front of length T is (π·h/4T)²·h at most, falling with (h/T)². A channel's bandwidth makes every front
/// last 0.35 over it at least (rise time of a low pass).
fn crossing_budget(signal: &Signal, step_s: f64, front_s: f64, noise_s: f64) -> Budget {
    let front_s = front_s.max(signal.bandwidth_hz.map_or(0.0, |hz| 0.35 / hz));
    let followed = (step_s / front_s).powi(2).min(1.0);
    Budget::default()
        .with("time axis", signal.time_uncertainty_s)
        .with("sampling step", followed * step_s / 12f64.sqrt())
        .with("noise", noise_s)
        .with("bandwidth", signal.bandwidth_hz.map_or(0.0, |hz| 0.1 / (std::f64::consts::TAU * hz)))
}

fn seen_by_line(line: &Signal, hint_s: f64, free_n: f64) -> Option<Seen> {
    let held = stats_between(line, hint_s - 0.25, hint_s - 0.03)?;
    let half_n = free_n + 0.5 * (held.mean - free_n);
    let window = span(line, hint_s - 0.06, hint_s + 0.06);
    let (times_s, values) = (&line.time_s[window.clone()], &line.value[window]);
    let (time_s, step_s) = crossing(times_s, values, |value| value < half_n, half_n)?;
    let fall_s = fall_time_s(times_s, values, time_s, held.mean - free_n);
    let noise_s = held.deviation / (held.mean - free_n).abs() * fall_s;
    Some(Seen { by: "release line", time_s, budget: crossing_budget(line, step_s, fall_s, noise_s) })
}

/// How long a full step would take at the slope around the crossing.
fn fall_time_s(times_s: &[f64], values: &[f64], at_s: f64, full_step: f64) -> f64 {
    let after = times_s.partition_point(|&t| t < at_s);
    let (Some(first), Some(last)) = (after.checked_sub(2), (after + 1 < times_s.len()).then_some(after + 1)) else {
        return 0.0;
    };
    let slope = (values[last] - values[first]) / (times_s[last] - times_s[first]);
    if slope == 0.0 { 0.0 } else { (full_step / slope).abs() }
}

/// The step in specific force, and the level it reaches.
fn seen_by_force(signal: &Signal, near_s: f64, u_near_s: f64, standing: Stats) -> Option<(Seen, f64)> {
    let reach_s = 0.05 + 3.0 * u_near_s;
    let window = span(signal, near_s - reach_s, near_s + reach_s);
    let (times_s, values) = (&signal.time_s[window.clone()], &signal.value[window]);
    let level_at = |at_s: f64| stats_between(signal, at_s + LEVEL_FROM_S, at_s + LEVEL_TO_S).map(|stats| stats.mean);
    // Twice: the level is looked at after the crossing, wherever the first guess lay. The guess of a slow indicator may lie
    // well before the release, so that the greatest level after it counts first.
    let guesses = (0..=N_GUESSES).map(|k| near_s + 3.0 * u_near_s * f64::from(k) / f64::from(N_GUESSES));
    let level = |at_s: f64| level_at(at_s).unwrap_or(f64::NEG_INFINITY);
    let mut around_s = guesses.max_by(|a, b| level(*a).total_cmp(&level(*b)))?;
    let mut found = None;
    for _ in 0..2 {
        let level = level_at(around_s)?;
        if level - standing.mean < 5.0 * standing.deviation.max(signal.resolution) {
            return None;
        }
        let half = standing.mean + 0.5 * (level - standing.mean);
        let (time_s, step_s) = crossing(times_s, values, |value| value > half, half)?;
        around_s = time_s;
        found = Some((time_s, step_s, level));
    }
    let (time_s, step_s, level) = found?;
    let rise_s = fall_time_s(times_s, values, time_s, level - standing.mean);
    // The level itself is known to a few percent only: waves run in the cords.
    let level_s = 0.03 * rise_s;
    let noise_s = (standing.deviation / (level - standing.mean) * rise_s).hypot(level_s);
    let budget = crossing_budget(signal, step_s, rise_s, noise_s);
    Some((Seen { by: "accelerometer", time_s, budget }, level))
}

/// From rest under constant acceleration √(x − x₀) is a straight line in time that meets zero at the start.
fn seen_by_encoder(position: &Signal, near_s: f64) -> Option<Seen> {
    let origin_m = stats_between(position, near_s - 0.1, near_s - 0.02)?.mean;
    let window = span(position, near_s - 0.02, near_s + 0.2);
    let points: Vec<(f64, f64)> = position.time_s[window.clone()]
        .iter()
        .zip(&position.value[window])
        .map(|(t, x)| (*t, x - origin_m))
        .filter(|(_, moved_m)| (ENCODER_FROM_M..ENCODER_TO_M).contains(moved_m))
        .map(|(t, moved_m)| (t - near_s, moved_m.sqrt()))
        .collect();
    if points.len() < 4 {
        return None;
    }
    let n = points.len() as f64;
    let (t_mean, y_mean) = (points.iter().map(|p| p.0).sum::<f64>() / n, points.iter().map(|p| p.1).sum::<f64>() / n);
    let along: f64 = points.iter().map(|p| (p.0 - t_mean) * (p.1 - y_mean)).sum();
    let spread: f64 = points.iter().map(|p| (p.0 - t_mean).powi(2)).sum();
    let time_s = near_s + t_mean - y_mean * spread / along;
    let budget = Budget::default().with("time axis", position.time_uncertainty_s).with("extrapolation", 1e-3);
    time_s.is_finite().then_some(Seen { by: "encoder", time_s, budget })
}
