//! What happened inside the power stroke beside the launch: steps in the specific force, and who coasted after it.
//!
//! Force along a stroke changes smoothly. A step up means that the shuttle became lighter: the payload left while it was
//! still pushed. A step down means that force was lost at once: a cord failed. Once the push has ended, the deceleration
//! tells whether shuttle or shuttle and payload are braked by friction and drag.

use crate::calibration::Signal;
use crate::rig::Rig;

use super::launch::Separation;
use super::motion::Track;
use super::release::Release;
use super::tension::Hold;

/// Parts of the stroke at its ends where forces change fast anyway.
const AFTER_RELEASE_S: f64 = 0.02;
const BEFORE_SEPARATION_S: f64 = 0.02;
/// Means of this length, this far before and after an instant, are compared; longer ones of a slow channel.
const MEAN_S: f64 = 0.003;
const CLEAR_S: f64 = 0.001;
/// Longest gap that is looked across: the force changes by itself in a longer one.
const LONGEST_GAP_S: f64 = 0.03;
/// Share of the force that a step must have: losing one of ten cords, or half of the payload's share, is seen.
const STEP_DOWN: f64 = 0.07;
const STEP_UP: f64 = 0.2;
/// A change less its course is after − 2·before + earlier, of means: six times the variance of one.
const N_MEANS: f64 = 6.0;
/// Standard deviations of noise that a step must exceed: it is looked for at a hundred places and more.
const BEYOND_NOISE: f64 = 5.0;

/// Where a gap or saturation leaves the force less well known than this share of its start, no step is called.
const KNOWN: f64 = 0.02;

/// A sudden change of the shuttle's specific force.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Step {
    pub time_s: f64,
    pub x_m: f64,
    pub from_mps2: f64,
    pub to_mps2: f64,
}

impl Step {
    pub(super) fn is_up(&self) -> bool {
        self.to_mps2 > self.from_mps2
    }
}

/// The largest step in the stroke that is no part of its smooth course. One that a gap of the accelerometer hides is looked
/// for on both sides of the gap.
pub(super) fn step(track: &Track, signal: Option<&Signal>, release: &Release, separation_s: f64) -> Option<Step> {
    if !track.has_specific_force {
        return None;
    }
    let Pace { mean_s, clear_s, n_samples } = Pace::of(signal);
    let noise_mps2 = track.noise_mps2 * (N_MEANS / n_samples).sqrt();
    let gap = |time_s: f64| signal.and_then(|signal| gap_around(signal, time_s));
    let mean = |from_s: f64, to_s: f64| {
        let values = &track.specific_force_mps2[track.index_at(from_s)..track.index_at(to_s)];
        (!values.is_empty()).then(|| values.iter().sum::<f64>() / values.len() as f64)
    };
    let from_s = release.time_s + 3.0 * release.u_s + AFTER_RELEASE_S;
    let start = mean(from_s, from_s + mean_s)?;
    // How long before it the course is compared with, to tell how it was changing anyway.
    let earlier_s = 2.0 * clear_s + mean_s;
    let (mut best, mut largest) = (None, 0.0);
    let mut time_s = from_s + 2.0 * mean_s + 2.0 * clear_s;
    while time_s < separation_s - BEFORE_SEPARATION_S {
        let (from_s, to_s) = gap(time_s).map_or((time_s, time_s), |(from_s, to_s)| (from_s, to_s));
        let (left_s, right_s) = (from_s - clear_s, to_s + clear_s);
        let before = mean(left_s - mean_s, left_s)?;
        let Some(after) = mean(right_s, right_s + mean_s) else { break };
        // What the course before would have done anyway over the same distance.
        let apart_s = right_s - left_s + mean_s;
        let earlier = mean(left_s - mean_s - earlier_s, left_s - earlier_s)?;
        let course = (before - earlier) * apart_s / earlier_s;
        let change = (after - before) - course;
        let share = change / before.abs().max(0.3 * start.abs());
        let here = track.index_at(time_s);
        let u_mps2 = |time_s: f64| track.u_specific_force_mps2[track.index_at(time_s)];
        let well_known = u_mps2(left_s).max(u_mps2(right_s)) < KNOWN * start.abs();
        let is_no_noise = change.abs() > BEYOND_NOISE * noise_mps2;
        if well_known && is_no_noise && !(-STEP_DOWN..=STEP_UP).contains(&share) && share.abs() > largest {
            largest = share.abs();
            let x_m = track.motion.x_m[here];
            best = Some(Step { time_s, x_m, from_mps2: before, to_mps2: after });
        }
        time_s = f64::max(time_s + 0.25 * mean_s, if to_s > from_s { to_s } else { 0.0 });
    }
    best.map(|step| halfway(track, step, clear_s + mean_s))
}

