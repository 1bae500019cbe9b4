//! Tension against limit and plan.

use crate::live::alarm::Cause;
use crate::live::happening::Happening;
use crate::live::instrument::Live;
use crate::live::state::Phase;
use crate::rig::Role;

const OVER_PLAN_FOR_NS: i64 = 200 * super::MS;
/// An alarm on a level clears this far below it.
const CLEARS_AT_SHARE: f64 = 0.97;
/// Least draw at which the band means something.
const LEAST_BAND_DRAW_M: f64 = 0.2;

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

pub(super) fn over_plan(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let drawing = matches!(live.tracker.phase(), Phase::WinchBack | Phase::Hold);
    let line_n = live.level(Role::ReleaseLineTension, host_ns);
    let draw_m = live.x_m(host_ns).map(|x_m| live.rig.draw_m(x_m)).filter(|draw_m| *draw_m >= LEAST_BAND_DRAW_M);
    let over = match (drawing, line_n, draw_m, &live.plan) {
        (true, Some(line_n), Some(draw_m), Some(plan)) => {
            let expected = plan.expected(draw_m);
            (line_n > expected.high_n).then_some((line_n, draw_m, expected))
        }
        _ => None,
    };
    let Some((line_n, draw_m, expected)) = over else {
        live.over_plan_since_ns = None;
        return live.board.clear(Cause::TensionOverPlan, host_ns);
    };
    let since_ns = *live.over_plan_since_ns.get_or_insert(host_ns);
    if host_ns - since_ns < OVER_PLAN_FOR_NS {
        return None;
    }
    let sentence = format!(
        "tension {line_n:.0} N at {draw_m:.2} m draw is over the plan's band ({:.0} to {:.0} N): stop, check cords, payload and cell",
        expected.low_n, expected.high_n
    );
    live.board.raise(Cause::TensionOverPlan, host_ns, sentence)
}
