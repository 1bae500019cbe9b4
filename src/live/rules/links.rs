//! Links and what a device says of itself.

use crate::live::alarm::{Board, Cause};
use crate::live::happening::Happening;
use crate::live::instrument::Live;
use crate::rig::Rig;

/// A device has this long to appear before its absence is an alarm.
const LINK_GRACE_NS: i64 = 3_000 * super::MS;
/// A clock has this long to settle; standard uncertainty above which it is poor.
const CLOCK_GRACE_NS: i64 = 10_000 * super::MS;
const POOR_S: f64 = 2e-3;
const POOR_FOR_NS: i64 = 2_000 * super::MS;
const BEYOND_FOR_NS: i64 = 5_000 * super::MS;

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

pub(super) fn judge(live: &mut Live, host_ns: i64, told: &mut Vec<Happening>) {
    let waited_ns = live.started_ns.map_or(0, |started_ns| host_ns - started_ns);
    for (idx, device) in (0_u16..).zip(&live.devices) {
        if device.is_up() {
            told.extend(live.board.clear(Cause::LinkLost(idx), host_ns));
            told.extend(live.board.clear(Cause::LinkAbsent(idx), host_ns));
            continue;
        }
        if device.is_stopped() {
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

/// A link that is up and gives no samples: what whoever brings up a board has to know.
pub(super) fn no_samples(live: &mut Live, host_ns: i64, told: &mut Vec<Happening>) {
    for (idx, device) in (0_u16..).zip(&live.devices) {
        let cause = Cause::NoSamples(idx);
        match device.no_samples(host_ns) {
            Some(trouble) => told.extend(live.board.raise(cause, host_ns, format!("{}: {trouble}", device.name))),
            None => told.extend(live.board.clear(cause, host_ns)),
        }
    }
}

/// A clock beyond its stated tolerance.
pub(super) fn clock_beyond(live: &mut Live, host_ns: i64, told: &mut Vec<Happening>) {
    for (idx, device) in (0_u16..).zip(&mut live.devices) {
        let cause = Cause::ClockBeyond(idx);
        let seen = device.clock_beyond().filter(|_| device.is_up());
        let sentence = seen.as_ref().map(|seen| format!("{}: {seen}", device.name));
        told.extend(live.board.judge(cause, host_ns, BEYOND_FOR_NS, sentence));
        device.set_clock_trouble(seen.filter(|_| live.board.is_active(cause)));
    }
}

/// Times worse than this spoil the release instant and the launch speed.
pub(super) fn clock_poor(live: &mut Live, host_ns: i64, told: &mut Vec<Happening>) {
    let waited_ns = live.started_ns.map_or(0, |started_ns| host_ns - started_ns);
    for (idx, device) in (0_u16..).zip(&live.devices) {
        let judged = device.is_up() && device.has_ticks() && waited_ns > CLOCK_GRACE_NS;
        let poor_s = device.clock_u_s().filter(|u_s| *u_s > POOR_S && judged);
        let seen = poor_s.map(|u_s| {
            format!(
                "{}: its clock is known to ±{:.1} ms only: times and speeds of this trial get that much worse; check that it answers time requests",
                device.name,
                2e3 * u_s
            )
        });
        told.extend(live.board.judge(Cause::ClockPoor(idx), host_ns, POOR_FOR_NS, seen));
    }
}
