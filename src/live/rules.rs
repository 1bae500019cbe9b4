//! What raises and clears each alarm. Sentences say what, where, and what to do; they advise, they stop nothing.

use crate::rig::{Rig, Role};

use super::alarm::{Board, Cause};
use super::happening::Happening;
use super::instrument::Live;
use super::state::{CordsNow, Phase};

const MS: i64 = 1_000_000;
const CHANNEL_SILENT_NS: i64 = 1_000 * MS;
const BELOW_ZERO_FOR_NS: i64 = 1_000 * MS;
const OVER_PLAN_FOR_NS: i64 = 200 * MS;
/// A device has this long to appear before its absence is an alarm.
const LINK_GRACE_NS: i64 = 3_000 * MS;
/// An alarm on a level clears this far below it.
const CLEARS_AT_SHARE: f64 = 0.97;
/// Least draw at which the band means something.
const LEAST_BAND_DRAW_M: f64 = 0.2;

/// Judges every rule at one instant.
pub fn judge(live: &mut Live, host_ns: i64) -> Vec<Happening> {
    let mut told = Vec::new();
    told.extend(tension_over_limit(live, host_ns));
    told.extend(tension_over_plan(live, host_ns));
    told.extend(released_not_moving(live, host_ns));
    links(live, host_ns, &mut told);
    channels(live, host_ns, &mut told);
    told.extend(loaded_and_blind(live, host_ns));
    told.extend(uncalibrated(live, host_ns));
    told.extend(no_plan(live, host_ns));
    told
}

/// Without the model's plan there is neither band nor forecast nor energy.
fn no_plan(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let reason = live.no_plan.as_ref()?;
    let sentence = format!("no plan, no forecast, no energy: {reason}; correct the rig file");
    live.board.raise(Cause::NoPlan, host_ns, sentence)
}

/// A tension cell that cannot give newtons: slack can never be told while the rig file lacks its calibration.
fn uncalibrated(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let cell = live.rig.uncalibrated.iter().find(|channel| channel.role.is_tension())?;
    let sentence = format!(
        "{} has no calibration: slack cannot be told without it, treat the cords as loaded; calibrate the cell",
        cell.name
    );
    live.board.raise(Cause::Uncalibrated, host_ns, sentence)
}

/// Says which of the rig's channels a device's description lacks.
pub fn channels_described(
    board: &mut Board,
    rig: &Rig,
    device: &str,
    missing: &[usize],
    host_ns: i64,
) -> Vec<Happening> {
    let mine = rig.channels.iter().enumerate().filter(|(_, channel)| channel.device == device);
    mine.filter_map(|(idx, channel)| {
        if !missing.contains(&idx) {
            return board.clear(Cause::ChannelMissing(idx), host_ns);
        }
        let sentence = format!(
            "{device} does not describe a channel \"{}\", which the rig file wants for {}: check the rig file and the firmware",
            channel.device_channel, channel.name
        );
        board.raise(Cause::ChannelMissing(idx), host_ns, sentence)
    })
    .collect()
}

fn tension_over_limit(live: &mut Live, host_ns: i64) -> Option<Happening> {
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

fn tension_over_plan(live: &mut Live, host_ns: i64) -> Option<Happening> {
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

fn released_not_moving(live: &mut Live, host_ns: i64) -> Option<Happening> {
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

fn links(live: &mut Live, host_ns: i64, told: &mut Vec<Happening>) {
    let waited_ns = live.started_ns.map_or(0, |started_ns| host_ns - started_ns);
    for (idx, device) in (0_u16..).zip(&live.devices) {
        if device.is_up() {
            told.extend(live.board.clear(Cause::LinkLost(idx), host_ns));
            told.extend(live.board.clear(Cause::LinkAbsent(idx), host_ns));
            continue;
        }
        let cause = if device.was_ever_up() { Cause::LinkLost(idx) } else { Cause::LinkAbsent(idx) };
        if (!device.was_ever_up() && waited_ns < LINK_GRACE_NS) || live.board.is_active(cause) {
            continue;
        }
        let what = if device.was_ever_up() { "link lost" } else { "no link yet" };
        let sentence = format!(
            "{}: {what} on {} ({}): check cable and power; recording goes on without it",
            device.name,
            device.port,
            device.note()
        );
        told.extend(live.board.raise(cause, host_ns, sentence));
    }
}

fn channels(live: &mut Live, host_ns: i64, told: &mut Vec<Happening>) {
    for idx in 0..live.channels.len() {
        told.extend(channel_silent(live, idx, host_ns));
        told.extend(below_zero(live, idx, host_ns));
    }
}

fn channel_silent(live: &mut Live, idx: usize, host_ns: i64) -> Option<Happening> {
    let channel = &live.channels[idx];
    let cause = Cause::ChannelSilent(idx);
    if channel.is_fresh(host_ns) {
        return live.board.clear(cause, host_ns);
    }
    let silent = channel.age_ns(host_ns).is_some_and(|age_ns| age_ns >= CHANNEL_SILENT_NS);
    // A lost link has its own sentence and explains the silence of all its channels.
    let link_lost = live.devices.iter().any(|device| device.name == channel.device && !device.is_up());
    if !silent || link_lost || live.board.is_active(cause) {
        return None;
    }
    let role = channel.role.word().replace('_', " ");
    let sentence =
        format!("{} ({role}) is silent: no value for over 1 s; check sensor, device and cable", channel.name);
    live.board.raise(cause, host_ns, sentence)
}

fn below_zero(live: &mut Live, idx: usize, host_ns: i64) -> Option<Happening> {
    let channel = &live.channels[idx];
    let below_n = channel.level(host_ns).filter(|level_n| *level_n < -live.rig.plan.slack_tension_n);
    let cause = Cause::BelowZero(idx);
    let Some(level_n) = below_n.filter(|_| channel.is_tension()) else {
        live.below_zero_since_ns[idx] = None;
        return live.board.clear(cause, host_ns);
    };
    let since_ns = *live.below_zero_since_ns[idx].get_or_insert(host_ns);
    if host_ns - since_ns < BELOW_ZERO_FOR_NS {
        return None;
    }
    let sentence = format!(
        "{} reads {level_n:.0} N, below zero: slack cannot be told while it does; check its wiring and its zero",
        channel.name
    );
    live.board.raise(cause, host_ns, sentence)
}

/// The cords were last seen loaded, and now a tension cell or its link is gone.
fn loaded_and_blind(live: &mut Live, host_ns: i64) -> Option<Happening> {
    match live.cords {
        CordsNow::Slack => return live.board.clear(Cause::LoadedAndBlind, host_ns),
        _ if live.cells.every_cell_fresh => return live.board.clear(Cause::LoadedAndBlind, host_ns),
        _ => {}
    }
    let slack_n = live.rig.plan.slack_tension_n;
    let last_n = live.channels.iter().filter(|channel| channel.is_tension()).filter_map(|channel| channel.last_level());
    let last_n = last_n.reduce(f64::max).filter(|last_n| *last_n >= slack_n)?;
    let silent: Vec<_> = live
        .channels
        .iter()
        .filter(|channel| channel.is_tension() && !channel.is_fresh(host_ns))
        .map(|channel| channel.name.as_str())
        .collect();
    if live.board.is_active(Cause::LoadedAndBlind) {
        return None;
    }
    let sentence = format!(
        "cords loaded and {} silent (last tension {last_n:.0} N): tension unknown, treat as loaded, keep clear, restore the link before anyone approaches",
        silent.join(" and ")
    );
    live.board.raise(Cause::LoadedAndBlind, host_ns, sentence)
}
