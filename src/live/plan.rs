//! What the rig file expects: tension against draw, with its band, and the energy that a tension stands for.
//!
//! Force of one cord at elongation ε is the rig file's curve, straight between its points and continued beyond the
//! last. At draw d: ε = d·r / L₀, force on the shuttle F = n·r·T(ε), stored energy E = n·L₀·∫₀^ε T dε (work of a force
//! over its path), with r the travel ratio, L₀ the free length, n the number of cords. The line that holds the shuttle
//! carries F less the weight's part along the rail, m g sin θ, and friction up to ± its bound: statics.

use crate::rig::{CordPoint, Cords, Rig};

/// Standard gravity, m/s² (3rd General Conference on Weights and Measures, 1901).
pub const STANDARD_GRAVITY_MPS2: f64 = 9.806_65;
const N_BAND_STEPS: u32 = 40;
/// How far past the planned draw the band is told.
const BAND_OVERREACH: f64 = 1.1;

/// Tension expected at the release line at one draw.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Expected {
    pub draw_m: f64,
    pub low_n: f64,
    pub planned_n: f64,
    pub high_n: f64,
}

/// The rig file's expectation of tension and energy.
#[derive(Debug, Clone)]
pub struct Plan {
    cords: Cords,
    weight_along_rail_n: f64,
    friction_n: f64,
    band_relative: f64,
    draw_m: f64,
}

impl Plan {
    pub fn new(rig: &Rig) -> Self {
        Self {
            cords: rig.cords.clone(),
            weight_along_rail_n: rig.moving_mass_kg() * STANDARD_GRAVITY_MPS2 * rig.rail.incline_rad.sin(),
            friction_n: rig.losses.friction_n.value.abs(),
            band_relative: rig.plan.tension_band_relative,
            draw_m: rig.plan.draw_m,
        }
    }

    /// The line's expected tension at `draw_m`; never below zero, because a line does not push.
    pub fn expected(&self, draw_m: f64) -> Expected {
        let force_n = self.pull_n(draw_m);
        let at = |share: f64, friction_n: f64| (share * force_n - self.weight_along_rail_n + friction_n).max(0.0);
        Expected {
            draw_m,
            low_n: at(1.0 - self.band_relative, -self.friction_n),
            planned_n: at(1.0, 0.0),
            high_n: at(1.0 + self.band_relative, self.friction_n),
        }
    }

    /// The whole band from zero draw to a little past the planned draw.
    pub fn band(&self) -> Vec<Expected> {
        let step_m = self.draw_m * BAND_OVERREACH / f64::from(N_BAND_STEPS);
        (0..=N_BAND_STEPS).map(|step| self.expected(f64::from(step) * step_m)).collect()
    }

    /// Energy that the cords can give back, J, when they pull the shuttle with `tension_n`: from the elongation that
    /// the curve gives for that tension or, where the draw is known, from the curve's energy at that draw scaled by
    /// measured over expected force. The greater counts, so a wrong encoder zero never makes loaded cords look harmless.
    pub fn energy_j(&self, tension_n: f64, draw_m: Option<f64>) -> f64 {
        let by_tension_j = self.energy_at_j(self.elongation_for(tension_n));
        let by_draw_j = draw_m.map_or(0.0, |draw_m| {
            let force_n = self.pull_n(draw_m);
            if force_n > 0.0 { self.energy_at_j(self.elongation(draw_m)) * tension_n / force_n } else { 0.0 }
        });
        by_tension_j.max(by_draw_j).max(0.0)
    }

    fn elongation(&self, draw_m: f64) -> f64 {
        (draw_m * self.cords.travel_ratio / self.cords.free_length_m).max(0.0)
    }

    /// Force of all cords on the shuttle at `draw_m`, N.
    pub fn pull_n(&self, draw_m: f64) -> f64 {
        let one_n = tension_at(&self.cords.curve, self.elongation(draw_m));
        f64::from(self.cords.count) * self.cords.travel_ratio * one_n
    }

    fn elongation_for(&self, tension_n: f64) -> f64 {
        let one_n = tension_n / (f64::from(self.cords.count) * self.cords.travel_ratio);
        segments(&self.cords.curve)
            .find(|(_, to, last)| one_n <= to.tension_n || *last)
            .map_or(0.0, |(from, to, _)| {
                let rise_n = to.tension_n - from.tension_n;
                let run = to.elongation - from.elongation;
                if rise_n > 0.0 { from.elongation + run * (one_n - from.tension_n) / rise_n } else { to.elongation }
            })
            .max(0.0)
    }

