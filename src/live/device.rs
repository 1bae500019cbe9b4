//! One device as live sees it: link state, decoder, clock, and where its channels go.

use crate::capture::{
    Block, BlockTimes, Captured, Counts, DeviceDecoder, DeviceDescription, LiveClock, N_DESCRIPTIONS, NominalClock,
    TimeBase, TimeReply, TimeRequests,
};
use crate::link::STOPPED;
use crate::rig::{Channel, Device, Protocol};

use super::bring_up::BringUp;
use super::losses::Losses;
use super::rate_watch::RateWatch;
use super::raw::Taps;
use super::state::LinkNow;

const SECOND_NS: i64 = 1_000_000_000;
/// A device that keeps samples back for longer, or says that it will take them, is not believed.
const BELIEVED_WITHIN_NS: u64 = 60_000_000_000;

/// Where one stream's channels go: indices into the taps, whose first ones are the rig's calibrated channels.
#[derive(Debug)]
struct StreamMap {
    description_id: u16,
    stream: u8,
    ticks_per_sample: u32,
    targets: Vec<Option<usize>>,
}

/// A sample on its way to its channel.
#[derive(Debug, Clone, Copy)]
pub struct Sample {
    pub channel_idx: usize,
    pub t_ns: i64,
    pub counts: f64,
}

#[derive(Debug)]
pub struct DeviceMonitor {
    pub name: String,
    pub port: String,
    decoder: DeviceDecoder,
    /// None before the first description.
    clock: Option<LiveClock>,
    requests: TimeRequests,
    ns_per_tick: f64,
    /// Of the boot, all descriptions that blocks may name.
    streams: Vec<StreamMap>,
    boot_id: Option<u32>,
    up: bool,
    ever_up: bool,
    has_ticks: bool,
    note: String,
    last_bytes_ns: Option<i64>,
    up_since_ns: i64,
    longest_stall_ns: i64,
    rate: ByteRate,
    bring_up: BringUp,
    losses: Losses,
    clock_rate: Option<RateWatch>,
    clock_trouble: Option<String>,
}

/// Bytes a second over the last whole second.
#[derive(Debug, Default)]
struct ByteRate {
    from_ns: i64,
    bytes: u64,
    per_s: f64,
}

impl ByteRate {
    fn add(&mut self, host_ns: i64, n: usize) {
        self.turn(host_ns);
        self.bytes += n as u64;
    }

    fn turn(&mut self, host_ns: i64) {
        let span_ns = host_ns - self.from_ns;
        if span_ns >= SECOND_NS {
            self.per_s = self.bytes as f64 / (span_ns as f64 * 1e-9);
            self.bytes = 0;
            self.from_ns = host_ns;
        }
    }
}

impl DeviceMonitor {
    pub fn new(device: &Device) -> Self {
        Self {
            name: device.name.clone(),
            port: device.port.clone(),
            decoder: DeviceDecoder::of(device),
            clock: None,
            requests: TimeRequests::default(),
            ns_per_tick: 1_000.0,
            streams: Vec::new(),
            boot_id: None,
            up: false,
            ever_up: false,
            has_ticks: false,
            note: String::from("not opened yet"),
            last_bytes_ns: None,
            up_since_ns: 0,
            longest_stall_ns: 0,
            rate: ByteRate::default(),
            bring_up: match &device.protocol {
                Protocol::Text(text) => BringUp::of_text(text.interval_s),
                Protocol::Frames => BringUp::of_frames(),
            },
            losses: Losses::default(),
            clock_rate: None,
            clock_trouble: None,
        }
    }

    /// Closed because the program was told to stop: nothing is wrong with it.
    pub fn is_stopped(&self) -> bool {
        !self.up && self.note == STOPPED
    }

    pub fn is_up(&self) -> bool {
        self.up
    }

    /// The port's path and rate, or why it is not open.
    pub fn note(&self) -> &str {
        &self.note
    }

