//! The misrigging watch: how many cords the rising tension fits, and where the cords came taut.
//!
//! While the winch draws back, the release line carries `s·Q(d) + f − W`: Q the planned pull along the loading branch, f
//! friction, W the weight's part along the rail, and s the share of the planned pull that is really there. Least squares
//! over the draw finds s together with what f − W differs from the rig file's, which is known to a few newtons only and
//! enters as a prior. `s` times the count is the count that the tension fits. A shift of the draw at which the first
//! tension comes shows a free length or a zero mark that is not the rig file's.

use crate::rig::Rig;

use super::plan::Plan;
use super::state::CordsFit;

/// One point is taken at every so much draw.
const EVERY_M: f64 = 0.01;
/// The stretch where the cords come taut is not used: there the draw's zero decides.
const FROM_DRAW_M: f64 = 0.3;
/// Points before the fit is believed.
const N_LEAST: u32 = 20;
/// Standard uncertainty of friction against the rig file's, as a share of it, and at least so much.
const FRICTION_SHARE: f64 = 0.5;
const FRICTION_LEAST_N: f64 = 3.0;
/// Standard uncertainty of the loading branch over its whole length where the card gives one branch's only: as much as
/// the card's own once more.
const BRANCH_FACTOR: f64 = std::f64::consts::SQRT_2;
/// Coverage factor of the interval shown (95 %, normal).
const COVERAGE: f64 = 1.96;
/// How far the cords may come taut from where the plan says.
const TAUT_LEAST_M: f64 = 0.1;
const TAUT_SHARE_OF_DRAW: f64 = 0.03;

/// Sums of the least squares so far; starts anew with every winch-back from slack.
#[derive(Debug, Clone, Copy, Default)]
pub struct CordFit {
    n: u32,
    sum_q: f64,
    sum_qq: f64,
    sum_y: f64,
    sum_qy: f64,
    furthest_draw_m: f64,
    /// The draw at which the line first showed that the cords are taut, and the draw at which the plan has its tension.
    taut_m: Option<(f64, f64)>,
}

/// What the watch holds against the rig file.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Misrigged {
    /// Another number of cords than the rig file's, or cords of another kind.
    Count(CordsFit),
    /// The cords were taut at another draw than the plan has for the same tension: (seen, planned).
    Taut(f64, f64),
}

impl CordFit {
    /// Takes the line's level at a draw that grows.
    pub fn take(&mut self, rig: &Rig, plan: &Plan, line_n: f64, draw_m: f64) {
        if self.taut_m.is_none() && line_n >= taut_n(rig) {
            self.taut_m = plan.taut_draw_m(line_n).map(|planned_m| (draw_m, planned_m));
        }
        if draw_m < FROM_DRAW_M.max(self.furthest_draw_m + EVERY_M) {
            return;
        }
        self.furthest_draw_m = draw_m;
        let planned = plan.drawing(draw_m);
        let (q, y) = (planned.pull_n, line_n - planned.offset_n);
        self.n += 1;
        self.sum_q += q;
        self.sum_qq += q * q;
        self.sum_y += y;
        self.sum_qy += q * y;
    }

    /// How many cords the tension fits; none before there is enough of it, or where the pull is not from equal cords alone.
    pub fn fit(&self, rig: &Rig) -> Option<CordsFit> {
        let details = &rig.details;
        let equal_cords = details.more_cords.is_empty() && details.gas.is_empty() && details.force_tables.is_empty();
        if self.n < N_LEAST || !equal_cords {
            return None;
        }
        // Unknowns: share s, and offset b with the prior 0 ± u_b. Points close together are not independent of what the
        // card is wrong by: they count as one group, whose scatter is the card's.
        let n = f64::from(self.n);
        let friction_n = rig.losses.friction_n;
        let u_b = friction_n.standard_uncertainty.max(FRICTION_SHARE * friction_n.value).max(FRICTION_LEAST_N);
        let relative = rig.cords.force_relative_uncertainty * BRANCH_FACTOR;
        let scatter_n = (relative * self.sum_q / n).max(1.0);
        let prior = scatter_n * scatter_n / (u_b * u_b);
        let (a, b, c) = (self.sum_qq / n, self.sum_q / n, 1.0 + prior);
        let determinant = a * c - b * b;
        if determinant <= 0.0 {
            return None;
        }
        let (qy, y) = (self.sum_qy / n, self.sum_y / n);
        let share = (c * qy - b * y) / determinant;
        let u_share = (scatter_n * scatter_n * c / determinant + relative * relative * share * share).sqrt();
        let count = f64::from(rig.cords.count);
        let (cords, half) = (count * share, COVERAGE * count * u_share);
        Some(CordsFit { cords, low: cords - half, high: cords + half, rig_file: rig.cords.count })
    }

