//! Starts the model from the trial's own measured state and sets it beside the measurement.

use serde::Serialize;
use thiserror::Error;

use crate::calibration::Signal;
use crate::model::{EventKind, ModelError};
use crate::reading::{Motion, Reading};
use crate::rig::{Rig, Role};

use super::course::{self, Course};
use super::force::{self, Shape};
use super::residual::{Residuals, Sides};
use super::sentence::sentence;

/// Spacing of the comparison.
const GRID_S: f64 = 1e-3;
/// The first instants belong to the hook, which the model takes as opening at once.
const FROM_S: f64 = 3e-3;

/// Why a trial cannot be replayed.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum ReplayError {
    #[error("no replay without {what}: {reason}")]
    Lacking { what: &'static str, reason: String },
    #[error("the launch model cannot start from the measured state")]
    Model(#[from] ModelError),
    #[error("only {n_points} points of the power stroke were measured, at least {needed} are needed")]
    TooShort { n_points: usize, needed: usize },
}

/// The measured state that the model starts from.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Start {
    pub release_s: f64,
    pub u_release_s: f64,
    /// At the release line, just before the release.
    pub hold_tension_n: f64,
    pub u_hold_tension_n: f64,
    pub x_m: f64,
    pub u_x_m: f64,
}

/// A trial beside the model.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Replay {
    pub start: Start,
    /// The model over the whole comparison, from the release on.
    pub course: Course,
    pub modelled_launch_speed_mps: Option<f64>,
    pub u_modelled_launch_speed_mps: Option<f64>,
    pub modelled_separation_x_m: Option<f64>,
    pub residuals: Vec<Residuals>,
    /// The loss term whose shape the missing force has most.
    pub shape: Option<Shape>,
    /// Names the largest misfit.
    pub sentence: String,
}

/// Replays a trial through the launch model.
///
/// # Errors
/// [`ReplayError::Lacking`] when the reading has no release, hold tension, draw or motion; [`ReplayError::Model`] when the
/// model refuses the measured state.
pub fn replay(signals: &[Signal], reading: &Reading, rig: &Rig) -> Result<Replay, ReplayError> {
    let start = start(reading, rig)?;
    let motion = reading.motion.as_ref().ok_or_else(|| lacking(reading, "motion", "launch_speed"))?;
    let separation = reading.instant("separation").ok_or_else(|| lacking(reading, "separation", "launch_speed"))?;
    let measured = on_grid(motion, start.release_s, separation.time_s);
    const NEEDED: usize = 20;
    if measured.time_s.len() < NEEDED {
        return Err(ReplayError::TooShort { n_points: measured.time_s.len(), needed: NEEDED });
    }
    let since_s: Vec<f64> = measured.time_s.iter().map(|t| t - start.release_s).collect();
    let (run, course) = course::run(rig, &start, &since_s)?;
    let mut residuals = motion_residuals(&measured, &course, &start);
    residuals.extend(anchor_residuals(signals, &measured, &course, &start));
    let shape = force::best_shape(&measured.x_m, &measured.v_mps, &measured.a_mps2, &course, rig.moving_mass_kg());
    let modelled = run.event(EventKind::Separation);
    let near_end = course.u_v_mps.last().copied();
    Ok(Replay {
        start,
        modelled_launch_speed_mps: modelled.map(|event| event.ground_v_mps),
        u_modelled_launch_speed_mps: modelled.and(near_end),
        modelled_separation_x_m: modelled.map(|event| event.x_m),
        sentence: sentence(&residuals, shape.as_ref()),
        residuals,
        shape,
        course,
    })
}

fn lacking(reading: &Reading, what: &'static str, result: &str) -> ReplayError {
    let reason = reading
        .absence(result)
        .map_or_else(|| "the reading does not have it".to_owned(), |absent| absent.reason.clone());
    ReplayError::Lacking { what, reason }
}

fn start(reading: &Reading, rig: &Rig) -> Result<Start, ReplayError> {
    let release = reading.instant("release").ok_or_else(|| lacking(reading, "a release", "release_time"))?;
    let tension = reading.result("hold_tension").ok_or_else(|| lacking(reading, "the hold tension", "hold_tension"))?;
    let draw = reading.result("draw").ok_or_else(|| lacking(reading, "the draw", "draw"))?;
    Ok(Start {
        release_s: release.time_s,
        u_release_s: release.standard_uncertainty_s,
        hold_tension_n: tension.value,
        u_hold_tension_n: tension.standard_uncertainty,
        x_m: rig.rail.zero_mark_x_m - draw.value,
        u_x_m: draw.standard_uncertainty,
    })
}

