//! What a channel shows of its own health.

use crate::live::alarm::Cause;
use crate::live::happening::Happening;
use crate::live::instrument::Live;

const CHANNEL_SILENT_NS: i64 = 1_000 * super::MS;
const BELOW_ZERO_FOR_NS: i64 = 1_000 * super::MS;

pub(super) fn judge(live: &mut Live, host_ns: i64, told: &mut Vec<Happening>) {
    for idx in 0..live.channels.len() {
        told.extend(silent(live, idx, host_ns));
        told.extend(below_zero(live, idx, host_ns));
    }
}

fn silent(live: &mut Live, idx: usize, host_ns: i64) -> Option<Happening> {
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

/// A tension cell that cannot give newtons: slack can never be told while the rig file lacks its calibration.
pub(super) fn uncalibrated(live: &mut Live, host_ns: i64) -> Option<Happening> {
    let cell = live.rig.uncalibrated.iter().find(|channel| channel.role.is_tension())?;
    let sentence = format!(
        "{} has no calibration: slack cannot be told without it, treat the cords as loaded; calibrate the cell",
        cell.name
    );
    live.board.raise(Cause::Uncalibrated, host_ns, sentence)
}
