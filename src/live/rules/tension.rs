//! Tension against limit, plan and its own past.

use crate::live::alarm::Cause;
use crate::live::happening::Happening;
use crate::live::instrument::Live;
use crate::live::state::Phase;
use crate::rig::Role;

const OVER_PLAN_FOR_NS: i64 = 200 * super::MS;
/// A line that has let go is told as such before this.
const BELOW_PLAN_FOR_NS: i64 = 500 * super::MS;
/// An alarm on a level clears this far below it.
const CLEARS_AT_SHARE: f64 = 0.97;
/// Least draw at which the band means something.
const LEAST_BAND_DRAW_M: f64 = 0.2;
/// The winch must leave a person this long to stop it before the limit.
const TIME_TO_LIMIT_S: f64 = 2.5;
const RISING_FOR_NS: i64 = 200 * super::MS;
const SLOPE_WINDOW_NS: i64 = 200 * super::MS;
/// Rubber loses a few per cent in the first minute of a hold; so much within a second, or at once, is no relaxation.
const FALL_SHARE: f64 = 0.05;
const FALL_WINDOW_NS: i64 = 1_000 * super::MS;
const SUDDEN_WINDOW_NS: i64 = 100 * super::MS;
/// A release is told as such before this.
const FALLING_FOR_NS: i64 = 150 * super::MS;
/// Below this share of what it was the line has let go, which has its own sentences.
const LET_GO_SHARE: f64 = 0.5;
/// Speed of a shuttle that stands; one that is let down loses tension, and should.
const STANDING_MPS: f64 = 0.02;

pub(super) fn over_limit(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let limit_n = live.rig.limits.tension_n;
    let tension_n = live.cells.tension_n?;
    if tension_n > limit_n {
        let sentence = format!("tension {tension_n:.0} N is over the limit of {limit_n:.0} N: stop the winch");
        live.board.raise(Cause::TensionOverLimit, host_ns, sentence)
    } else if tension_n < CLEARS_AT_SHARE * limit_n {
        live.board.clear(Cause::TensionOverLimit, host_ns)
    } else {
        None
    }
}

/// Outside the plan's band on either side.
pub(super) fn against_plan(live: &mut Live, host_ns: i64) -> [Option<Happening>; 2] {
    let drawing = matches!(live.tracker.phase(), Phase::WinchBack | Phase::Hold) && !live.tracker.released_not_moving();
    let line_n = live.level(Role::ReleaseLineTension, host_ns).filter(|_| drawing);
    let draw_m = live.x_m(host_ns).map(|x_m| live.rig.draw_m(x_m)).filter(|draw_m| *draw_m >= LEAST_BAND_DRAW_M);
    let (mut over, mut below) = (None, None);
    if let (Some(line_n), Some(draw_m), Some(plan)) = (line_n, draw_m, &live.plan) {
        let band = plan.expected(draw_m);
        let told = |side: &str, advice: &str| {
            format!(
                "tension {line_n:.0} N at {draw_m:.2} m draw is {side} the plan's band ({:.0} to {:.0} N): {advice}",
                band.low_n, band.high_n
            )
        };
        over = (line_n > band.high_n).then(|| told("over", "stop, check cords, payload and cell"));
        below = (line_n < band.low_n).then(|| told("below", "stop, count the cords, check them and the cell"));
    }
    [
        live.board.judge(Cause::TensionOverPlan, host_ns, OVER_PLAN_FOR_NS, over),
        live.board.judge(Cause::TensionBelowPlan, host_ns, BELOW_PLAN_FOR_NS, below),
    ]
}

/// So fast that nobody stops the winch before the limit.
pub(super) fn rising_too_fast(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let limit_n = live.rig.limits.tension_n;
    let drawing = live.tracker.phase() == Phase::WinchBack;
    let line = live.with_role(Role::ReleaseLineTension).filter(|_| drawing);
    let rate = line.and_then(|line| line.level(host_ns).zip(line.slope_per_s(host_ns, SLOPE_WINDOW_NS)));
    let seen = rate.filter(|(level_n, n_per_s)| *level_n + TIME_TO_LIMIT_S * n_per_s > limit_n && *level_n < limit_n);
    let seen = seen.filter(|(level_n, n_per_s)| *n_per_s > 0.05 * level_n).map(|(level_n, n_per_s)| {
        format!(
            "tension rises by {n_per_s:.0} N a second: the limit of {limit_n:.0} N is {:.1} s away; slow the winch or stop it",
            (limit_n - level_n) / n_per_s
        )
    });
    live.board.judge(Cause::RisingTooFast, host_ns, RISING_FOR_NS, seen)
}

/// A hold that loses more at once than rubber does. Stays on the board until the cords are slack: the fall is soon over,
/// what it was stays to be found.
pub(super) fn falling_in_hold(live: &mut Live, host_ns: i64) -> Option<Happening> {
    match live.tracker.phase() {
        Phase::Hold => {}
        Phase::Slack | Phase::Launch => return live.board.judge(Cause::FallingInHold, host_ns, 0, None),
        _ => return None,
    }
    if live.board.is_active(Cause::FallingInHold) {
        return None;
    }
    let line = live.with_role(Role::ReleaseLineTension)?;
    let level_n = line.level(host_ns)?;
    let fell_n = |window_ns: i64| {
        let fell_n = -line.slope_per_s(host_ns, window_ns)? * window_ns as f64 * 1e-9;
        let was_n = level_n + fell_n;
        (fell_n > FALL_SHARE * was_n && level_n > LET_GO_SHARE * was_n).then_some(fell_n)
    };
    let position = live.with_role(Role::ShuttlePosition);
    let speed_mps = position.and_then(|position| position.slope_per_s(host_ns, FALL_WINDOW_NS));
    let stands = speed_mps.is_some_and(|speed_mps| speed_mps.abs() < STANDING_MPS);
    let seen = fell_n(SUDDEN_WINDOW_NS).or_else(|| fell_n(FALL_WINDOW_NS).filter(|_| stands)).map(|fell_n| {
        format!(
            "tension falls in the hold, by {fell_n:.0} N to {level_n:.0} N: cord, hook or anchor gives way; keep clear, do not approach"
        )
    });
    if seen.is_none() && live.board.is_awaited(Cause::FallingInHold) {
        return live.board.judge(Cause::FallingInHold, host_ns, 0, None);
    }
    live.board.judge(Cause::FallingInHold, host_ns, FALLING_FOR_NS, seen)
}