/// The smoothed motion at about every [`GRID_S`] of the power stroke; gaps stay gaps.
fn on_grid(motion: &Motion, release_s: f64, separation_s: f64) -> Motion {
    let mut grid = Motion { sensors: motion.sensors.clone(), ..Motion::default() };
    let mut next_s = release_s + FROM_S;
    for idx in 0..motion.time_s.len() {
        let time_s = motion.time_s[idx];
        if time_s > separation_s {
            break;
        }
        if time_s >= next_s {
            grid.time_s.push(time_s);
            grid.x_m.push(motion.x_m[idx]);
            grid.v_mps.push(motion.v_mps[idx]);
            grid.a_mps2.push(motion.a_mps2[idx]);
            grid.u_x_m.push(motion.u_x_m[idx]);
            grid.u_v_mps.push(motion.u_v_mps[idx]);
            grid.u_a_mps2.push(motion.u_a_mps2[idx]);
            next_s = time_s + GRID_S - 1e-9;
        }
    }
    grid
}

/// Slope of a column at each grid point: what a shift of the alignment would do.
fn slopes(time_s: &[f64], column: &[f64]) -> Vec<f64> {
    let n = column.len();
    let slope = |idx: usize| {
        let (before, after) = (idx.saturating_sub(1), (idx + 1).min(n - 1));
        (column[after] - column[before]) / (time_s[after] - time_s[before]).max(1e-9)
    };
    (0..n).map(slope).collect()
}

fn combined(measured: &[f64], modelled: &[f64], slopes: &[f64], u_time_s: f64) -> Vec<f64> {
    let one = |((a, b), slope): ((&f64, &f64), &f64)| a.hypot(*b).hypot(slope * u_time_s);
    measured.iter().zip(modelled).zip(slopes).map(one).collect()
}

fn motion_residuals(measured: &Motion, course: &Course, start: &Start) -> Vec<Residuals> {
    let sides = |quantity, unit, seen: &[f64], u_seen: &[f64], modelled: &[f64], u_modelled: &[f64]| Sides {
        quantity,
        unit,
        time_s: measured.time_s.clone(),
        x_m: measured.x_m.clone(),
        measured: seen.to_vec(),
        modelled: modelled.to_vec(),
        u: combined(u_seen, u_modelled, &slopes(&course.time_s, modelled), start.u_release_s),
    };
    let (m, c) = (measured, course);
    let all = [
        sides("acceleration", "m/s^2", &m.a_mps2, &m.u_a_mps2, &c.a_mps2, &c.u_a_mps2),
        sides("velocity", "m/s", &m.v_mps, &m.u_v_mps, &c.v_mps, &c.u_v_mps),
        sides("position", "m", &m.x_m, &m.u_x_m, &c.x_m, &c.u_x_m),
    ];
    all.into_iter().filter_map(Residuals::of).collect()
}

/// Anchor tension, mean of each grid step; points without a sample are left out.
fn anchor_residuals(signals: &[Signal], measured: &Motion, course: &Course, start: &Start) -> Option<Residuals> {
    let signal = signals.iter().find(|signal| signal.role == Role::CordAnchorTension)?;
    let slope = slopes(&course.time_s, &course.anchor_tension_n);
    let mut sides = Sides {
        quantity: "anchor tension",
        unit: "N",
        time_s: Vec::new(),
        x_m: Vec::new(),
        measured: Vec::new(),
        modelled: Vec::new(),
        u: Vec::new(),
    };
    for (idx, time_s) in measured.time_s.iter().enumerate() {
        let first = signal.time_s.partition_point(|t| *t < time_s - 0.5 * GRID_S);
        let last = signal.time_s.partition_point(|t| *t < time_s + 0.5 * GRID_S);
        let Some(values) = signal.value.get(first..last).filter(|values| !values.is_empty()) else { continue };
        let mean_n = values.iter().sum::<f64>() / values.len() as f64;
        let calibration_n = signal.zero_uncertainty.hypot(mean_n * signal.scale_relative_uncertainty);
        let time_n = slope[idx] * start.u_release_s.hypot(signal.time_uncertainty_s);
        sides.time_s.push(*time_s);
        sides.x_m.push(measured.x_m[idx]);
        sides.measured.push(mean_n);
        sides.modelled.push(course.anchor_tension_n[idx]);
        sides.u.push(calibration_n.hypot(time_n).hypot(course.u_anchor_tension_n[idx]));
    }
    Residuals::of(sides)
}
