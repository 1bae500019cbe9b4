//! A measured quantity over time, in SI units.

use crate::rig::Role;

/// Engineering values on their own time axis. Gaps are absent samples, never filled.
#[derive(Debug, Clone, PartialEq)]
pub struct Signal {
    pub name: String,
    pub role: Role,
    /// Seconds since the trial's time zero, strictly increasing; the channel's group delay is already taken off.
    pub time_s: Vec<f64>,
    /// In `role.unit()`, as long as `time_s`.
    pub value: Vec<f64>,
    /// Standard uncertainty of the zero, in the role's unit (common to all samples).
    pub zero_uncertainty: f64,
    /// Relative standard uncertainty of the scale (common to all samples).
    pub scale_relative_uncertainty: f64,
    /// Standard uncertainty of the time axis against the trial's other signals.
    pub time_uncertainty_s: f64,
    pub nominal_rate_hz: f64,
    /// Anti-alias bandwidth, where the device states it.
    pub bandwidth_hz: Option<f64>,
    /// Smallest step of the value (one count), for quantisation noise.
    pub resolution: f64,
    /// Values at which the channel saturates, in the role's unit.
    pub range: Option<(f64, f64)>,
}
