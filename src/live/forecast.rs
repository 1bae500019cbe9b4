//! "Released now": what the launch model says of a release at this tension and draw.

use statrs::distribution::{ContinuousCDF, Normal};

use crate::model;
use crate::rig::Rig;

use super::state::ReleasedNow;

/// The model's first-order answer with its 95 % intervals, the peak in the limit's channel class; none where the model has no launch to tell of, and never a
/// number that is not finite.
pub fn released_now(rig: &Rig, tension_n: f64, x_m: f64, peak_ratio: f64) -> Option<ReleasedNow> {
    let forecast = model::released_now(rig, tension_n, x_m).ok()?;
    let (speed, air) = (forecast.launch_speed_mps, forecast.airspeed_mps);
    let peak = forecast.peak_g.times(peak_ratio);
    let all = [speed.value, speed.low, speed.high, peak.value, peak.low, peak.high, air.value, air.low, air.high];
    if !all.iter().all(|value| value.is_finite()) {
        return None;
    }
    let speed_below = |mps: f64| below(speed.value, speed.standard_uncertainty, mps);
    Some(ReleasedNow {
        launch_speed_mps: speed.value,
        launch_speed_low_mps: speed.low,
        launch_speed_high_mps: speed.high,
        airspeed_mps: air.value,
        airspeed_low_mps: air.low,
        airspeed_high_mps: air.high,
        peak_g: peak.value,
        peak_g_low: peak.low,
        peak_g_high: peak.high,
        in_window: speed_below(rig.plan.launch_speed_max_mps) - speed_below(rig.plan.launch_speed_min_mps),
        under_limit: below(peak.value, peak.standard_uncertainty, rig.limits.peak_g),
    })
}

/// Probability that a normal quantity lies below a bound.
fn below(value: f64, standard_uncertainty: f64, bound: f64) -> f64 {
    match Normal::new(value, standard_uncertainty) {
        Ok(normal) => normal.cdf(bound),
        // Without an uncertainty the answer is a plain one.
        Err(_) => f64::from(u8::from(value < bound)),
    }
}

/// Launch speed gained for each newton at the release line, at this place.
pub fn speed_per_newton(rig: &Rig, tension_n: f64, x_m: f64) -> Option<f64> {
    const STEP_SHARE: f64 = 0.03;
    let less_n = tension_n * (1.0 - STEP_SHARE);
    let speed_mps = |tension_n| model::released_now(rig, tension_n, x_m).ok().map(|now| now.launch_speed_mps.value);
    let slope = (speed_mps(tension_n)? - speed_mps(less_n)?) / (tension_n - less_n);
    (slope.is_finite() && slope > 0.0).then_some(slope)
}
