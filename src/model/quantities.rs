//! What a forecast is about: the numbers that one launch comes to, by name.

use super::error::ModelError;
use super::inputs::Moved;
use super::run::answers_to_rest;
use crate::units::STANDARD_GRAVITY_MPS2;

pub const N_QUANTITIES: usize = 9;

/// One number of a forecast.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Quantity {
    /// For programs; as results of a reading are named where they are the same thing.
    pub name: &'static str,
    /// For people, short: quantity and class.
    pub label: &'static str,
    /// What exactly is meant: frame, direction, place.
    pub detail: &'static str,
    pub unit: &'static str,
}

const fn quantity(name: &'static str, label: &'static str, detail: &'static str, unit: &'static str) -> Quantity {
    Quantity { name, label, detail, unit }
}

/// What one launch comes to, in numbers.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Outcome {
    /// In the order of [`QUANTITIES`]; NaN where the launch has none.
    pub numbers: [f64; N_QUANTITIES],
    /// The shuttle came to the end of the rail moving.
    pub at_end_stop: bool,
}

impl Quantity {
    /// Label and detail in one.
    pub fn meaning(&self) -> String {
        format!("{} ({})", self.label, self.detail)
    }
}

pub const LAUNCH_SPEED: usize = 0;
pub const PEAK_G: usize = 2;
pub const LINE_TENSION: usize = 8;

/// In the order in which [`evaluate`] gives them.
pub const QUANTITIES: [Quantity; N_QUANTITIES] = [
    quantity("launch_speed", "launch speed", "payload at separation, ground frame", "m/s"),
    quantity("airspeed_at_separation", "airspeed at separation", "launch speed and head wind", "m/s"),
    quantity("peak_g_cfc60_specific", "peak g, CFC 60", "specific force along the rail at the payload", "g"),
    quantity("peak_g_raw_specific", "peak g, unfiltered", "specific force along the rail at the payload", "g"),
    quantity("peak_g_raw_kinematic", "peak g, kinematic", "unfiltered, ground frame, at the payload", "g"),
    quantity("stroke_time", "stroke time", "release to separation", "s"),
    quantity("arrest_g", "arrest g, kinematic", "unfiltered, at the shuttle", "g"),
    quantity("stopping_distance", "stopping distance", "brake contact to standstill", "m"),
    quantity("line_tension_at_draw", "release line", "tension of the release line while drawing the last bit", "N"),
];

/// The numbers of one launch, with the peak in class 60 as that part of the unfiltered one; NaN where it has none.
///
/// # Errors
/// As [`super::simulate`].
pub fn evaluate(moved: &Moved, cfc_ratio: f64) -> Result<Outcome, ModelError> {
    let setup = &moved.setup;
    let answers = answers_to_rest(setup)?;
    let g = |mps2: f64| mps2 / STANDARD_GRAVITY_MPS2;
    let separation = answers.separation;
    let speed_mps = separation.map_or(f64::NAN, |at| at.launch_speed_mps) * moved.speed_factor;
    let line_n = setup.cord_pull_n(setup.start_x_m) + setup.losses.friction_n - setup.hold_weight_n();
    let numbers = [
        speed_mps,
        speed_mps + setup.head_wind_mps,
        g(answers.peak_specific_mps2) * cfc_ratio,
        g(answers.peak_specific_mps2),
        g(answers.peak_kinematic_mps2),
        separation.map_or(f64::NAN, |at| at.t_s),
        if answers.stopping_distance_m.is_some() { g(answers.arrest_mps2) } else { f64::NAN },
        answers.stopping_distance_m.unwrap_or(f64::NAN),
        line_n.max(0.0),
    ];
    Ok(Outcome { numbers, at_end_stop: answers.at_end_stop })
}