    pub fn last_bytes_ns(&self) -> Option<i64> {
        self.last_bytes_ns
    }

    pub fn was_ever_up(&self) -> bool {
        self.ever_up
    }

    pub fn link_up(&mut self, host_ns: i64, path: &str, baud: u32) {
        self.decoder.link_lost(host_ns, &mut |_| {});
        self.up = true;
        self.up_since_ns = host_ns;
        self.bring_up.opened(host_ns);
        self.ever_up = true;
        self.note = format!("{path} at {baud} baud");
    }

    /// Something to know about the open port.
    pub fn note_port(&mut self, text: &str) {
        self.note = format!("{}; {text}", self.note.split("; ").next().unwrap_or_default());
    }

    pub fn link_down(&mut self, host_ns: i64, reason: &str) {
        self.up = false;
        reason.clone_into(&mut self.note);
        self.decoder.link_lost(host_ns, &mut |_| {});
    }

    /// Bytes were dropped on the way here: what follows does not go on from what came before.
    pub fn bytes_lost(&mut self, host_ns: i64) {
        self.decoder.link_lost(host_ns, &mut |_| {});
    }

    pub fn time_requested(&mut self, host_ns: i64, token: u32) {
        self.requests.requested(host_ns, token);
    }

    pub fn time_replied(&mut self, reply: &TimeReply) {
        if let (Some(clock), Some(exchange)) = (&mut self.clock, self.requests.replied(reply)) {
            clock.exchanged(&exchange);
        }
    }

    /// Decodes one read; what it completed, in order.
    pub fn decode(&mut self, host_ns: i64, bytes: &[u8]) -> Vec<Captured> {
        if let Some(last_ns) = self.last_bytes_ns.filter(|last_ns| *last_ns >= self.up_since_ns) {
            self.longest_stall_ns = self.longest_stall_ns.max(host_ns - last_ns);
        }
        self.last_bytes_ns = Some(host_ns);
        self.rate.add(host_ns, bytes.len());
        self.bring_up.heard_bytes();
        let mut captured = Vec::new();
        self.decoder.feed(host_ns, bytes, &mut |what| captured.push(what));
        captured
    }

    /// Takes note of what was decoded, for who brings up a board and for who asks what was lost.
    pub fn heard(&mut self, what: &Captured) {
        self.bring_up.heard(what);
        self.losses.heard(what);
    }

    /// What was lost since it was last told, in people's words, not too often.
    pub fn tell_losses(&mut self, host_ns: i64) -> Option<String> {
        self.losses.tell(host_ns)
    }

    /// Frames, not lines of text.
    pub fn speaks_frames(&self) -> bool {
        self.bring_up.speaks_frames()
    }

    /// Why no sample was accepted since the link came up, where one should have been.
    pub fn no_samples(&self, host_ns: i64) -> Option<String> {
        let described = self.decoder.description().is_some();
        self.bring_up.trouble(host_ns, described, self.decoder.counters()).filter(|_| self.up)
    }

    /// Giving samples, and up for long enough that a channel which speaks every `silent_ns` should have had a value.
    pub fn gives_samples(&self, host_ns: i64, silent_ns: i64) -> bool {
        self.up && host_ns - self.up_since_ns >= silent_ns && self.bring_up.gives_samples(host_ns)
    }

    /// How the clock breaks the tolerance that the device states, as it looks now.
    pub fn clock_beyond(&self) -> Option<String> {
        let watch = self.clock_rate.as_ref().filter(|_| self.has_ticks)?;
        let piece = self.clock.as_ref().and_then(LiveClock::piece);
        let by_map = piece.and_then(|piece| piece.drift_ppm(1e9 / self.ns_per_tick));
        let by_map = by_map.filter(|ppm| ppm.abs() > watch.allowed_ppm());
        let ppm = watch.beyond_ppm().or(by_map)?;
        let way = if ppm > 0.0 { "fast" } else { "slow" };
        let off = if ppm.abs() >= 1e4 { format!("{:.1} %", ppm.abs() * 1e-4) } else { format!("{:.0} ppm", ppm.abs()) };
        Some(format!(
            "its clock runs {off} {way}, it states {} ppm: times of its samples get that much worse and some samples may get none; check the tick rate that it describes (SPEC.md 3.1)",
            watch.stated_ppm()
        ))
    }

