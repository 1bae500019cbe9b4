//! Encoder and accelerometer each for itself, where one motion can't explain both.
//!
//! A rail that swings as slowly as the stroke lasts moves the encoder's frame as an accelerometer's scale error would, so the
//! two can't be told apart by one launch. Then place and speed along the rail are the encoder's, speed against the ground and
//! force are the accelerometer's, and the rail's speed is their difference.

use crate::calibration::Signal;

use super::motion::{Setting, Track, together};
use super::result::Motion;

/// `None` where one of them alone gives no motion.
pub(super) fn track(position: &Signal, force: &Signal, strain: f64, setting: &Setting) -> Option<Track> {
    let by_encoder = together(Some(position), None, setting)?;
    let by_force = together(None, Some(force), setting)?;
    let times_s = by_force.motion.time_s.clone();
    let seen = |column: &[f64]| onto(&times_s, &by_encoder.motion.time_s, column);
    let rail_frame = &by_encoder.motion;
    let v_mps = seen(&rail_frame.v_mps);
    let rail_v_mps = by_force.motion.v_mps.iter().zip(&v_mps).map(|(ground, rail)| ground - rail).collect();
    Some(Track {
        motion: Motion {
            x_m: seen(&rail_frame.x_m),
            u_x_m: seen(&rail_frame.u_x_m),
            u_v_mps: seen(&rail_frame.u_v_mps),
            v_mps,
            sensors: "encoder along the rail, accelerometer against the ground, each for itself".to_owned(),
            ..by_force.motion
        },
        rail_v_mps,
        rest_s: by_encoder.rest_s,
        u_encoder_scale: by_encoder.u_encoder_scale,
        has_position: true,
        parted: Some(strain),
        ..by_force
    })
}

/// A column on other times, linear between its own and held beyond them.
fn onto(times_s: &[f64], own_s: &[f64], column: &[f64]) -> Vec<f64> {
    let last = own_s.len() - 1;
    let mut next = 1;
    let at = |time_s: &f64| {
        while next < last && own_s[next] < *time_s {
            next += 1;
        }
        let (t0, t1) = (own_s[next - 1], own_s[next]);
        let share = ((time_s - t0) / (t1 - t0)).clamp(0.0, 1.0);
        column[next - 1] * (1.0 - share) + column[next] * share
    };
    times_s.iter().map(at).collect()
}
