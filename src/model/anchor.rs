//! Tension at a cord's anchor: the cord as a chain of masses whose end follows the computed course of the shuttle.
//!
//! What pulls the shuttle needs no chain (`cord.rs`). The anchor is the other end: it knows nothing of the release for a
//! transit of the strain wave, then feels it twofold, and again with every reflection. Newton's law for equal masses at
//! the middles of equal lengths, positions and speeds in turn (leap-frog; E. Hairer, C. Lubich, G. Wanner, *Geometric
//! Numerical Integration*, 2006, section I.1.4), with linear artificial viscosity that keeps steepening waves from ringing
//! (J. von Neumann, R. D. Richtmyer, J. Appl. Phys. 21 (1950) 232-237). A length that has come slack carries no force.

use super::cord::{Branch, CordSet};

const N_MASSES: usize = 40;
/// Step as a part of the time in which the fastest wave runs along one length; the half lengths at the ends bear 0.7.
const STEP_PART: f64 = 0.4;
/// Viscous share of the wave's impedance.
const VISCOSITY: f64 = 0.15;

/// Where the shuttle is: from release, on the rail.
#[derive(Debug, Clone, Copy)]
pub struct Place {
    pub t_s: f64,
    pub x_m: f64,
    pub v_mps: f64,
}

struct Chain<'a> {
    set: &'a CordSet,
    branch: Branch,
    places_m: [f64; N_MASSES],
    speeds_mps: [f64; N_MASSES],
}

/// Tension of the whole set at its anchor against time, from the hold until the cord has come slack there or the course
/// ends.
pub fn anchor_course(set: &CordSet, held: f64, course: &[Place]) -> Vec<(f64, f64)> {
    let branch = set.released(held);
    let (Some(end), Some(size_s)) = (course.last(), step_s(set, branch, held)) else { return Vec::new() };
    let mut chain = Chain { set, branch, places_m: [0.0; N_MASSES], speeds_mps: [0.0; N_MASSES] };
    for (i, place) in chain.places_m.iter_mut().enumerate() {
        *place = (i as f64 + 0.5) / N_MASSES as f64 * set.free_length_m * (1.0 + held);
    }
    let mut table = vec![(0.0, set.count * set.tension_slope_n(branch, held).0)];
    let (mut segment, mut t_s) = (0, 0.0);
    while t_s < end.t_s {
        while segment + 2 < course.len() && course[segment + 1].t_s < t_s {
            segment += 1;
        }
        let (x_m, v_mps) = between(&course[segment], course.get(segment + 1).unwrap_or(end), t_s);
        let end_m = set.free_length_m * (1.0 + set.elongation(x_m));
        chain.step(size_s, end_m, -set.travel_ratio * v_mps);
        t_s += size_s;
        let tension_n = set.count * chain.tension_n(0, chain.places_m[0], chain.speeds_mps[0]);
        table.push((t_s, tension_n));
        if tension_n == 0.0 && set.elongation(x_m) <= 0.0 {
            break;
        }
    }
    table
}

/// Step for the steepest part of the curve up to the hold.
fn step_s(set: &CordSet, branch: Branch, held: f64) -> Option<f64> {
    const N_LOOKED_AT: u32 = 100;
    let slopes = (0..=N_LOOKED_AT).map(|i| set.tension_slope_n(branch, held * f64::from(i) / f64::from(N_LOOKED_AT)).1);
    let steepest_n = slopes.fold(0.0, f64::max);
    let passes_s = (set.free_length_m * set.mass_kg / steepest_n).sqrt() / N_MASSES as f64;
    (passes_s.is_finite() && passes_s > 0.0).then_some(STEP_PART * passes_s)
}

/// Place and speed between two places of a course (cubic Hermite).
fn between(a: &Place, b: &Place, t_s: f64) -> (f64, f64) {
    let size_s = b.t_s - a.t_s;
    if size_s <= 0.0 {
        return (b.x_m, b.v_mps);
    }
    let p = (t_s - a.t_s) / size_s;
    let rise_m = b.x_m - a.x_m;
    let (bend_a, bend_b) = (size_s * a.v_mps - rise_m, rise_m - size_s * b.v_mps);
    let x_m = a.x_m + p * (rise_m + (1.0 - p) * (bend_a * (1.0 - p) + bend_b * p));
    (x_m, a.v_mps + p * (b.v_mps - a.v_mps))
}

impl Chain<'_> {
    /// Tension of one cord in length `i`, from the anchor, whose far end is at `far_m` and moves away at `rate_mps`.
    fn tension_n(&self, i: usize, stretched_m: f64, rate_mps: f64) -> f64 {
        let whole_m = self.set.free_length_m / N_MASSES as f64;
        let free_m = if i == 0 || i == N_MASSES { 0.5 * whole_m } else { whole_m };
        let elongation = stretched_m / free_m - 1.0;
        if elongation <= 0.0 {
            return 0.0;
        }
        let (tension_n, slope_n) = self.set.tension_slope_n(self.branch, elongation);
        let impedance = (slope_n.max(0.0) * self.set.mass_kg / self.set.free_length_m).sqrt();
        (tension_n + VISCOSITY * impedance * rate_mps).max(0.0)
    }

    /// Moves the masses on, with the shuttle's end of the cord at a place and speed.
    fn step(&mut self, size_s: f64, end_m: f64, end_mps: f64) {
        let mass_kg = self.set.mass_kg / N_MASSES as f64;
        let mut behind_n = self.tension_n(0, self.places_m[0], self.speeds_mps[0]);
        for i in 0..N_MASSES {
            let (next_m, next_mps) =
                if i + 1 < N_MASSES { (self.places_m[i + 1], self.speeds_mps[i + 1]) } else { (end_m, end_mps) };
            let ahead_n = self.tension_n(i + 1, next_m - self.places_m[i], next_mps - self.speeds_mps[i]);
            self.speeds_mps[i] += size_s / mass_kg * (ahead_n - behind_n);
            behind_n = ahead_n;
        }
        for (place_m, speed_mps) in self.places_m.iter_mut().zip(&self.speeds_mps) {
            *place_m += size_s * speed_mps;
        }
    }
}
