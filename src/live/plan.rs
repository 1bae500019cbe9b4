//! What the rig file expects: tension against draw, with its band, and the energy that a tension stands for.
//!
//! The cords' pull F(d) at draw d is the launch model's. The line that holds the shuttle carries F less the weight's part
//! along the rail, m g sin θ, and friction either way (statics); while winching back friction adds to it. Stored energy is
//! the pull's work over the draw, E(d) = ∫₀^d F ds.
//!
//! While the cords are drawn they pull along their loading branch, and back along the unloading one as soon as the shuttle
//! gives way: the band reaches from the one to the other, and beyond both by its share of the planned pull at full draw.

use crate::model::{LaunchSetup, ModelError, planned_line_tension_n};
use crate::rig::Rig;

const N_STEPS_TO_PLAN: usize = 100;
/// How far past the planned draw the pull is known and the band is told, as shares of the plan.
const KNOWN_SHARE: f64 = 1.5;
const BAND_SHARE: f64 = 1.1;
/// The band is told at every so many steps.
const BAND_STRIDE: usize = 2;

/// Tension expected at the release line at one draw.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Expected {
    pub draw_m: f64,
    pub low_n: f64,
    /// While winching back.
    pub planned_n: f64,
    pub high_n: f64,
}

/// The line while it is drawn back, at one draw.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Drawing {
    /// Of all cords, along the loading branch.
    pub pull_n: f64,
    /// Friction less weight: what the line carries beside the pull.
    pub offset_n: f64,
}

/// The rig file's expectation of tension and energy.
#[derive(Debug, Clone)]
pub struct Plan {
    /// Pull and stored energy at every step of draw, from zero on; continued straight beyond.
    table: Vec<(f64, f64)>,
    /// How far the line's tension is above pull less weight at every step while it is drawn: loading branch and friction.
    drawing_n: Vec<f64>,
    step_m: f64,
    n_band_steps: usize,
    weight_along_rail_n: f64,
    friction_n: f64,
    band_n: f64,
}

impl Plan {
    /// Tabulates the plan.
    ///
    /// # Errors
    /// When the model cannot take the rig file's cords to the planned draw.
    pub fn new(rig: &Rig) -> Result<Self, ModelError> {
        let setup = LaunchSetup::planned(rig)?;
        let step_m = rig.plan.draw_m / N_STEPS_TO_PLAN as f64;
        let pull_n = |step: usize| setup.cord_pull_n(rig.rail.zero_mark_x_m - step as f64 * step_m);
        let mut table = vec![(pull_n(0), 0.0)];
        for step in 1..=(KNOWN_SHARE * N_STEPS_TO_PLAN as f64) as usize {
            let (before_n, energy_j) = table[step - 1];
            let now_n = pull_n(step);
            table.push((now_n, energy_j + 0.5 * (before_n + now_n) * step_m));
        }
        Ok(Self {
            drawing_n: drawing_n(rig, &setup, step_m, &table),
            table,
            step_m,
            n_band_steps: (BAND_SHARE * N_STEPS_TO_PLAN as f64) as usize,
            weight_along_rail_n: setup.hold_weight_n(),
            friction_n: setup.losses.friction_n,
            band_n: rig.plan.tension_band_relative * pull_n(N_STEPS_TO_PLAN),
        })
    }

    /// The line's expected tension at `draw_m`; never below zero, because a line does not push.
    pub fn expected(&self, draw_m: f64) -> Expected {
        let (step, share) = self.place(draw_m);
        let share = share.min(1.0);
        let drawing_n = self.drawing_n[step] + share * (self.drawing_n[step + 1] - self.drawing_n[step]);
        let level_n = self.pull_n(draw_m) - self.weight_along_rail_n;
        Expected {
            draw_m,
            low_n: (level_n - self.friction_n - self.band_n).max(0.0),
            planned_n: (level_n + drawing_n).max(0.0),
            high_n: (level_n + drawing_n + self.band_n).max(0.0),
        }
    }

    /// What the line is made of while it is drawn back: the cords' pull along their loading branch, and what friction and
    /// weight add to it.
    pub fn drawing(&self, draw_m: f64) -> Drawing {
        let expected = self.expected(draw_m);
        let offset_n = self.friction_n - self.weight_along_rail_n;
        Drawing { pull_n: (expected.planned_n - offset_n).max(0.0), offset_n }
    }

    /// The draw at which the line should first show `tension_n`; none where it never does.
    pub fn taut_draw_m(&self, tension_n: f64) -> Option<f64> {
        let last = self.table.len() - 1;
        let step = (0..=last).find(|step| self.expected(*step as f64 * self.step_m).planned_n >= tension_n)?;
        if step == 0 {
            return Some(0.0);
        }
        let (from_m, to_m) = ((step - 1) as f64 * self.step_m, step as f64 * self.step_m);
        let (from_n, to_n) = (self.expected(from_m).planned_n, self.expected(to_m).planned_n);
        Some(from_m + (tension_n - from_n) / (to_n - from_n) * (to_m - from_m))
    }

    /// The whole band from zero draw to a little past the planned draw.
    pub fn band(&self) -> Vec<Expected> {
        (0..=self.n_band_steps).step_by(BAND_STRIDE).map(|step| self.expected(step as f64 * self.step_m)).collect()
    }

