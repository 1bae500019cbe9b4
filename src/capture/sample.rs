//! What a device's bytes turn into. Everything carries the host's monotonic time of the read that completed it.

use std::ops::RangeInclusive;

/// Host monotonic time (CLOCK_MONOTONIC), nanoseconds.
pub type HostNs = i64;

/// How a channel packs one sample on the wire.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Encoding {
    I16,
    I24,
    I32,
    F32,
}

impl Encoding {
    /// What it can carry, in counts; at its ends the channel saturates. None for floating point.
    pub fn range(self) -> Option<RangeInclusive<f64>> {
        let bits = match self {
            Self::I16 => 16,
            Self::I24 => 24,
            Self::I32 => 32,
            Self::F32 => return None,
        };
        let half = 2_f64.powi(bits - 1);
        Some(-half..=half - 1.0)
    }
}

/// One channel as its device describes it.
#[derive(Debug, Clone, PartialEq)]
pub struct ChannelDescription {
    pub name: String,
    pub quantity: String,
    pub encoding: Encoding,
    pub nominal_min: f64,
    pub nominal_max: f64,
    pub group_delay_s: f64,
    /// −3 dB bandwidth of the anti-alias filter; `None` when the device does not know it.
    pub bandwidth_hz: Option<f64>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct StreamDescription {
    pub stream: u8,
    pub ticks_per_sample: u32,
    pub channels: Vec<ChannelDescription>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct DeviceDescription {
    pub device_id: u64,
    pub name: String,
    pub firmware: String,
    pub tick_rate_hz: f64,
    pub tick_tolerance_ppm: f64,
    pub boot_id: u32,
    pub description_id: u16,
    pub streams: Vec<StreamDescription>,
    pub time_base: TimeBase,
}

/// "describes itself: firmware eyes 1.0, line 1000 Hz, encoder and accel 250 Hz".
impl std::fmt::Display for DeviceDescription {
    fn fmt(&self, to: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        write!(to, "describes itself: firmware {}", self.firmware)?;
        for stream in &self.streams {
            let names: Vec<_> = stream.channels.iter().map(|channel| channel.name.as_str()).collect();
            let names = match names.split_last() {
                None => "no channel".to_owned(),
                Some((only, [])) => (*only).to_owned(),
                Some((last, before)) => format!("{} and {last}", before.join(", ")),
            };
            let rate_hz = self.tick_rate_hz / f64::from(stream.ticks_per_sample.max(1));
            write!(to, ", {names} {} Hz", (rate_hz * 1e3).round() / 1e3)?;
        }
        if self.streams.is_empty() {
            write!(to, ", no stream")?;
        }
        Ok(())
    }
}

/// What a device's ticks are.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum TimeBase {
    /// Counts of the device's clock, with the tick at which a block was sent.
    Ticks,
    /// A time that the device prints; its lines may all be late by up to `hidden_delay_ns` more than frames.
    Printed { hidden_delay_ns: f64 },
    /// The host's stamps, nanoseconds: readings were taken up to twice `half_width_ns` earlier, as likely anywhere in it.
    Arrival { half_width_ns: f64 },
}

/// Counts of one channel, as received.
#[derive(Debug, Clone, PartialEq)]
pub enum Counts {
    Integer(Vec<i32>),
    Float(Vec<f32>),
}

/// One block of samples, as received.
#[derive(Debug, Clone, PartialEq)]
pub struct Block {
    pub host_ns: HostNs,
    pub boot_id: u32,
    pub description_id: u16,
    pub stream: u8,
    pub sequence: u32,
    /// Index of the first sample in the stream, since boot.
    pub first_index: u64,
    /// Device tick of the first sample.
    pub first_tick: u64,
    /// Device tick when the block was handed to the device's port.
    pub sent_tick: u64,
    pub n_samples: u32,
    /// Samples the device itself had to drop since boot.
    pub overruns: u32,
    /// CRC-32C of the frame that carried the block.
    pub crc: u32,
    /// One entry a channel, in the order of the description.
    pub counts: Vec<Counts>,
}

/// Samples that a stream's indices show to be missing.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Gap {
    pub host_ns: HostNs,
    pub boot_id: u32,
    pub stream: u8,
    pub first_missing_index: u64,
    pub n_missing: u64,
}

/// Bytes that were refused, kept as received.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Rejected {
    pub host_ns: HostNs,
    /// One of a few, for counting.
    pub reason: &'static str,
    /// What exactly was wrong (which field, which id), for people; may be empty.
    pub detail: String,
    pub bytes: Vec<u8>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Edge {
    pub host_ns: HostNs,
    pub boot_id: u32,
    pub input: u8,
    pub rising: bool,
    pub tick: u64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Status {
    pub host_ns: HostNs,
    pub boot_id: u32,
    pub tick: u64,
    pub temperature_c: f32,
    pub supply_v: f32,
    pub excitation_v: f32,
    pub overruns: u32,
}

/// Answer to a time request: the device's ticks at receipt and at send.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct TimeReply {
    pub host_ns: HostNs,
    pub boot_id: u32,
    pub token: u32,
    pub received_tick: u64,
    pub sent_tick: u64,
}

/// How it was seen that a device started again.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum RebootSeen {
    /// As it should be: by a boot id that it never had before.
    NewId,
    /// By a boot id that an earlier boot had.
    IdOfAnEarlierBoot,
    /// Sequences and ticks began again under the same boot id.
    OldId,
    /// Ticks at send began again, sequences went on.
    ClockAnew,
}

/// A device started again: its indices, sequences and ticks have nothing to do with those before.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Reboot {
    pub host_ns: HostNs,
    /// Under which the new run is recorded: the received one, or another where that was used before.
    pub boot_id: u32,
    pub received_boot_id: u32,
    pub earlier_boot_id: u32,
    pub seen: RebootSeen,
}

impl std::fmt::Display for Reboot {
    fn fmt(&self, to: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        let Self { boot_id, received_boot_id: received, earlier_boot_id: earlier, .. } = self;
        match self.seen {
            RebootSeen::NewId => write!(to, "rebooted: boot {boot_id:#010x} after {earlier:#010x}"),
            RebootSeen::IdOfAnEarlierBoot | RebootSeen::OldId => write!(
                to,
                "rebooted under a boot id that it had before, {received:#010x}: recorded as boot {boot_id:#010x} from here on; \
                 the firmware must choose another id at every boot (SPEC.md 2.2)"
            ),
            RebootSeen::ClockAnew => write!(
                to,
                "its clock ran backward within boot {received:#010x}: recorded as boot {boot_id:#010x} from here on; ticks must \
                 be counted in 64 bits and never go back (SPEC.md 1)"
            ),
        }
    }
}

/// What decoding yields, in order of arrival.
#[derive(Debug, Clone, PartialEq)]
pub enum Captured {
    /// First description, or a changed one; samples before it cannot be unpacked and are `Rejected`. Samples of one before
    /// it may still come.
    Description(DeviceDescription),
    /// Before everything else of the new run.
    Reboot(Reboot),
    Block(Block),
    Gap(Gap),
    Edge(Edge),
    Status(Status),
    TimeReply(TimeReply),
    Text {
        host_ns: HostNs,
        text: String,
    },
    Rejected(Rejected),
}
