//! Run-out: where the brake took hold, how hard it was, where the shuttle stood.

use crate::rig::{Rig, Role};
use crate::units::STANDARD_GRAVITY_MPS2;

use super::launch::Separation;
use super::motion::Track;
use super::peak::CLASS;
use super::rows::{Book, Budget};
use super::sensors::Sensors;
use super::stretch::{Window, label};

pub(super) fn report(
    sensors: &Sensors<'_>,
    track: &Track,
    separation: Option<&Separation>,
    rig: &Rig,
    book: &mut Book,
) {
    let Some(rest_s) = track.rest_s else {
        for name in ["arrest_peak_g", "arrest_distance"] {
            book.absent(name, "the record ends before the shuttle stood");
        }
        return;
    };
    book.instant("rest", rest_s, 0.005, format!("the shuttle stands from here on ({})", track.motion.sensors));
    let contact = separation.and_then(|separation| brake_contact(track, separation.time_s, rig));
    if let Some((idx, evidence)) = &contact {
        book.instant("brake_contact", track.motion.time_s[*idx], 0.001, evidence.clone());
    }
    peak_row(sensors, track, separation, rest_s, rig, book);
    match contact.filter(|_| track.has_position) {
        Some((idx, _)) => {
            let last = track.index_at(rest_s);
            let distance_m = track.motion.x_m[last] - track.motion.x_m[idx];
            let budget = Budget::default()
                .with("encoder", distance_m * track.u_encoder_scale)
                .with("moment of contact", track.motion.v_mps[idx] * 0.001);
            book.result("arrest_distance", distance_m, "m", budget, "from brake contact to rest, smoothed position");
        }
        None => book.absent("arrest_distance", "brake contact was not found, or there is no encoder"),
    }
}

/// The first time after separation that half of the brake's deceleration acts on the shuttle alone.
fn brake_contact(track: &Track, separation_s: f64, rig: &Rig) -> Option<(usize, String)> {
    let half_mps2 = 0.5 * rig.rail.brake_force_n / rig.shuttle.mass_kg.value;
    let n = track.motion.time_s.len();
    let idx = (track.index_at(separation_s)..n).find(|&idx| track.motion.a_mps2[idx] < -half_mps2)?;
    let evidence = format!(
        "deceleration passed {half_mps2:.0} m/s², half of what the rig file's brake gives, at x = {:.3} m",
        track.motion.x_m[idx]
    );
    Some((idx, evidence))
}

fn peak_row(
    sensors: &Sensors<'_>,
    track: &Track,
    separation: Option<&Separation>,
    rest_s: f64,
    rig: &Rig,
    book: &mut Book,
) {
    const NAME: &str = "arrest_peak_g";
    let window = match (sensors.specific_force, separation) {
        (None, _) => Err(sensors.why_not(Role::ShuttleSpecificForce)),
        (_, None) => Err("no separation was found".to_owned()),
        (Some(signal), Some(separation)) => Window::new(signal, track, (separation.time_s, rest_s), rig),
    };
    match window.and_then(|window| Ok((window.filter(CLASS)?, window))) {
        Ok((filter, window)) => {
            let least = |values: &[f64]| values.iter().copied().fold(f64::INFINITY, f64::min);
            let effect = window.effect(Some(&filter), &least);
            let indicated = least(&window.filtered(Some(&filter))) - effect.excess;
            let value = (indicated - track.bias_mps2) / (1.0 + track.scale) / STANDARD_GRAVITY_MPS2;
            let budget = Budget::default()
                .with("scale of the accelerometer", value * track.u_scale)
                .with("bias of the accelerometer", track.u_bias_mps2 / STANDARD_GRAVITY_MPS2)
                .with("noise", effect.deviation.hypot(0.5 * effect.excess) / STANDARD_GRAVITY_MPS2)
                .with("bandwidth of the channel", effect.bandwidth / STANDARD_GRAVITY_MPS2);
            let method = format!(
                "specific force along the rail at the shuttle, least in the run-out; {}",
                label(&window, CLASS)
            );
            book.result(NAME, value, "g", budget, method);
        }
        Err(reason) => book.absent(NAME, reason),
    }
}
