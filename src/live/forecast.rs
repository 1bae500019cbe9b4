//! "Released now": what the launch model says of a release at this tension and draw.

use crate::model;
use crate::rig::Rig;

use super::state::ReleasedNow;

/// The model's first-order answer with its 95 % intervals; none where the model has no launch to tell of, and never a
/// number that is not finite.
pub fn released_now(rig: &Rig, tension_n: f64, x_m: f64) -> Option<ReleasedNow> {
    let forecast = model::released_now(rig, tension_n, x_m).ok()?;
    let (speed, peak) = (forecast.launch_speed_mps, forecast.peak_g);
    let all = [speed.value, speed.low, speed.high, peak.value, peak.low, peak.high];
    all.iter().all(|value| value.is_finite()).then_some(ReleasedNow {
        launch_speed_mps: speed.value,
        launch_speed_low_mps: speed.low,
        launch_speed_high_mps: speed.high,
        peak_g: peak.value,
        peak_g_low: peak.low,
        peak_g_high: peak.high,
    })
}
