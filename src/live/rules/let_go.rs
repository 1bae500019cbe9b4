//! The shuttle let go, or not, when it should not have, or should.

use crate::live::alarm::Cause;
use crate::live::happening::Happening;
use crate::live::instrument::Live;
use crate::live::state::Phase;
use crate::rig::Role;

/// Share of the planned draw that still counts as the plan's.
const SHORT_OF_PLAN: f64 = 0.95;
/// Forward way in a hold that makes a slip, and over which it is looked for. Stick and slip on the rail make millimetres.
const SLIP_M: f64 = 0.006;
const SLIP_WINDOW_NS: i64 = 300 * super::MS;
const STANDS_MPS: f64 = 0.02;
const STANDS_WINDOW_NS: i64 = 100 * super::MS;

/// Released without motion.
pub(super) fn released_not_moving(live: &mut Live, host_ns: i64) -> Option<Happening> {
    if !live.tracker.released_not_moving() {
        return live.board.clear(Cause::ReleasedNotMoving, host_ns);
    }
    let anchor = match live.level(Role::CordAnchorTension, host_ns) {
        Some(anchor_n) => format!("the anchor still carries {anchor_n:.0} N"),
        None => String::from("the anchor's cell is silent"),
    };
    let sentence = format!(
        "the release line lost more than half its tension but the shuttle does not move ({anchor}): hang-fire or failed cell, keep clear, treat the cords as loaded"
    );
    live.board.raise(Cause::ReleasedNotMoving, host_ns, sentence)
}

/// Launched short of the plan's draw. Told at the moment the launch is.
pub(super) fn early_release(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let plan_m = live.rig.plan.draw_m;
    match live.tracker.phase() {
        Phase::Launch => {}
        Phase::WinchBack | Phase::Hold => return live.board.clear(Cause::EarlyRelease, host_ns),
        _ => return None,
    }
    let drawn_m = live.tracker.place_before_release_m().map(|x_m| live.rig.draw_m(x_m))?;
    if drawn_m >= SHORT_OF_PLAN * plan_m {
        return None;
    }
    let sentence = format!(
        "early release: the shuttle let go at {drawn_m:.2} m draw, the plan says {plan_m:.2} m; keep clear until it rests, then inspect hook and release"
    );
    live.board.raise(Cause::EarlyRelease, host_ns, sentence)
}

/// The shuttle jumped forward in the hold and is held again. One that is let down does not stand again at once.
pub(super) fn hook_slip(live: &mut Live, host_ns: i64) -> Option<Happening> {
    match live.tracker.phase() {
        Phase::Hold => {}
        Phase::Slack | Phase::Launch => return live.board.clear(Cause::HookSlip, host_ns),
        _ => return None,
    }
    let position = live.with_role(Role::ShuttlePosition)?;
    let moved_m = position.slope_per_s(host_ns, SLIP_WINDOW_NS)? * SLIP_WINDOW_NS as f64 * 1e-9;
    let stands = position.slope_per_s(host_ns, STANDS_WINDOW_NS)?.abs() < STANDS_MPS;
    if moved_m < SLIP_M || !stands {
        return None;
    }
    let sentence = format!(
        "the shuttle jumped {:.0} mm forward in the hold and is held again: hook slip; keep clear, do not approach, let down with the winch if it holds",
        1e3 * moved_m
    );
    live.board.raise(Cause::HookSlip, host_ns, sentence)
}
