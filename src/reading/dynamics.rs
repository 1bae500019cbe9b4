//! What moves in the smoother: the shuttle by white jerk, the rail as a process that forgets.

use nalgebra::SMatrix;

use super::smoother::Transition;

pub(super) const N: usize = 8;
pub(super) const X: usize = 0;
pub(super) const V: usize = 1;
pub(super) const A: usize = 2;
pub(super) const BIAS: usize = 3;
pub(super) const SCALE: usize = 4;
pub(super) const ENCODER_SCALE: usize = 5;
pub(super) const RAIL_V: usize = 6;
pub(super) const RAIL_A: usize = 7;
/// Entries of the transition beside the identity.
pub(super) const LINKS: usize = 7;

/// How a rail may move: the rate at which its speed turns (about its angular frequency on its feet) and the standard
/// deviation of that speed.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct RailModel {
    pub rate_per_s: f64,
    pub speed_mps: f64,
}

impl RailModel {
    /// A rail on firm feet: its angular frequency, and the speed that is looked for in a first pass.
    pub(super) const ON_FEET: Self = Self { rate_per_s: 125.0, speed_mps: 0.1 };
}

/// What drives the states at a node.
#[derive(Debug, Clone, Copy)]
pub(super) struct Drive {
    pub jerk_density: f64,
    pub rail_mps: f64,
}

/// Rail: a process that forgets within 1/λ, with a steady derivative (Matérn 3/2; Hartikainen and Särkkä, "Kalman
/// filtering and smoothing solutions to temporal Gaussian process regression models", 2010).
pub(super) fn transition(dt_s: f64, rail_rate_per_s: f64) -> Transition<LINKS> {
    let turn = rail_rate_per_s * dt_s;
    let keep = (-turn).exp();
    Transition([
        (X, V, dt_s),
        (X, A, 0.5 * dt_s * dt_s),
        (V, A, dt_s),
        (RAIL_V, RAIL_V, keep * (1.0 + turn) - 1.0),
        (RAIL_V, RAIL_A, keep * dt_s),
        (RAIL_A, RAIL_V, -keep * rail_rate_per_s * turn),
        (RAIL_A, RAIL_A, keep * (1.0 - turn) - 1.0),
    ])
}

/// White jerk of a power density, integrated over a step (Bar-Shalom, Li and Kirubarajan, "Estimation with
/// Applications to Tracking and Navigation", 2001, eq. 6.2.3-8); the rail keeps its variance: Q = P∞ − F·P∞·Fᵀ.
pub(super) fn process(dt_s: f64, drive: &Drive, rail_rate_per_s: f64) -> SMatrix<f64, N, N> {
    let mut q = SMatrix::zeros();
    let (d, density) = (dt_s, drive.jerk_density);
    q[(X, X)] = density * d.powi(5) / 20.0;
    q[(X, V)] = density * d.powi(4) / 8.0;
    q[(X, A)] = density * d.powi(3) / 6.0;
    q[(V, V)] = density * d.powi(3) / 3.0;
    q[(V, A)] = density * d.powi(2) / 2.0;
    q[(A, A)] = density * d;
    q[(V, X)] = q[(X, V)];
    q[(A, X)] = q[(X, A)];
    q[(A, V)] = q[(V, A)];
    if drive.rail_mps > 0.0 {
        let turn = rail_rate_per_s * d;
        let keep = (-turn).exp();
        let (f11, f12) = (keep * (1.0 + turn), keep * d);
        let (f21, f22) = (-keep * rail_rate_per_s * turn, keep * (1.0 - turn));
        let square = drive.rail_mps * drive.rail_mps;
        let square_a = square * rail_rate_per_s * rail_rate_per_s;
        q[(RAIL_V, RAIL_V)] = (square - f11 * f11 * square - f12 * f12 * square_a).max(0.0);
        q[(RAIL_A, RAIL_A)] = (square_a - f21 * f21 * square - f22 * f22 * square_a).max(0.0);
        q[(RAIL_V, RAIL_A)] = -f11 * f21 * square - f12 * f22 * square_a;
        q[(RAIL_A, RAIL_V)] = q[(RAIL_V, RAIL_A)];
    }
    q
}