    /// What is said of the clock in snapshots.
    pub fn set_clock_trouble(&mut self, trouble: Option<String>) {
        self.clock_trouble = trouble;
    }

    /// Takes a description; gives the rig's calibrated channels that it does not know, by index.
    pub fn describe(&mut self, description: &DeviceDescription, channels: &[Channel], taps: &Taps) -> Vec<usize> {
        let wanted = |name: &str| taps.position(&self.name, name);
        self.ns_per_tick = 1e9 / description.tick_rate_hz;
        self.has_ticks = description.time_base == TimeBase::Ticks;
        let nominal = NominalClock::from(description);
        self.clock = Some(LiveClock::new(nominal));
        if self.clock_rate.as_ref().is_none_or(|watch| watch.nominal() != nominal) {
            self.clock_rate = Some(RateWatch::new(nominal));
        }
        if self.boot_id.replace(description.boot_id) != Some(description.boot_id) {
            self.streams.clear();
        }
        let id = description.description_id;
        self.streams.retain(|stream| stream.description_id != id);
        let mut ids: Vec<u16> = self.streams.iter().map(|stream| stream.description_id).collect();
        ids.dedup();
        if ids.len() >= N_DESCRIPTIONS {
            self.streams.retain(|stream| stream.description_id != ids[0]);
        }
        self.streams.extend(description.streams.iter().map(|stream| StreamMap {
            description_id: id,
            stream: stream.stream,
            ticks_per_sample: stream.ticks_per_sample,
            targets: stream.channels.iter().map(|channel| wanted(&channel.name)).collect(),
        }));
        let named = self.streams.iter().filter(|stream| stream.description_id == id);
        let known: Vec<_> = named.flat_map(|stream| stream.targets.iter().flatten().copied()).collect();
        let mine = channels.iter().enumerate().filter(|(_, channel)| channel.device == self.name);
        mine.map(|(idx, _)| idx).filter(|idx| !known.contains(idx)).collect()
    }

    /// Where the converters of the rig's channels end, in counts: index in the rig's channels, least, greatest.
    pub fn ranges(&self, description: &DeviceDescription) -> Vec<(usize, f64, f64)> {
        let described = description.streams.iter().flat_map(|stream| {
            let map = self.map_of(description.description_id, stream.stream);
            stream.channels.iter().enumerate().filter_map(move |(place, channel)| {
                let idx = (*map?.targets.get(place)?)?;
                let stated = channel.nominal_min..=channel.nominal_max;
                let range = if stated.is_empty() { channel.encoding.range()? } else { stated };
                Some((idx, *range.start(), *range.end()))
            })
        });
        described.collect()
    }

    fn map_of(&self, description_id: u16, stream: u8) -> Option<&StreamMap> {
        self.streams.iter().find(|map| (map.description_id, map.stream) == (description_id, stream))
    }

    /// How far the samples of the rig's channels are apart, ns: index in the rig's channels, interval.
    pub fn intervals(&self, description: &DeviceDescription) -> Vec<(usize, i64)> {
        let interval_ns = |map: &StreamMap| (f64::from(map.ticks_per_sample) * 1e9 / description.tick_rate_hz) as i64;
        let of = |map: &StreamMap| {
            let interval_ns = interval_ns(map);
            map.targets.iter().flatten().map(move |idx| (*idx, interval_ns)).collect::<Vec<_>>()
        };
        self.streams.iter().filter(|map| map.description_id == description.description_id).flat_map(of).collect()
    }

