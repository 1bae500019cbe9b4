//! Channel frequency class filter: two passes (forward, backward) of a two-pole Butterworth low pass.
//!
//! Source: SAE J211-1 / ISO 6487, filter algorithm: `ω_d = 2π·2.0775·CFC`, `ω_a = tan(ω_d T/2)`; written here a second
//! time, apart from Tautrail's own.

use std::f64::consts::{PI, SQRT_2};

/// Runs both passes; each starts from rest at its first value.
pub fn filtered(values: &[f64], class: f64, rate_hz: f64) -> Vec<f64> {
    let mut once = pass(values.iter().copied(), class, rate_hz);
    once.reverse();
    let mut twice = pass(once.into_iter(), class, rate_hz);
    twice.reverse();
    twice
}

fn pass(values: impl Iterator<Item = f64>, class: f64, rate_hz: f64) -> Vec<f64> {
    let wa = (PI * 2.0775 * class / rate_hz).tan();
    let norm = 1.0 + SQRT_2 * wa + wa * wa;
    let (a0, b1, b2) = (wa * wa / norm, -2.0 * (wa * wa - 1.0) / norm, (-1.0 + SQRT_2 * wa - wa * wa) / norm);
    let mut past: Option<[f64; 4]> = None;
    values
        .map(|x| {
            let [x1, x2, y1, y2] = past.unwrap_or([x; 4]);
            let y = a0 * (x + 2.0 * x1 + x2) + b1 * y1 + b2 * y2;
            past = Some([x, x1, y, y1]);
            y
        })
        .collect()
}