/// How finely a channel can tell a step: over what means are taken, and what is left clear of it either side.
struct Pace {
    mean_s: f64,
    clear_s: f64,
    /// In a mean.
    n_samples: f64,
}

impl Pace {
    /// A mean needs a few samples, and a step through a filter lasts as long as that rises (0.35 over its bandwidth).
    fn of(signal: Option<&Signal>) -> Self {
        let interval_s = signal.map_or(0.0, |signal| signal.nominal_rate_hz.recip());
        let rise_s = signal.and_then(|signal| signal.bandwidth_hz).map_or(0.0, |hz| 0.35 / hz);
        let mean_s = f64::max(MEAN_S, 4.0 * interval_s);
        let n_samples = if interval_s > 0.0 { mean_s / interval_s } else { 1.0 };
        Self { mean_s, clear_s: f64::max(CLEAR_S, 0.5 * (interval_s + rise_s)), n_samples }
    }
}

/// The gap of a channel that an instant lies in, if it is not too long.
fn gap_around(signal: &Signal, time_s: f64) -> Option<(f64, f64)> {
    let after = signal.time_s.partition_point(|&t| t < time_s);
    let (from_s, to_s) = (*signal.time_s.get(after.checked_sub(1)?)?, *signal.time_s.get(after)?);
    let length_s = to_s - from_s;
    (length_s > 1.5 / signal.nominal_rate_hz && length_s > CLEAR_S && length_s < LONGEST_GAP_S)
        .then_some((from_s, to_s))
}

/// The instant at which the force is half-way through the step.
fn halfway(track: &Track, step: Step, reach_s: f64) -> Step {
    let half = 0.5 * (step.from_mps2 + step.to_mps2);
    let (first, last) = (track.index_at(step.time_s - reach_s), track.index_at(step.time_s + reach_s));
    let past = |idx: &usize| (track.specific_force_mps2[*idx] > half) == step.is_up();
    match (first..last).find(past) {
        Some(idx) => Step { time_s: track.motion.time_s[idx], x_m: track.motion.x_m[idx], ..step },
        None => step,
    }
}

/// A sentence when the mass that the cords set moving was the shuttle's alone: hold tension and weight over specific force.
///
/// m = (T + m·g·sin θ − friction)/f; nearer to the shuttle than to shuttle and payload, on a scale of ratios.
pub(super) fn alone(hold: &Hold, release: &Release, track: &Track, rig: &Rig) -> Option<String> {
    let (tension_n, _) = hold.tension_n?;
    let started = (release.started_force_mps2? - track.bias_mps2) / (1.0 + track.scale);
    let kinematic = started - track.gravity_along_mps2;
    let mass_kg = (tension_n - rig.losses.friction_n.value) / kinematic;
    let (shuttle_kg, both_kg) = (rig.shuttle.mass_kg.value, rig.moving_mass_kg());
    let bound_kg = (shuttle_kg * both_kg).sqrt();
    (kinematic > 0.0 && mass_kg > 0.0 && mass_kg < bound_kg && both_kg > 1.5 * shuttle_kg).then(|| {
        format!(
            "hold tension over acceleration is a mass of {mass_kg:.1} kg; the shuttle has {shuttle_kg:.1} kg, with the payload {both_kg:.1} kg: it ran alone"
        )
    })
}

/// A sentence when payload and shuttle coasted together after the push had ended.
pub(super) fn coasted_together(track: &Track, separation: &Separation, rig: &Rig) -> Option<String> {
    const FROM_S: f64 = 0.01;
    const TO_S: f64 = 0.05;
    let first = track.index_at(separation.time_s + FROM_S);
    let until = |idx: &usize| {
        track.motion.time_s[*idx] > separation.time_s + TO_S
            || (track.has_position && track.motion.x_m[*idx] > rig.rail.brake_x_m - 0.05)
    };
    let last = (first..track.motion.time_s.len()).find(until)?;
    let values = track.specific_force_mps2.get(first..last).filter(|values| values.len() > 20)?;
    let seen = values.iter().sum::<f64>() / values.len() as f64;
    let air_speed_mps = separation.speed_mps + rig.site.head_wind_mps;
    let pressure_pa = 0.5 * rig.site.air_density_kg_per_m3 * air_speed_mps * air_speed_mps.abs();
    let shuttle_n = rig.losses.friction_n.value + pressure_pa * rig.losses.shuttle_drag_area_m2.value;
    let alone = -shuttle_n / rig.shuttle.mass_kg.value;
    let together = -(shuttle_n + pressure_pa * rig.payload.drag_area_m2.value) / rig.moving_mass_kg();
    (seen > 0.5 * (alone + together)).then(|| {
        format!(
            "after the push the shuttle coasted at a specific force of {seen:.1} m/s²; alone it would be {alone:.1}, with the payload {together:.1}: the payload did not separate"
        )
    })
}
