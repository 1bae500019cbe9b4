//! One kind of cord: a chain of masses joined by springs that follow the rubber law with hysteresis and relaxation.
//!
//! The chain has `n_masses` equal masses at the centres of equal lengths of cord, so that the two end springs are half
//! as long as the others and no cord mass is lumped onto the shuttle: at release the shuttle feels exactly the cords' force.
//! Tension of a spring: `T = max(0, f(λ)(1 − h s) − Σ g_i r_i + η λ̇)`, where
//! - `f` is the elastic law; hysteresis `s` runs from 0 (loading) to 1 (unloading) over the stretch `turn_stretch` after a
//!   reversal, `ds/dt = |λ̇|/turn_stretch · (target − s)` (own form; a rate-independent loss of about `h` of the energy);
//! - `r_i' = (f(λ) − r_i)/τ_i` gives Fung's quasi-linear viscoelasticity `T = f − Σ g_i ∫ (1 − e^{−(t−u)/τ_i}) df(u)`
//!   (Y. C. Fung, "Biomechanics", quasi-linear viscoelasticity; Prony series);
//! - `η` is Kelvin-Voigt damping per unit rate of stretch.

use super::rubber::ForceLaw;

/// Number of Prony terms.
pub const N_RELAXATION: usize = 2;

/// A kind of cord. Forces are of one cord.
#[derive(Debug, Clone)]
pub struct CordKind {
    pub free_length_m: f64,
    pub mass_kg: f64,
    pub law: ForceLaw,
    /// Relative force lost on unloading.
    pub hysteresis: f64,
    /// Stretch after a reversal over which the force moves to the other branch.
    pub turn_stretch: f64,
    /// Relative weight and time constant in s of each Prony term.
    pub relaxation: [(f64, f64); N_RELAXATION],
    /// N per (unit stretch per second).
    pub damping_n_s: f64,
    pub n_masses: usize,
}

/// What a spring, or a whole evenly stretched cord, remembers of its past.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Memory {
    /// 0 on the loading branch, 1 on the unloading branch.
    pub unloading: f64,
    /// Delayed elastic force of each Prony term, N.
    pub delayed_n: [f64; N_RELAXATION],
}

impl CordKind {
    /// Tension of one cord in N at `stretch`, changing at `stretch_rate_per_s`, with `memory` of its past.
    pub fn tension_n(&self, stretch: f64, stretch_rate_per_s: f64, memory: &Memory) -> f64 {
        self.tension_and_elastic_n(stretch, stretch_rate_per_s, memory).0
    }

    /// Tension and elastic force of one cord, N.
    pub fn tension_and_elastic_n(&self, stretch: f64, stretch_rate_per_s: f64, memory: &Memory) -> (f64, f64) {
        if stretch <= 1.0 {
            return (0.0, 0.0);
        }
        let elastic_n = self.law.force_n(stretch);
        let relaxed_n: f64 =
            self.relaxation.iter().zip(&memory.delayed_n).map(|(&(weight, _), delayed_n)| weight * delayed_n).sum();
        let tension_n =
            elastic_n * (1.0 - self.hysteresis * memory.unloading) - relaxed_n + self.damping_n_s * stretch_rate_per_s;
        (tension_n.max(0.0), elastic_n)
    }

    /// Time derivative of the memory.
    pub fn memory_rate(&self, elastic_n: f64, stretch_rate_per_s: f64, memory: &Memory) -> Memory {
        let target = if stretch_rate_per_s < 0.0 { 1.0 } else { 0.0 };
        let unloading = stretch_rate_per_s.abs() / self.turn_stretch * (target - memory.unloading);
        let mut delayed_n = [0.0; N_RELAXATION];
        for (idx, &(_, tau_s)) in self.relaxation.iter().enumerate() {
            delayed_n[idx] = (elastic_n - memory.delayed_n[idx]) / tau_s;
        }
        Memory { unloading, delayed_n }
    }

    /// Moves the memory of an evenly stretched cord on by `dt_s` while its stretch goes to `stretch` (exact in time for
    /// a force held constant over the step, exact in stretch for the branch).
    pub fn remember(&self, memory: &mut Memory, stretch_before: f64, stretch: f64, dt_s: f64) {
        let change = stretch.max(1.0) - stretch_before.max(1.0);
        let target = if change < 0.0 { 1.0 } else { 0.0 };
        memory.unloading = target + (memory.unloading - target) * (-change.abs() / self.turn_stretch).exp();
        let elastic_n = 0.5 * (self.law.force_n(stretch_before) + self.law.force_n(stretch));
        for (delayed_n, &(_, tau_s)) in memory.delayed_n.iter_mut().zip(&self.relaxation) {
            *delayed_n = elastic_n + (*delayed_n - elastic_n) * (-dt_s / tau_s).exp();
        }
    }

    /// Free length of spring `idx` of `n_masses + 1`, counted from the shuttle. A chain of no masses is one spring.
    pub fn spring_length_m(&self, idx: usize) -> f64 {
        if self.n_masses == 0 {
            return self.free_length_m;
        }
        let full_m = self.free_length_m / self.n_masses as f64;
        if idx == 0 || idx == self.n_masses { 0.5 * full_m } else { full_m }
    }
}

/// Equal cords, integrated once and counted `count` times.
#[derive(Debug, Clone)]
pub struct CordGroup {
    pub count: f64,
    pub kind: CordKind,
}
