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
//!
//! A card has a loading and an unloading branch. Extending, a cord follows the loading branch; coming in from elongation
//! e₁ it follows the unloading branch plus a gap that closes over `gap_width`: gap · exp(−(e₁ − e)/width). The difference
//! of work is the hysteresis loss.

use crate::estimation::Curve;

/// Equal cords side by side.
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
    /// x in the run-out from which the cords, carried past their anchor, extend again and pull back.
    pub retension_x_m: Option<f64>,
    /// Tension of one cord, N, against elongation, coming in; zero at zero.
    pub unloading: Curve,
    /// The same while extending; none where the card has one branch only.
    pub loading: Option<Curve>,
    /// Tension of one cord at the hold above the unloading branch, N.
    pub held_gap_n: f64,
    /// Elongation over which such a gap closes by a factor e.
    pub gap_width: f64,
}

/// The branch a cord is on.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Branch {
    Loading,
    /// Coming in from elongation `from`, where the tension was `gap_n` above the branch.
    Unloading {
        gap_n: f64,
        from: f64,
    },
}

/// Which way a cord is extended.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Side {
    /// Behind its zero mark: it pulls toward the exit.
    Drawn,
    /// Beyond its retension mark: it pulls back.
    Beyond,
}

/// Where a set of cords stands in the event.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum CordPhase {
    /// The strain wave has not come back yet.
    Wave {
        until_s: f64,
        branch: Branch,
    },
    /// Evenly strained.
    Even {
        branch: Branch,
        side: Side,
    },
    Slack,
}

impl Side {
    pub const fn sign(self) -> f64 {
        match self {
            Self::Drawn => 1.0,
            Self::Beyond => -1.0,
        }
    }
}

impl CordSet {
    /// One massless set on a single branch.
    pub fn simple(count: f64, free_length_m: f64, zero_mark_x_m: f64, tension_n: Curve) -> Self {
        Self {
            count,
            free_length_m,
            mass_kg: 0.0,
            travel_ratio: 1.0,
            zero_mark_x_m,
            retension_x_m: None,
            unloading: tension_n,
            loading: None,
            held_gap_n: 0.0,
            gap_width: 0.05,
        }
    }

    pub fn elongation(&self, x_m: f64) -> f64 {
        self.elongation_on(Side::Drawn, x_m)
    }

    #[inline(always)]
    pub fn elongation_on(&self, side: Side, x_m: f64) -> f64 {
        let extension_m = match side {
            Side::Drawn => self.zero_mark_x_m - x_m,
            Side::Beyond => x_m - self.retension_x_m.unwrap_or(f64::INFINITY),
        };
        self.travel_ratio * extension_m / self.free_length_m
    }

    pub fn x_at_elongation(&self, side: Side, elongation: f64) -> f64 {
        let travel_m = elongation * self.free_length_m / self.travel_ratio;
        match side {
            Side::Drawn => self.zero_mark_x_m - travel_m,
            Side::Beyond => self.retension_x_m.unwrap_or(f64::INFINITY) + travel_m,
        }
    }

    /// The branch on which the cords come in from the hold.
    pub fn released(&self, held: f64) -> Branch {
        Branch::Unloading { gap_n: self.held_gap_n, from: held }
    }

    /// The branch on which the cords come in from an elongation reached on the loading branch.
    pub fn turned(&self, at: f64) -> Branch {
        let gap_n = self.loading.as_ref().map_or(0.0, |loading| loading.value(at) - self.unloading.value(at));
        Branch::Unloading { gap_n, from: at }
    }

    /// Tension of one cord and its slope against elongation.
    #[inline(always)]
    pub fn tension_slope_n(&self, branch: Branch, elongation: f64) -> (f64, f64) {
        let curve = match branch {
            Branch::Loading => self.loading.as_ref().unwrap_or(&self.unloading),
            Branch::Unloading { .. } => &self.unloading,
        };
        let on_curve = curve.value_slope(elongation);
        match branch {
            Branch::Unloading { gap_n, from } if gap_n != 0.0 => {
                let extra_n = gap_n * ((elongation - from) / self.gap_width).exp();
                (on_curve.value + extra_n, on_curve.slope + extra_n / self.gap_width)
            }
            _ => (on_curve.value, on_curve.slope),
        }
    }

    /// Pull of the whole set at the shuttle, N.
    #[inline(always)]
    pub fn pull_n(&self, branch: Branch, elongation: f64) -> f64 {
        self.count * self.travel_ratio * self.tension_slope_n(branch, elongation).0
    }

    /// Pull of the whole set and its wave's speed in metres of free length a second.
    #[inline(always)]
    pub fn pull_and_wave_speed(&self, branch: Branch, elongation: f64) -> (f64, f64) {
        let (tension_n, slope_n) = self.tension_slope_n(branch, elongation);
        (self.count * self.travel_ratio * tension_n, self.wave_speed_mps(slope_n))
    }

    /// A card that is flat somewhere would stop the wave: the slope is kept above a thousandth of the secant's.
    #[inline(always)]
    fn wave_speed_mps(&self, slope_n: f64) -> f64 {
        let floor_n = 1e-3 * self.unloading.last_value() / self.unloading.last();
        (slope_n.max(floor_n) * self.free_length_m / self.mass_kg).sqrt()
    }

    /// Time for a strain wave to run from the shuttle to the anchor at the hold.
    pub fn transit_s(&self, held: f64) -> f64 {
        let (_, slope_n) = self.tension_slope_n(self.released(held), held);
        self.free_length_m / self.wave_speed_mps(slope_n)
    }

    /// Work of the whole set between slack and an elongation along a branch, J: on the unloading branch what it gives back.
    pub fn work_j(&self, branch: Branch, elongation: f64) -> f64 {
        if elongation <= 0.0 {
            return 0.0;
        }
        let along = |curve: &Curve| curve.integral(elongation) - curve.integral(0.0);
        let per_length = match branch {
            Branch::Loading => along(self.loading.as_ref().unwrap_or(&self.unloading)),
            Branch::Unloading { gap_n, from } => {
                let gap = |e: f64| ((e - from) / self.gap_width).exp();
                along(&self.unloading) + gap_n * self.gap_width * (gap(elongation) - gap(0.0))
            }
        };
        self.count * self.free_length_m * per_length
    }

    /// Energy that the whole set gives back from the hold, J.
    pub fn stored_j(&self, held: f64) -> f64 {
        self.work_j(self.released(held), held)
    }

    /// Mass that moves with the shuttle while the set is evenly strained.
    pub fn moving_mass_kg(&self) -> f64 {
        self.count * self.mass_kg * self.travel_ratio * self.travel_ratio / 3.0
    }

    /// Multiplies every tension.
    pub fn scale(&mut self, factor: f64) {
        self.unloading.scale(factor);
        self.loading.iter_mut().for_each(|loading| loading.scale(factor));
        self.held_gap_n *= factor;
    }

    /// Multiplies the tension at each elongation by a factor of its own.
    pub fn reshape(&mut self, factor: impl Fn(f64) -> f64) {
        self.unloading = self.unloading.reshaped(&factor);
        self.loading = self.loading.as_ref().map(|loading| loading.reshaped(&factor));
    }
}
