//! The rig as drawn against the rig file, and what a release would give.

use crate::live::alarm::Cause;
use crate::live::cord_fit::Misrigged;
use crate::live::happening::Happening;
use crate::live::instrument::Live;
use crate::live::state::Phase;

/// Share of the card's tested range from which its end is near, and how far beyond the plan a draw has to be: a plan that
/// lies near the end was made so.
const NEAR_END: f64 = 0.97;
const BEYOND_PLAN: f64 = 1.005;
/// Share of the planned draw from which a release is meant.
const AT_PLAN: f64 = 0.95;
const FORECAST_FOR_NS: i64 = 500 * super::MS;
/// A window that is missed within this time is a reason to act now.
const MISSED_SOON_S: f64 = 60.0;
/// Probability under which the window or the limit is at stake.
const LIKELY: f64 = 0.5;

/// Another number of cords, a free length or a zero mark that is not the rig file's.
pub(super) fn misrigged(live: &mut Live, host_ns: i64) -> Option<Happening> {
    if !matches!(live.tracker.phase(), Phase::WinchBack | Phase::Hold) {
        let over = live.tracker.phase() == Phase::Slack;
        return if over { live.board.clear(Cause::Misrigged, host_ns) } else { None };
    }
    let sentence = match live.drawn.misrigged(&live.rig)? {
        Misrigged::Count(fit) => format!(
            "tension fits {:.1} ± {:.1} cords, rig file says {}: stop, let down, count the cords, check lot and hooks",
            fit.cords,
            0.5 * (fit.high - fit.low),
            fit.rig_file
        ),
        Misrigged::Taut(seen_m, planned_m) => format!(
            "the cords came taut at {seen_m:.2} m draw, with a tension that the plan has at {planned_m:.2} m: free length, zero mark or slack differ from the rig file; stop and measure"
        ),
    };
    live.board.raise(Cause::Misrigged, host_ns, sentence)
}

/// Elongation near the end of what the cord card was tested for.
pub(super) fn near_card_end(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let cords = &live.rig.cords;
    let loaded = matches!(live.tracker.phase(), Phase::WinchBack | Phase::Hold);
    let draw_m = live.x_m(host_ns).map(|x_m| live.rig.draw_m(x_m)).filter(|_| loaded);
    let tested = cords.curve.last().map(|point| point.elongation);
    let elongation = draw_m.map(|draw_m| draw_m * cords.travel_ratio / cords.free_length_m);
    let planned = BEYOND_PLAN * live.rig.plan.draw_m * cords.travel_ratio / cords.free_length_m;
    let near = |now: f64, tested: f64| now > tested || now > planned.max(NEAR_END * tested);
    let seen = elongation.zip(tested).filter(|(now, tested)| near(*now, *tested)).map(|(now, tested)| {
        format!(
            "elongation {:.0} % is {} what the cords' card was tested for ({:.0} %): draw no further",
            100.0 * now,
            if now > tested { "beyond" } else { "near the end of" },
            100.0 * tested
        )
    });
    live.board.judge(Cause::NearCardEnd, host_ns, 0, seen)
}

/// The launch speed a release would give, once the shuttle stands where it is meant to be released.
pub(super) fn out_of_window(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let plan = &live.rig.plan;
    let at_plan = live.tracker.phase() == Phase::Hold
        && live.x_m(host_ns).is_some_and(|x_m| live.rig.draw_m(x_m) >= AT_PLAN * plan.draw_m);
    let now = live.drawn.released_now.filter(|_| at_plan);
    let (min, max) = (plan.launch_speed_min_mps, plan.launch_speed_max_mps);
    let out = now.filter(|now| now.in_window < LIKELY).map(|now| {
        format!(
            "a release now would give {:.1} m/s ({:.1} to {:.1}), probably outside the window of {min:.1} to {max:.1} m/s: draw, let down or change the plan before release",
            now.launch_speed_mps, now.launch_speed_low_mps, now.launch_speed_high_mps
        )
    });
    let soon = || {
        if live.board.is_active(Cause::FallingInHold) || live.board.is_active(Cause::HookSlip) {
            return None;
        }
        let hold = live.drawn.hold_now(&live.rig).filter(|_| now.is_some())?;
        let in_s = hold.window_missed_in_s.filter(|in_s| *in_s < MISSED_SOON_S)?;
        Some(format!(
            "the hold loses tension: in {in_s:.0} s a release would fall short of the window of {min:.1} to {max:.1} m/s; release soon, or let down and draw again"
        ))
    };
    let seen = out.or_else(soon);
    live.board.judge(Cause::OutOfWindow, host_ns, FORECAST_FOR_NS, seen)
}

/// The peak acceleration a release would give, from the winch-back on.
pub(super) fn peak_over_limit(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let limit_g = live.rig.limits.peak_g;
    let now = live.drawn.released_now.filter(|_| matches!(live.tracker.phase(), Phase::WinchBack | Phase::Hold));
    let seen = now.filter(|now| now.peak_g_high > limit_g).map(|now| {
        format!(
            "a release now could give {:.1} g ({:.1} to {:.1}), the limit is {limit_g:.1} g: draw no further; let down, or use fewer cords",
            now.peak_g, now.peak_g_low, now.peak_g_high
        )
    });
    live.board.judge(Cause::PeakOverLimit, host_ns, FORECAST_FOR_NS, seen)
}