    /// Energy that the cords can give back, J, when they pull the shuttle with `tension_n`: that of the draw at which
    /// they should pull so or, where the draw is known, that of the draw scaled by measured over expected force. The
    /// greater counts, so a wrong encoder zero never makes loaded cords look harmless.
    pub fn energy_j(&self, tension_n: f64, draw_m: Option<f64>) -> f64 {
        let by_tension_j = self.energy_at_j(self.draw_for_m(tension_n));
        let by_draw_j = draw_m.map_or(0.0, |draw_m| {
            let pull_n = self.pull_n(draw_m);
            if pull_n > 0.0 { self.energy_at_j(draw_m) * tension_n / pull_n } else { 0.0 }
        });
        by_tension_j.max(by_draw_j).max(0.0)
    }

    /// Pull of all cords on the shuttle at `draw_m`, N.
    pub fn pull_n(&self, draw_m: f64) -> f64 {
        let (step, share) = self.place(draw_m);
        let (from_n, to_n) = (self.table[step].0, self.table[step + 1].0);
        (from_n + share * (to_n - from_n)).max(0.0)
    }

    fn energy_at_j(&self, draw_m: f64) -> f64 {
        let (step, share) = self.place(draw_m);
        let from_n = self.table[step].0;
        self.table[step].1 + 0.5 * (from_n + self.pull_n(draw_m)) * share * self.step_m
    }

    fn draw_for_m(&self, tension_n: f64) -> f64 {
        let last = self.table.len() - 1;
        let step = self.table.partition_point(|(pull_n, _)| *pull_n < tension_n).clamp(1, last) - 1;
        let (from_n, to_n) = (self.table[step].0, self.table[step + 1].0);
        let share = if to_n > from_n { (tension_n - from_n) / (to_n - from_n) } else { 0.0 };
        ((step as f64 + share) * self.step_m).max(0.0)
    }

    /// The step below a draw, and how far it is to the next; the last step goes on for ever.
    fn place(&self, draw_m: f64) -> (usize, f64) {
        let at = (draw_m / self.step_m).max(0.0);
        let step = (at.floor() as usize).min(self.table.len() - 2);
        (step, at - step as f64)
    }
}

/// Beyond what the cords' curve tells, the line stays as far above the pull as at the last draw it tells of.
fn drawing_n(rig: &Rig, setup: &LaunchSetup, step_m: f64, table: &[(f64, f64)]) -> Vec<f64> {
    let mut above_n = setup.losses.friction_n;
    let at = |(step, (pull_n, _)): (usize, &(f64, f64))| {
        if let Ok(tension_n) = planned_line_tension_n(rig, step as f64 * step_m) {
            above_n = tension_n - (pull_n - setup.hold_weight_n());
        }
        above_n
    };
    table.iter().enumerate().map(at).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::live::testing::north_pier;
    use crate::rig::CordPoint;

    #[track_caller]
    fn assert_close(found: f64, expected: f64, relative: f64) {
        assert!((found - expected).abs() <= relative * expected.abs(), "found {found}, expected {expected}");
    }

    /// Closed form: cords that obey Hooke's law with stiffness k store k·d²/2 at draw d.
    #[test]
    fn linear_cords_store_half_stiffness_times_draw_squared() {
        let mut rig = north_pier();
        let stiffness_n_per_m = 175.0;
        let per_elongation_n = stiffness_n_per_m * rig.cords.free_length_m / f64::from(rig.cords.count);
        let point = |elongation| CordPoint { elongation, tension_n: per_elongation_n * elongation };
        rig.cords.curve = [0.0, 0.5, 2.0].map(point).to_vec();
        let plan = Plan::new(&rig).unwrap();
        for draw_m in [0.5, 1.0, 4.0, 6.0, 7.5] {
            let force_n = stiffness_n_per_m * draw_m;
            let energy_j = 0.5 * stiffness_n_per_m * draw_m * draw_m;
            assert_close(plan.energy_j(force_n, None), energy_j, 1e-9);
            assert_close(plan.energy_j(force_n, Some(draw_m)), energy_j, 1e-9);
        }
    }

    #[test]
    fn the_band_lies_around_what_the_model_plans_and_grows_with_draw() {
        let rig = north_pier();
        let plan = Plan::new(&rig).unwrap();
        for draw_m in [0.4, 2.0, 4.0] {
            let expected = plan.expected(draw_m);
            assert_close(expected.planned_n, planned_line_tension_n(&rig, draw_m).unwrap(), 1e-3);
            assert!(expected.low_n < expected.planned_n && expected.planned_n < expected.high_n);
        }
        let band = plan.band();
        assert!(band.windows(2).all(|pair| pair[0].draw_m < pair[1].draw_m && pair[0].high_n <= pair[1].high_n));
        assert!(band.last().is_some_and(|last| last.draw_m > rig.plan.draw_m));
    }

    #[test]
    fn energy_is_the_greater_of_what_tension_and_draw_say() {
        let plan = Plan::new(&north_pier()).unwrap();
        let full_j = plan.energy_j(700.0, Some(4.0));
        // Between a straight spring's and a constant force's energy: the curve is stiff at first.
        assert!(full_j > 0.5 * 700.0 * 4.0 && full_j < 700.0 * 4.0, "{full_j}");
        assert!(plan.energy_j(700.0, Some(0.01)) >= plan.energy_j(700.0, None), "a wrong zero hides nothing");
        assert!(plan.energy_j(600.0, Some(4.0)) < full_j);
        assert_eq!(plan.energy_j(-3.0, Some(-1.0)), 0.0);
    }
}