    /// What contradicts the rig file, if anything does.
    pub fn misrigged(&self, rig: &Rig) -> Option<Misrigged> {
        let allowed_m = TAUT_LEAST_M.max(TAUT_SHARE_OF_DRAW * rig.plan.draw_m);
        let shifted = self.taut_m.filter(|(seen_m, planned_m)| (seen_m - planned_m).abs() > allowed_m);
        let shifted = shifted.map(|(seen_m, planned_m)| Misrigged::Taut(seen_m, planned_m));
        let counted = self.fit(rig).filter(|fit| {
            let count = f64::from(fit.rig_file);
            !(fit.low..=fit.high).contains(&count) && (fit.cords - count).abs() > 0.4
        });
        shifted.or(counted.map(Misrigged::Count))
    }
}

/// The tension that tells taut cords from slack ones.
fn taut_n(rig: &Rig) -> f64 {
    2.0 * rig.plan.slack_tension_n
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::live::testing::north_pier;

    /// Draws a rig back whose cords are `share` of the plan's and come taut `late_m` later, with `friction_n` in place of
    /// the rig file's.
    fn drawn(share: f64, late_m: f64, friction_n: f64, to_m: f64) -> CordFit {
        let rig = north_pier();
        let plan = Plan::new(&rig).unwrap();
        let mut fit = CordFit::default();
        for step in 0..(to_m / 0.004) as usize {
            let draw_m = step as f64 * 0.004;
            let planned = plan.drawing((draw_m - late_m).max(0.0));
            let line_n = share * planned.pull_n + planned.offset_n + friction_n - rig.losses.friction_n.value;
            fit.take(&rig, &plan, line_n.max(0.0), draw_m);
        }
        fit
    }

    #[test]
    fn six_cords_in_place_of_seven_are_told_before_half_draw() {
        let mut rig = north_pier();
        rig.cords.count = 7;
        let plan = Plan::new(&rig).unwrap();
        let six = Plan::new(&north_pier()).unwrap();
        let mut fit = CordFit::default();
        for step in 0..190 {
            let draw_m = f64::from(step) * 0.01;
            let seen = six.drawing(draw_m);
            fit.take(&rig, &plan, seen.pull_n + seen.offset_n, draw_m);
        }
        let Some(Misrigged::Count(found)) = fit.misrigged(&rig) else { panic!("{:?}", fit.fit(&rig)) };
        assert!((found.cords - 6.0).abs() < 0.3 && found.high - found.low < 1.2, "{found:?}");
    }

    #[test]
    fn a_rig_as_its_file_says_raises_nothing_whatever_its_friction() {
        let rig = north_pier();
        for friction_n in [4.0, 12.0, 22.0] {
            for share in [0.96, 1.0, 1.04] {
                let fit = drawn(share, 0.0, friction_n, 4.0);
                assert_eq!(fit.misrigged(&rig), None, "{friction_n} N, {share}: {:?}", fit.fit(&rig));
            }
        }
    }

    #[test]
    fn cords_that_come_taut_late_are_told_as_a_free_length_or_a_zero_mark() {
        let rig = north_pier();
        let fit = drawn(1.0, 0.3, 12.0, 1.0);
        let Some(Misrigged::Taut(seen_m, planned_m)) = fit.misrigged(&rig) else { panic!("{fit:?}") };
        assert!((seen_m - planned_m - 0.3).abs() < 0.02, "{seen_m}, {planned_m}");
    }

    #[test]
    fn nothing_is_said_of_a_pull_that_is_not_from_equal_cords_alone() {
        let mut rig = north_pier();
        rig.details.force_tables.push(Vec::new());
        assert_eq!(drawn(1.0, 0.0, 12.0, 2.0).fit(&rig), None);
    }
}