    fn energy_at_j(&self, elongation: f64) -> f64 {
        let mut area_n = 0.0;
        for (from, to, last) in segments(&self.cords.curve) {
            let end = if last { elongation } else { elongation.min(to.elongation) };
            if end <= from.elongation {
                break;
            }
            let end_n = on_segment(from, to, end);
            area_n += 0.5 * (from.tension_n + end_n) * (end - from.elongation);
        }
        f64::from(self.cords.count) * self.cords.free_length_m * area_n
    }
}

/// Pairs of neighbouring points; the flag marks the last, which is continued.
fn segments(curve: &[CordPoint]) -> impl Iterator<Item = (&CordPoint, &CordPoint, bool)> {
    let last = curve.len().saturating_sub(2);
    curve.windows(2).enumerate().map(move |(idx, pair)| (&pair[0], &pair[1], idx == last))
}

fn on_segment(from: &CordPoint, to: &CordPoint, elongation: f64) -> f64 {
    let share = (elongation - from.elongation) / (to.elongation - from.elongation);
    from.tension_n + share * (to.tension_n - from.tension_n)
}

fn tension_at(curve: &[CordPoint], elongation: f64) -> f64 {
    segments(curve)
        .find(|(_, to, last)| elongation <= to.elongation || *last)
        .map_or(0.0, |(from, to, _)| on_segment(from, to, elongation).max(0.0))
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::live::testing::north_pier;

    #[track_caller]
    fn assert_close(found: f64, expected: f64, relative: f64) {
        assert!((found - expected).abs() <= relative * expected.abs(), "found {found}, expected {expected}");
    }

    /// Closed form: cords that obey Hooke's law with stiffness k store k·d²/2 at draw d.
    #[test]
    fn linear_cords_store_half_stiffness_times_draw_squared() {
        let mut rig = north_pier();
        let stiffness_n_per_m = 175.0;
        let free_length_m = rig.cords.free_length_m;
        let per_elongation_n = stiffness_n_per_m * free_length_m / f64::from(rig.cords.count);
        rig.cords.curve = [0.0, 0.5, 2.0]
            .map(|elongation| CordPoint { elongation, tension_n: per_elongation_n * elongation })
            .to_vec();
        let plan = Plan::new(&rig);
        for draw_m in [0.5, 1.0, 4.0, 6.0] {
            let force_n = stiffness_n_per_m * draw_m;
            let energy_j = 0.5 * stiffness_n_per_m * draw_m * draw_m;
            assert_close(plan.energy_j(force_n, None), energy_j, 1e-12);
            assert_close(plan.energy_j(force_n, Some(draw_m)), energy_j, 1e-12);
        }
    }

    /// Inclined plane: the line carries the cords' pull less m g sin θ.
    #[test]
    fn the_band_holds_the_planned_tension_less_the_weight_along_the_rail() {
        let rig = north_pier();
        let plan = Plan::new(&rig);
        let at_plan = plan.expected(rig.plan.draw_m);
        let pull_n =
            f64::from(rig.cords.count) * tension_at(&rig.cords.curve, rig.plan.draw_m / rig.cords.free_length_m);
        assert_close(at_plan.planned_n, pull_n - 8.6 * 9.80665 * rig.rail.incline_rad.sin(), 1e-9);
        assert!(at_plan.low_n < at_plan.planned_n && at_plan.planned_n < at_plan.high_n);
        let band = plan.band();
        assert!(band.windows(2).all(|pair| pair[0].draw_m < pair[1].draw_m && pair[0].high_n <= pair[1].high_n));
        assert!(band.last().is_some_and(|last| last.draw_m > rig.plan.draw_m));
    }

    #[test]
    fn energy_is_the_greater_of_what_tension_and_draw_say() {
        let plan = Plan::new(&north_pier());
        let full_j = plan.energy_j(700.0, Some(4.0));
        assert!(full_j > 1_000.0 && full_j < 0.5 * 700.0 * 4.0 * 1.5, "{full_j}");
        assert!(plan.energy_j(700.0, Some(0.01)) >= plan.energy_j(700.0, None), "a wrong zero hides nothing");
        assert!(plan.energy_j(600.0, Some(4.0)) < full_j);
        assert_eq!(plan.energy_j(-3.0, Some(-1.0)), 0.0);
    }
}
