//! The modelled launch over a grid of times, with what the rig file leaves uncertain in it.
//!
//! Uncertainty by first-order propagation (GUM, JCGM 100:2008, 5.1.2): each input is moved by its standard uncertainty,
//! the launch run again, and the changes at equal time added in quadrature. Every quantity moves with every input, so
//! nothing is assumed about how.

use serde::Serialize;

use crate::model::{LaunchRun, LaunchSetup, ModelError, Sample, hold_pull_band_n, simulate};
use crate::rig::Rig;

use super::replayed::Start;

/// The modelled launch at the times that residuals are taken at. Columns have the same length.
#[derive(Debug, Clone, PartialEq, Serialize, Default)]
pub struct Course {
    /// Since the release.
    pub time_s: Vec<f64>,
    pub x_m: Vec<f64>,
    /// Rail frame.
    pub v_mps: Vec<f64>,
    pub a_mps2: Vec<f64>,
    pub anchor_tension_n: Vec<f64>,
    pub u_x_m: Vec<f64>,
    pub u_v_mps: Vec<f64>,
    pub u_a_mps2: Vec<f64>,
    pub u_anchor_tension_n: Vec<f64>,
}

type Column = fn(&Sample) -> f64;
const COLUMNS: [Column; 4] = [|s| s.x_m, |s| s.v_mps, |s| s.a_mps2, |s| s.anchor_tension_n];

/// Runs the model and its neighbours.
pub(super) fn run(rig: &Rig, start: &Start, time_s: &[f64]) -> Result<(LaunchRun, Course), ModelError> {
    let nominal = simulate(&setup(rig, start)?)?;
    let base = sampled(&nominal, time_s);
    let mut squares = vec![vec![0.0; time_s.len()]; COLUMNS.len()];
    for (moved_rig, moved_start) in neighbours(rig, start) {
        let moved = sampled(&simulate(&setup(&moved_rig, &moved_start)?)?, time_s);
        for (sum, (moved, base)) in squares.iter_mut().zip(moved.iter().zip(&base)) {
            for (square, (a, b)) in sum.iter_mut().zip(moved.iter().zip(base)) {
                *square += (a - b) * (a - b);
            }
        }
    }
    let mut u = squares.into_iter().map(|sum| sum.into_iter().map(f64::sqrt).collect::<Vec<f64>>());
    let mut columns = base.into_iter();
    let next = |from: &mut dyn Iterator<Item = Vec<f64>>| from.next().unwrap_or_default();
    let course = Course {
        time_s: time_s.to_vec(),
        x_m: next(&mut columns),
        v_mps: next(&mut columns),
        a_mps2: next(&mut columns),
        anchor_tension_n: next(&mut columns),
        u_x_m: next(&mut u),
        u_v_mps: next(&mut u),
        u_a_mps2: next(&mut u),
        u_anchor_tension_n: next(&mut u),
    };
    Ok((nominal, course))
}

fn setup(rig: &Rig, start: &Start) -> Result<LaunchSetup, ModelError> {
    LaunchSetup::drawn(rig, start.hold_tension_n, start.x_m)
}

fn sampled(run: &LaunchRun, time_s: &[f64]) -> Vec<Vec<f64>> {
    let samples: Vec<Option<Sample>> = time_s.iter().map(|t| run.at_time(*t)).collect();
    let column = |value: &Column| samples.iter().map(|sample| sample.as_ref().map_or(f64::NAN, value)).collect();
    COLUMNS.iter().map(column).collect()
}

/// One input moved by its standard uncertainty at a time.
fn neighbours(rig: &Rig, start: &Start) -> Vec<(Rig, Start)> {
    // Friction may hold the shuttle either way: rectangular within the band (GUM 4.3.7).
    let u_pull_n = start.u_hold_tension_n.hypot(hold_pull_band_n(rig) / 3f64.sqrt());
    let mut all = Vec::new();
    let mut moved = |change: &dyn Fn(&mut Rig, &mut Start)| {
        let (mut rig, mut start) = (rig.clone(), *start);
        change(&mut rig, &mut start);
        all.push((rig, start));
    };
    moved(&|_, start| start.hold_tension_n += u_pull_n);
    moved(&|_, start| start.x_m += start.u_x_m);
    moved(&|rig, _| rig.shuttle.mass_kg.value += rig.shuttle.mass_kg.standard_uncertainty);
    moved(&|rig, _| rig.payload.mass_kg.value += rig.payload.mass_kg.standard_uncertainty);
    moved(&|rig, _| rig.payload.drag_area_m2.value += rig.payload.drag_area_m2.standard_uncertainty);
    moved(&|rig, _| rig.losses.friction_n.value += rig.losses.friction_n.standard_uncertainty);
    moved(&|rig, _| rig.losses.shuttle_drag_area_m2.value += rig.losses.shuttle_drag_area_m2.standard_uncertainty);
    // The hold fixes the curve's height there; its shape stays as uncertain as its height was.
    moved(&|rig, _| bend_curve(rig));
    all
}

/// Moves the middle of the cords' curve against its end by the curve's relative uncertainty.
fn bend_curve(rig: &mut Rig) {
    let Some(longest) = rig.cords.curve.last().map(|point| point.elongation) else { return };
    let relative = rig.cords.force_relative_uncertainty;
    for point in &mut rig.cords.curve {
        point.tension_n *= 1.0 + relative * (1.0 - point.elongation / longest);
    }
}
