//! What a channel shows of its own health.

use crate::live::alarm::Cause;
use crate::live::channel::ChannelMonitor;
use crate::live::happening::Happening;
use crate::live::instrument::Live;
use crate::live::state::Phase;
use crate::rig::Role;

const SILENT_NS: i64 = 1_000 * super::MS;
const BELOW_ZERO_FOR_NS: i64 = 1_000 * super::MS;
const STUCK_NS: i64 = 1_000 * super::MS;
/// So many readings the same are no chance.
const N_STUCK: i64 = 20;
/// A spike may touch the end of the range; what stands there measures nothing.
const AT_END_NS: i64 = 5 * super::MS;
const NOISY_FOR_NS: i64 = 1_500 * super::MS;
/// Times the quietest second so far.
const NOISY_FACTOR: f64 = 8.0;

pub(super) fn judge(live: &mut Live, host_ns: i64, told: &mut Vec<Happening>) {
    for idx in 0..live.channels.len() {
        told.extend(silent(live, idx, host_ns));
        told.extend(below_zero(live, idx, host_ns));
        told.extend(stuck(live, idx, host_ns));
        told.extend(at_end(live, idx, host_ns));
        told.extend(noisy(live, idx, host_ns));
        told.extend(beyond_calibration(live, idx, host_ns));
    }
}

fn silent(live: &mut Live, idx: usize, host_ns: i64) -> Option<Happening> {
    let channel = &live.channels[idx];
    let cause = Cause::ChannelSilent(idx);
    if channel.is_fresh(host_ns) {
        return live.board.clear(cause, host_ns);
    }
    let silent_ns = SILENT_NS.max(channel.silent_ns());
    let silent = channel.age_ns(host_ns).is_some_and(|age_ns| age_ns >= silent_ns);
    // A link without any sample, and a channel that is not described, have their own sentences.
    let device = live.devices.iter().find(|device| device.name == channel.device);
    let gives_others = device.is_some_and(|device| device.gives_samples(host_ns, silent_ns));
    let never = channel.age_ns(host_ns).is_none() && gives_others && !live.board.is_active(Cause::ChannelMissing(idx));
    // A lost link has its own sentence and explains the silence of all its channels.
    let link_lost = live.devices.iter().any(|device| device.name == channel.device && !device.is_up());
    if !(silent || never) || link_lost || live.board.is_active(cause) {
        return None;
    }
    let silent_s = (silent_ns as f64 * 1e-8).round() * 0.1;
    let since = if never { "since the link came up".to_owned() } else { format!("for over {silent_s} s") };
    let sentence = format!("{} is silent: no value {since}; check sensor, device and cable", named(channel));
    live.board.raise(cause, host_ns, sentence)
}

/// Beyond its tested range a value is extrapolated, and nobody measured how well.
fn beyond_calibration(live: &mut Live, idx: usize, host_ns: i64) -> Option<Happening> {
    let cause = Cause::BeyondCalibration(idx);
    let channel = &live.channels[idx];
    let (low, high) = live.rig.channels[idx].record.as_ref()?.tested;
    let margin = 0.01 * (high - low);
    let beyond = channel.level(host_ns).filter(|level| *level > high + margin || *level < low - margin);
    let Some(level) = beyond.filter(|_| channel.is_tension()) else { return live.board.clear(cause, host_ns) };
    let sentence = format!(
        "{} reads {level:.0} N, its calibration was tested from {low:.0} to {high:.0} N only: do not trust it beyond",
        channel.name
    );
    live.board.raise(cause, host_ns, sentence)
}

fn below_zero(live: &mut Live, idx: usize, host_ns: i64) -> Option<Happening> {
    let channel = &live.channels[idx];
    let slack_n = live.rig.plan.slack_tension_n;
    let below_n = channel.level(host_ns).filter(|level_n| *level_n < -slack_n && channel.is_tension());
    let seen = below_n.map(|level_n| {
        format!(
            "{} reads {level_n:.0} N, below zero: slack cannot be told while it does; check its wiring and its zero",
            channel.name
        )
    });
    live.board.judge(Cause::BelowZero(idx), host_ns, BELOW_ZERO_FOR_NS, seen)
}

/// Noise stops when a converter or a text indicator hangs: the last value goes on for ever. Encoders may stand.
fn stuck(live: &mut Live, idx: usize, host_ns: i64) -> Option<Happening> {
    let channel = &live.channels[idx];
    let stuck_ns = channel.health.stuck_ns().filter(|_| channel.role != Role::ShuttlePosition);
    let seen = stuck_ns.filter(|stuck_ns| *stuck_ns >= STUCK_NS.max(N_STUCK * channel.interval_ns())).map(|stuck_ns| {
        let loaded = if channel.is_tension() { "; treat the cords as loaded" } else { "" };
        format!(
            "{} is stuck: the very same value for {:.0} s, without its usual noise; check sensor and device{loaded}",
            named(channel),
            stuck_ns as f64 * 1e-9
        )
    });
    live.board.judge(Cause::ChannelStuck(idx), host_ns, 0, seen)
}

/// At the end of the converter's range a channel only says "at least". The arrest may saturate an accelerometer.
fn at_end(live: &mut Live, idx: usize, host_ns: i64) -> Option<Happening> {
    let channel = &live.channels[idx];
    let arrest = live.tracker.phase() == Phase::RunOut && channel.role == Role::ShuttleSpecificForce;
    let at_end_ns = channel.health.at_end_ns().filter(|_| !arrest);
    let seen = at_end_ns.filter(|at_end_ns| *at_end_ns >= AT_END_NS).map(|_| {
        let loaded = if channel.is_tension() { ", stop the winch" } else { "" };
        format!(
            "{} is saturated: it stands at the end of its range and the true value lies beyond{loaded}; check range, wiring and amplifier",
            named(channel)
        )
    });
    live.board.judge(Cause::ChannelSaturated(idx), host_ns, 0, seen)
}

/// Judged while nothing moves: a winch and a launch shake every sensor.
fn noisy(live: &mut Live, idx: usize, host_ns: i64) -> Option<Happening> {
    let channel = &live.channels[idx];
    if !matches!(live.tracker.phase(), Phase::Slack | Phase::Hold) || !channel.is_fresh(host_ns) {
        return live.board.judge(Cause::ChannelNoisy(idx), host_ns, NOISY_FOR_NS, None);
    }
    // One count of rounding is no noise to be multiplied.
    let usual = channel.health.least_noise_counts().map(|least| least.max(1.0));
    let now = channel.health.noise_counts();
    let noisy = now.zip(usual).filter(|(now, usual)| *now > NOISY_FACTOR * usual);
    let seen = noisy.filter(|_| channel.role != Role::ShuttlePosition).map(|(now, usual)| {
        format!(
            "{} is noisy: {:.0} times its quietest second ({:.2} {} a sample); check shield, connector and supply",
            named(channel),
            now / usual,
            now * channel.per_count(),
            channel.role.unit()
        )
    });
    live.board.judge(Cause::ChannelNoisy(idx), host_ns, NOISY_FOR_NS, seen)
}

fn named(channel: &ChannelMonitor) -> String {
    format!("{} ({})", channel.name, channel.role.word().replace('_', " "))
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
