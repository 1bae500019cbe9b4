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
    pub reason: &'static str,
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

/// What decoding yields, in order of arrival.
#[derive(Debug, Clone, PartialEq)]
pub enum Captured {
    /// First description, or a changed one; samples before it cannot be unpacked and are `Rejected`.
    Description(DeviceDescription),
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
