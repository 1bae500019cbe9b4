//! Cords: their pull at the shuttle, the strain wave after release, the energy they hold.
//!
//! Let e be a cord's elongation, F(e) its tension, L its free length, m its mass, r its extension per metre of shuttle
//! travel, w = r v the speed at which its end comes in.
//!
//! - Until the first reflection returns, after 2 L / c(e₀) with c = √(F′ L / m), the end's strain is that of a simple wave:
//!   de/dt = −(1/c(e)) dw/dt (R. Courant, K. O. Friedrichs, *Supersonic Flow and Shock Waves*, 1948, section 37; for small
//!   changes it is F = F₀ − Z w, Z = √(F′ m / L)). The shuttle feels F(e) and no cord mass.
//! - After it the cord is taken as evenly strained: tension F(e) of its whole elongation, kinetic energy m w²/6 (J. W.
//!   Strutt, Lord Rayleigh, *The Theory of Sound*, section 156a).
//! - What the even picture does not carry of the wave's energy is a named term, as is what flies on with a cord at slack.

use super::curve::Curve;

/// Equal cords side by side. Force is that of the card's branch that the launch runs on.
#[derive(Debug, Clone, PartialEq)]
pub struct CordSet {
    pub count: f64,
    /// Between the named marks of the card.
    pub free_length_m: f64,
    /// Of one cord.
    pub mass_kg: f64,
    /// Cord extension per metre of shuttle travel.
    pub travel_ratio: f64,
    /// x at which the cords are just taut.
    pub zero_mark_x_m: f64,
    /// Tension of one cord, N, against elongation, on unloading; zero at zero.
    pub unloading: Curve,
    /// How the tension at the hold leaves the loading branch for the unloading one.
    pub hysteresis: Hysteresis,
}

/// Tension above the unloading branch at the hold: `gap_n · exp(−(e_hold − e) / width)`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Hysteresis {
    /// Of one cord; zero where the launch starts on the unloading branch.
    pub gap_n: f64,
    pub hold_elongation: f64,
    /// Elongation over which the gap closes by a factor e.
    pub width: f64,
}

impl Hysteresis {
    pub const NONE: Self = Self { gap_n: 0.0, hold_elongation: 0.0, width: 0.05 };

    #[inline]
    fn at(&self, elongation: f64) -> (f64, f64) {
        if self.gap_n == 0.0 {
            return (0.0, 0.0);
        }
        let extra = self.gap_n * ((elongation - self.hold_elongation) / self.width).exp();
        (extra, extra / self.width)
    }

    /// Integral from zero elongation.
    fn integral(&self, elongation: f64) -> f64 {
        if self.gap_n == 0.0 {
            return 0.0;
        }
        let at = |e: f64| ((e - self.hold_elongation) / self.width).exp();
        self.gap_n * self.width * (at(elongation) - at(0.0))
    }
}

/// Where a set of cords stands in the event.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum CordPhase {
    /// The strain wave has not come back yet.
    Wave {
        until_s: f64,
    },
    /// Evenly strained.
    Even,
    Slack,
}

impl CordSet {
    pub fn elongation(&self, x_m: f64) -> f64 {
        self.travel_ratio * (self.zero_mark_x_m - x_m) / self.free_length_m
    }

    pub fn x_at_elongation(&self, elongation: f64) -> f64 {
        self.zero_mark_x_m - elongation * self.free_length_m / self.travel_ratio
    }

    /// Pull of the whole set at the shuttle, N, at an elongation of its end.
    #[inline]
    pub fn pull_n(&self, elongation: f64) -> f64 {
        self.count * self.travel_ratio * (self.unloading.value(elongation) + self.hysteresis.at(elongation).0)
    }

    /// Tension of one cord and its slope against elongation.
    #[inline]
    fn tension_slope_n(&self, elongation: f64) -> (f64, f64) {
        let unloading = self.unloading.value_slope(elongation);
        let (extra, extra_slope) = self.hysteresis.at(elongation);
        (unloading.value + extra, unloading.slope + extra_slope)
    }

    /// Pull of the whole set and its wave's speed in metres of free length a second.
    #[inline]
    pub fn pull_and_wave_speed(&self, elongation: f64) -> (f64, f64) {
        let (tension_n, slope_n) = self.tension_slope_n(elongation);
        (self.count * self.travel_ratio * tension_n, self.wave_speed_mps(slope_n))
    }

    /// A card that is flat somewhere would stop the wave: the slope is kept above a thousandth of the secant's.
    #[inline]
    fn wave_speed_mps(&self, slope_n: f64) -> f64 {
        let floor_n = 1e-3 * self.unloading.value(self.unloading.last()) / self.unloading.last();
        (slope_n.max(floor_n) * self.free_length_m / self.mass_kg).sqrt()
    }

    /// Time for a strain wave to run from the shuttle to the anchor at an elongation.
    pub fn transit_s(&self, elongation: f64) -> f64 {
        let (_, slope_n) = self.tension_slope_n(elongation);
        self.free_length_m / self.wave_speed_mps(slope_n)
    }

    /// Energy that the whole set gives when it comes in evenly from an elongation to slack, J.
    pub fn stored_j(&self, elongation: f64) -> f64 {
        if elongation <= 0.0 {
            return 0.0;
        }
        let per_length = self.unloading.integral(elongation) - self.unloading.integral(0.0);
        self.count * self.free_length_m * (per_length + self.hysteresis.integral(elongation))
    }

    /// Mass that moves with the shuttle while the set is evenly strained.
    pub fn moving_mass_kg(&self) -> f64 {
        self.count * self.mass_kg * self.travel_ratio * self.travel_ratio / 3.0
    }
}

impl CordSet {
    /// End strain of a simple wave once the end has come in by a speed from `held`: ∫ c(e) de over the strains passed.
    pub fn strain_after_speed(&self, held: f64, speed_mps: f64) -> f64 {
        const N_PARTS: u32 = 200;
        let part = held / f64::from(N_PARTS);
        let mut gone_mps = 0.0;
        for i in 0..N_PARTS {
            let strain = held - f64::from(i) * part;
            let gain_mps = self.pull_and_wave_speed(strain - 0.5 * part).1 * part;
            if gone_mps + gain_mps >= speed_mps {
                return strain - part * (speed_mps - gone_mps) / gain_mps;
            }
            gone_mps += gain_mps;
        }
        0.0
    }
}
