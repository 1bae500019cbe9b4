//! What a release at this instant would give: for the live display, in well under a millisecond.
//!
//! First-order propagation over the fast launch ([`super::propagation`]) of everything the rig file is unsure of, with the
//! stiction band at the hold, the cord curve's shape and the cord model.

use super::error::ModelError;
use super::inputs::{Inputs, Known};
use super::interval::Interval;
use super::propagation::first_order;
use super::run::launch_answers;
use super::setup::{FAST, LaunchSetup};
use crate::rig::Rig;
use crate::units::STANDARD_GRAVITY_MPS2;

/// A release now.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ReleaseForecast {
    pub launch_speed_mps: Interval,
    /// Launch speed and head wind together.
    pub airspeed_mps: Interval,
    /// Greatest specific force along the rail at the payload, unfiltered, in multiples of 9.80665 m/s².
    pub peak_g: Interval,
}

/// What a release with the present line tension and place would give.
///
/// # Errors
/// As [`LaunchSetup::drawn`]; also a shuttle that a release would not move.
pub fn released_now(rig: &Rig, tension_n: f64, x_m: f64) -> Result<ReleaseForecast, ModelError> {
    let mut setup = LaunchSetup::drawn(rig, tension_n, x_m)?;
    setup.relative_tolerance = FAST;
    let inputs = Inputs::of(rig, Known::HoldTension { tension_n, x_m })?;
    let [speed, air, peak] = first_order(&setup, &inputs, |moved, _| {
        let answers = launch_answers(&moved.setup)?;
        let speed_mps = answers.separation.map_or(0.0, |separation| separation.launch_speed_mps);
        let speed_mps = speed_mps * moved.speed_factor;
        Ok([speed_mps, speed_mps + moved.setup.head_wind_mps, answers.peak_specific_mps2])
    })?
    .map(|propagated| propagated.interval);
    Ok(ReleaseForecast { launch_speed_mps: speed, airspeed_mps: air, peak_g: peak.times(1.0 / STANDARD_GRAVITY_MPS2) })
}
