//! What a crew would see on a cord bench: one cord drawn evenly, held, and let back, without its own inertia.

use super::cord::{CordKind, Memory};

/// One elongation of the bench test; tensions of one cord in N.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct BenchPoint {
    pub elongation: f64,
    pub loading_n: f64,
    pub unloading_n: f64,
}

/// How long each part of the bench test takes.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct BenchPace {
    pub draw_s: f64,
    pub hold_s: f64,
    pub return_s: f64,
}

const N_STEPS_A_POINT: usize = 40;

/// Draws `kind` to `elongation_max` and back, and reads it `n_points` times each way (both ends included).
pub fn cord_on_bench(kind: &CordKind, elongation_max: f64, n_points: usize, pace: BenchPace) -> Vec<BenchPoint> {
    let mut memory = Memory::default();
    let n_steps = (n_points - 1) * N_STEPS_A_POINT;
    let stretch = |step: usize| 1.0 + elongation_max * step as f64 / n_steps as f64;
    let mut points = vec![BenchPoint { elongation: 0.0, loading_n: 0.0, unloading_n: 0.0 }; n_points];
    for step in 1..=n_steps {
        kind.remember(&mut memory, stretch(step - 1), stretch(step), pace.draw_s / n_steps as f64);
        if step % N_STEPS_A_POINT == 0 {
            let point = &mut points[step / N_STEPS_A_POINT];
            point.elongation = stretch(step) - 1.0;
            point.loading_n = kind.tension_n(stretch(step), 0.0, &memory);
        }
    }
    kind.remember(&mut memory, stretch(n_steps), stretch(n_steps), pace.hold_s);
    points[n_points - 1].unloading_n = kind.tension_n(stretch(n_steps), 0.0, &memory);
    for step in (0..n_steps).rev() {
        kind.remember(&mut memory, stretch(step + 1), stretch(step), pace.return_s / n_steps as f64);
        if step % N_STEPS_A_POINT == 0 {
            points[step / N_STEPS_A_POINT].unloading_n = kind.tension_n(stretch(step), 0.0, &memory);
        }
    }
    points
}
