//! What a release at this instant would give: for the live display, in well under a millisecond.
//!
//! First-order propagation (JCGM 100:2008, section 5.1) with central differences over the fast launch. The interval holds
//! masses, drag areas, friction, the stiction band, the cord curve's shape and the cord model.

use super::error::ModelError;
use super::from_rig::hold_pull_band_n;
use super::run::launch_answers;
use super::setup::{FAST, LaunchSetup};
use crate::rig::Rig;
use crate::units::STANDARD_GRAVITY_MPS2;

/// A value with its standard uncertainty and 95 % interval.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Interval {
    pub value: f64,
    pub standard_uncertainty: f64,
    pub low: f64,
    pub high: f64,
}

/// A release now.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ReleaseForecast {
    pub launch_speed_mps: Interval,
    /// Greatest specific force along the rail at the payload, unfiltered, in multiples of 9.80665 m/s².
    pub peak_g: Interval,
}

/// Two-sided 95 % of a normal distribution.
const COVERAGE_FACTOR: f64 = 1.959_963_984_540_054;
/// Relative standard uncertainty of the launch speed for each unit of cord mass over carried mass: the one third rule
/// against a chain of masses (tools/oracles).
const CORD_MODEL_PER_MASS_RATIO: f64 = 0.03;

impl Interval {
    pub fn normal(value: f64, standard_uncertainty: f64) -> Self {
        let half = COVERAGE_FACTOR * standard_uncertainty;
        Self { value, standard_uncertainty, low: value - half, high: value + half }
    }
}

/// A change of one input by one standard uncertainty.
type Nudge = fn(&mut Inputs, f64);

/// What the forecast varies.
#[derive(Debug, Clone)]
struct Inputs {
    rig: Rig,
    tension_n: f64,
    shape: f64,
}

/// What a release with the present line tension and place would give.
///
/// # Errors
/// As [`LaunchSetup::drawn`]; also a shuttle that a release would not move.
pub fn released_now(rig: &Rig, tension_n: f64, x_m: f64) -> Result<ReleaseForecast, ModelError> {
    let inputs = Inputs { rig: rig.clone(), tension_n, shape: 0.0 };
    let (speed, peak) = evaluate(&inputs, x_m)?;
    let (mut speed_variance, mut peak_variance) = (0.0, 0.0);
    for (nudge, uncertainty) in nudges(rig) {
        if uncertainty <= 0.0 {
            continue;
        }
        let (mut above, mut below) = (inputs.clone(), inputs.clone());
        nudge(&mut above, uncertainty);
        nudge(&mut below, -uncertainty);
        let (up, down) = (evaluate(&above, x_m)?, evaluate(&below, x_m)?);
        speed_variance += (0.5 * (up.0 - down.0)).powi(2);
        peak_variance += (0.5 * (up.1 - down.1)).powi(2);
    }
    let cord_mass_kg = f64::from(rig.cords.count) * rig.cords.mass_kg * rig.cords.travel_ratio.powi(2);
    speed_variance += (CORD_MODEL_PER_MASS_RATIO * cord_mass_kg / rig.moving_mass_kg() * speed).powi(2);
    Ok(ReleaseForecast {
        launch_speed_mps: Interval::normal(speed, speed_variance.sqrt()),
        peak_g: Interval::normal(peak, peak_variance.sqrt()),
    })
}

fn nudges(rig: &Rig) -> [(Nudge, f64); 7] {
    let losses = &rig.losses;
    [
        (|inputs, u| inputs.rig.shuttle.mass_kg.value += u, rig.shuttle.mass_kg.standard_uncertainty),
        (|inputs, u| inputs.rig.payload.mass_kg.value += u, rig.payload.mass_kg.standard_uncertainty),
        (|inputs, u| inputs.rig.payload.drag_area_m2.value += u, rig.payload.drag_area_m2.standard_uncertainty),
        (
            |inputs, u| inputs.rig.losses.shuttle_drag_area_m2.value += u,
            losses.shuttle_drag_area_m2.standard_uncertainty,
        ),
        (|inputs, u| inputs.rig.losses.friction_n.value += u, losses.friction_n.standard_uncertainty),
        (|inputs, u| inputs.tension_n += u, hold_pull_band_n(rig) / 3.0_f64.sqrt()),
        (|inputs, u| inputs.shape += u, rig.cords.force_relative_uncertainty),
    ]
}

fn evaluate(inputs: &Inputs, x_m: f64) -> Result<(f64, f64), ModelError> {
    let mut rig = inputs.rig.clone();
    let held = rig.cords.travel_ratio * rig.draw_m(x_m) / rig.cords.free_length_m;
    // The hold tension pins the force where the cord is held; what its curve is unsure of there, it is not unsure of: the
    // rest grows toward slack.
    for point in &mut rig.cords.curve {
        point.tension_n *= 1.0 + inputs.shape * (1.0 - point.elongation / held);
    }
    let mut setup = LaunchSetup::drawn(&rig, inputs.tension_n, x_m)?;
    setup.relative_tolerance = FAST;
    let answers = launch_answers(&setup)?;
    let speed_mps = answers.separation.map_or(0.0, |separation| separation.launch_speed_mps);
    Ok((speed_mps, answers.peak_specific_mps2 / STANDARD_GRAVITY_MPS2))
}
