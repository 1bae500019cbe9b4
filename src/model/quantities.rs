//! What a forecast is about: the numbers that one launch comes to, by name.

use super::error::ModelError;
use super::inputs::Moved;
use super::run::{Answers, LaunchRun, answers_to_rest};
use crate::estimation::{CfcFilter, StartUp};
use crate::units::STANDARD_GRAVITY_MPS2;

/// Channel class of the limit's peak g.
const CLASS: u32 = 60;
const RATE_HZ: f64 = 10_000.0;
/// Record before release and after separation that the filter looks at.
const MARGIN_S: f64 = 0.2;

pub const N_QUANTITIES: usize = 9;

/// One number of a forecast.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Quantity {
    /// For programs; as results of a reading are named where they are the same thing.
    pub name: &'static str,
    /// For people: quantity, class and place.
    pub meaning: &'static str,
    pub unit: &'static str,
}

const fn quantity(name: &'static str, meaning: &'static str, unit: &'static str) -> Quantity {
    Quantity { name, meaning, unit }
}

pub const LAUNCH_SPEED: usize = 0;
pub const PEAK_G: usize = 2;
pub const LINE_TENSION: usize = 8;

/// In the order in which [`evaluate`] gives them.
pub const QUANTITIES: [Quantity; N_QUANTITIES] = [
    quantity("launch_speed", "launch speed (payload at separation, ground frame)", "m/s"),
    quantity("airspeed_at_separation", "airspeed at separation", "m/s"),
    quantity("peak_g_cfc60_specific", "peak g (specific force along the rail at the payload, CFC 60)", "g"),
    quantity("peak_g_raw_specific", "peak g (specific force along the rail at the payload, unfiltered)", "g"),
    quantity("peak_g_raw_kinematic", "peak g (kinematic, ground frame, at the payload, unfiltered)", "g"),
    quantity("stroke_time", "stroke time (release to separation)", "s"),
    quantity("arrest_g", "arrest g (kinematic, at the shuttle, unfiltered)", "g"),
    quantity("stopping_distance", "stopping distance (brake contact to standstill)", "m"),
    quantity("line_tension_at_draw", "release-line tension while drawing the last bit", "N"),
];

/// The numbers of one launch; NaN where it has none.
///
/// # Errors
/// As [`super::simulate`].
pub fn evaluate(moved: &Moved, cfc_ratio: f64) -> Result<[f64; N_QUANTITIES], ModelError> {
    let setup = &moved.setup;
    let answers = answers_to_rest(setup)?;
    let g = |mps2: f64| mps2 / STANDARD_GRAVITY_MPS2;
    let separation = answers.separation;
    let speed_mps = separation.map_or(f64::NAN, |at| at.launch_speed_mps) * moved.speed_factor;
    let line_n = setup.cord_pull_n(setup.start_x_m) + setup.losses.friction_n - setup.hold_weight_n();
    Ok([
        speed_mps,
        speed_mps + setup.head_wind_mps,
        g(answers.peak_specific_mps2) * cfc_ratio,
        g(answers.peak_specific_mps2),
        g(answers.peak_kinematic_mps2),
        separation.map_or(f64::NAN, |at| at.t_s),
        if answers.stopping_distance_m.is_some() { g(answers.arrest_mps2) } else { f64::NAN },
        answers.stopping_distance_m.unwrap_or(f64::NAN),
        line_n.max(0.0),
    ])
}

/// Peak of the specific force at the payload in class 60 over the unfiltered one, of a computed launch: what the filter makes
/// of the jump at release. The record before release shows the weight along the rail alone.
pub fn cfc_ratio(run: &LaunchRun, answers: &Answers, resting_mps2: f64) -> f64 {
    let end_s = answers.separation.map_or(run.end_s(), |at| at.t_s);
    let n = |seconds: f64| (seconds * RATE_HZ).ceil() as i32;
    let at = |k: i32| {
        if k < 0 {
            resting_mps2
        } else {
            run.at_time(f64::from(k) / RATE_HZ).map_or(resting_mps2, |s| s.specific_force_mps2)
        }
    };
    let record: Vec<f64> = (-n(MARGIN_S)..n(end_s + MARGIN_S)).map(at).collect();
    let Ok(filter) = CfcFilter::new(CLASS, RATE_HZ) else { return 1.0 };
    let filtered = filter.two_pass(&record, StartUp::Hold);
    let stroke = &filtered[n(MARGIN_S) as usize..(n(MARGIN_S) + n(end_s)) as usize];
    stroke.iter().copied().fold(f64::NEG_INFINITY, f64::max) / answers.peak_specific_mps2
}