    /// Whether it counts a clock of its own, which exchanges can tie to the host's.
    pub fn has_ticks(&self) -> bool {
        self.has_ticks
    }

    /// Standard uncertainty of the clock now; none before there is a map.
    pub fn clock_u_s(&self) -> Option<f64> {
        self.clock.as_ref().and_then(LiveClock::piece).map(|piece| piece.u_ns * 1e-9)
    }

    /// Hands every sample of a block to `sink`, stamped with the host time at which the device took it. A block whose
    /// ticks say that it is a minute away from its arrival is not shown: its channel falls silent, which is said.
    pub fn spread(&mut self, block: &Block, sink: &mut impl FnMut(Sample)) {
        let place = |map: &StreamMap| (map.description_id, map.stream) == (block.description_id, block.stream);
        let Some(map) = self.streams.iter().find(|map| place(map)) else { return };
        if let Some(clock) = &mut self.clock {
            clock.arrived(&BlockTimes::from(block));
        }
        if let Some(watch) = &mut self.clock_rate {
            watch.arrived(block);
        }
        let first_ns = self.sample_ns(block, block.first_tick);
        if first_ns.abs_diff(block.host_ns) > BELIEVED_WITHIN_NS {
            return;
        }
        let step_ns = f64::from(map.ticks_per_sample) * self.ns_per_tick;
        for (target, counts) in map.targets.iter().zip(&block.counts) {
            let Some(channel_idx) = *target else { continue };
            let mut put = |k: usize, counts: f64| {
                let t_ns = first_ns.saturating_add((k as f64 * step_ns) as i64).min(block.host_ns);
                sink(Sample { channel_idx, t_ns, counts });
            };
            match counts {
                Counts::Integer(all) => all.iter().enumerate().for_each(|(k, n)| put(k, f64::from(*n))),
                Counts::Float(all) => all.iter().enumerate().for_each(|(k, n)| put(k, f64::from(*n))),
            }
        }
    }

    /// Host time of a tick near a block: by the clock map, or by the block's arrival while there is none.
    fn sample_ns(&self, block: &Block, tick: u64) -> i64 {
        let piece = self.clock.as_ref().and_then(LiveClock::piece).filter(|piece| piece.boot_id == block.boot_id);
        match piece {
            Some(piece) => piece.host_ns(tick) as i64,
            None => {
                let before_sent_ns = block.sent_tick.saturating_sub(tick) as f64 * self.ns_per_tick;
                block.host_ns.saturating_sub(before_sent_ns as i64)
            }
        }
    }

    pub fn now(&mut self, host_ns: i64) -> LinkNow {
        self.rate.turn(host_ns);
        let no_samples = self.no_samples(host_ns);
        let counters = self.decoder.counters();
        let piece = self.clock.as_ref().and_then(LiveClock::piece);
        LinkNow {
            device: self.name.clone(),
            up: self.up,
            bytes: counters.bytes,
            bytes_per_s: self.rate.per_s,
            frames: counters.frames,
            refused: counters.refused.values().sum(),
            refused_by: counters.refused.iter().map(|(reason, n)| ((*reason).to_owned(), *n)).collect(),
            blocks: counters.blocks,
            last_refusal: Some(self.bring_up.last_refusal().to_owned()).filter(|last| !last.is_empty()),
            no_samples,
            lost_frames: counters.lost_frames,
            missing_samples: counters.missing,
            gaps: counters.gaps,
            longest_stall_s: self.longest_stall_ns as f64 * 1e-9,
            silent_s: self.last_bytes_ns.map(|last_ns| (host_ns - last_ns).max(0) as f64 * 1e-9),
            clock_uncertainty_s: self.clock_u_s(),
            clock_drift_ppm: piece.and_then(|piece| piece.drift_ppm(1e9 / self.ns_per_tick)),
            clock_trouble: self.clock_trouble.clone(),
            note: self.note.clone(),
        }
    }
}
