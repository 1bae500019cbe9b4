//! What goes into a trial file, as plain data. The writer streams the large parts.

use crate::capture::{Counts, DeviceDescription, Gap, Rejected};

/// Everything about a trial that is known before its samples are written.
#[derive(Debug, Clone, PartialEq)]
pub struct Header {
    /// Running number and random part: `000012-7f3a9c`.
    pub trial_id: String,
    pub journal_id: String,
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
    pub crc: u32,
    pub stream: u8,
}

/// One raw channel of a device.
#[derive(Debug, Clone, PartialEq)]
pub struct RawChannel {
    pub device: String,
    pub name: String,
    pub counts: Counts,
}

/// A piece of a device's clock map: `host_ns = host_ns_at_origin + (tick − origin_tick) · ns_per_tick`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ClockRow {
    pub origin_tick: u64,
    pub host_ns_at_origin: f64,
    pub ns_per_tick: f64,
    pub standard_uncertainty_ns: f64,
    pub boot_id: u32,
    pub first_tick: u64,
    pub last_tick: u64,
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

/// Per device: description, gaps, refusals.
#[derive(Debug, Clone, PartialEq)]
pub struct DeviceRecord {
    pub device: String,
    pub descriptions: Vec<DeviceDescription>,
    pub gaps: Vec<Gap>,
    pub rejected: Vec<Rejected>,
    /// Refusals beyond the cap, counted only.
    pub rejected_not_kept: u64,
}

/// A text carried whole: rig file, card, record.
#[derive(Debug, Clone, PartialEq)]
pub struct CarriedText {
    pub name: String,
    pub text: String,
}
