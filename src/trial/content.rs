//! What goes into a trial file, as plain data. The writer streams the large parts.

use jiff::civil::Date;

use super::link_health::LinkHealth;
use crate::capture::{Counts, DeviceDescription, Edge, Encoding, Gap, Status};

/// Everything about a trial that is known before its samples are written.
#[derive(Debug, Clone, PartialEq)]
pub struct Header {
    /// Running number and random part: `000012-7f3a9c`.
    pub trial_id: String,
    pub journal_id: String,
    /// First and last record of the journal that belong to the trial.
    pub first_seq: u64,
    pub last_seq: u64,
    pub rig: String,
    /// RFC 3339 with offset; the quality says whether the wall clock was ever set.
    pub started: String,
    pub started_quality: String,
    pub program_version: String,
    /// SHA-256 of the rig file's text, lower-case hex.
    pub configuration_hash: String,
    pub series: String,
    /// Host monotonic time that is second zero of every time axis.
    pub zero_host_ns: i64,
}

impl Header {
    /// The trial's day in UTC; none where the wall clock was never set.
    pub fn day(&self) -> Option<Date> {
        let started: jiff::Timestamp = self.started.parse().ok()?;
        (self.started_quality == "set").then(|| jiff::tz::Offset::UTC.to_datetime(started).date())
    }
}

/// One row of `/raw/<device>/blocks`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct BlockRow {
    pub first_index: u64,
    pub first_tick: u64,
    pub sent_tick: u64,
    pub host_ns: i64,
    pub boot_id: u32,
    pub sequence: u32,
    pub n_samples: u32,
    /// Samples the device itself had dropped since boot.
    pub overruns: u32,
    pub crc: u32,
    /// Which layout of the device's channels the block was packed by.
    pub layout: u16,
    pub stream: u8,
}

/// One raw channel of a device: where its counts are and which blocks they came in.
#[derive(Debug, Clone, PartialEq)]
pub struct RawChannel {
    pub device: String,
    /// The channel's name in the device's description.
    pub name: String,
    /// The dataset's name in the file; differs from `name` where that cannot be one or the layout changed.
    pub dataset: String,
    pub stream: u8,
    pub layout: u16,
    pub encoding: Encoding,
    pub n_counts: usize,
}

/// A raw channel with its counts, in the order of its blocks.
#[derive(Debug, Clone, PartialEq)]
pub struct RawCounts {
    pub channel: RawChannel,
    pub counts: Counts,
}

/// A piece of a device's clock map: `host_ns = host_ns_at_origin + (tick − origin_tick) · ns_per_tick`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ClockRow {
    pub origin_tick: u64,
    pub host_ns_at_origin: f64,
    pub ns_per_tick: f64,
    pub standard_uncertainty_ns: f64,
    /// How far off the map may be for all that two-way timing can see.
    pub asymmetry_ns: f64,
    pub boot_id: u32,
    pub first_tick: u64,
    pub last_tick: u64,
    /// Bounded by answered time requests; else by arrivals alone.
    pub two_way: bool,
}

/// One time request and its answer, with what the clock map leaves unexplained.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ExchangeRow {
    pub requested_host_ns: i64,
    pub replied_host_ns: i64,
    pub received_tick: u64,
    pub sent_tick: u64,
    pub boot_id: u32,
    /// Middle of the exchange on the host minus the map at the middle of the device's ticks.
    pub residual_ns: f64,
}

/// The host's four clocks, read together.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct HostClocksRow {
    pub monotonic_ns: i64,
    pub monotonic_raw_ns: i64,
    pub boottime_ns: i64,
    pub realtime_ns: i64,
}

/// One row of `/events`.
#[derive(Debug, Clone, PartialEq)]
pub struct EventRow {
    /// Seconds since the trial's zero.
    pub time_s: f64,
    pub kind: String,
    pub source: String,
    pub person: String,
    pub text: String,
}

/// A line of text that a device sent.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct TextLine {
    pub host_ns: i64,
    pub text: String,
}

/// Bytes that were refused, as received.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct RefusedBytes {
    pub host_ns: i64,
    pub reason: String,
    pub bytes: Vec<u8>,
}

/// What a device said and lost beside its samples.
#[derive(Debug, Clone, PartialEq)]
pub struct DeviceRecord {
    pub device: String,
    pub descriptions: Vec<DeviceDescription>,
    pub gaps: Vec<Gap>,
    pub edges: Vec<Edge>,
    pub statuses: Vec<Status>,
    pub text_lines: Vec<TextLine>,
    pub rejected: Vec<RefusedBytes>,
    /// Refusals beyond the cap, counted only.
    pub rejected_not_kept: u64,
    /// Absent in files of earlier versions.
    pub link: Option<LinkHealth>,
}

/// A text carried whole: rig file, card, record.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct CarriedText {
    pub name: String,
    pub text: String,
}

/// A carried text and the SHA-256 it was sealed with, lower-case hex.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct SealedText {
    pub text: CarriedText,
    pub sealed: String,
}

/// A quantity derived by the reading, with its own uncertainty at every sample.
#[derive(Debug, Clone, PartialEq)]
pub struct DerivedSignal {
    pub name: String,
    pub unit: String,
    /// How it was obtained, in words.
    pub method: String,
    pub time_s: Vec<f64>,
    pub value: Vec<f64>,
    pub standard_uncertainty: Vec<f64>,
}

/// One derived number, as stored in `/result`.
#[derive(Debug, Clone, PartialEq)]
pub struct ResultEntry {
    pub name: String,
    pub value: f64,
    pub unit: String,
    pub standard_uncertainty: f64,
    /// Limits of the 95 % coverage interval.
    pub low: f64,
    pub high: f64,
    pub method: String,
    /// Shares of the standard uncertainty, in the result's unit, by source; they add in quadrature.
    pub budget: Vec<(String, f64)>,
}

/// An instant of the trial, as stored in `/result/instants`.
#[derive(Debug, Clone, PartialEq)]
pub struct InstantEntry {
    pub name: String,
    pub time_s: f64,
    pub standard_uncertainty_s: f64,
    pub evidence: String,
}

/// A result that could not be had, as stored in `/result/absent`.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct AbsentEntry {
    pub name: String,
    pub reason: String,
}

/// All that a reading found.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct ResultSet {
    pub outcome: String,
    /// Sentences, each one piece of evidence.
    pub outcome_evidence: Vec<String>,
    /// Disagreements and oddities that a person should look at.
    pub findings: Vec<String>,
    pub entries: Vec<ResultEntry>,
    pub instants: Vec<InstantEntry>,
    pub absent: Vec<AbsentEntry>,
}

/// A condition of the trial (air density, head wind, …), as stored in `/notes/conditions`.
#[derive(Debug, Clone, PartialEq)]
pub struct Condition {
    pub name: String,
    pub value: f64,
    pub unit: String,
    /// Who or what says so.
    pub source: String,
}
