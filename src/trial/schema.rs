//! The trial file's tables and words, in one place. FORMAT.md says the same in prose.

use hdf5::Group;

use super::column::{Column, ROWS_PER_CHUNK};
use super::content::{AbsentEntry, BlockRow, ClockRow, EventRow, ExchangeRow, HostClocksRow, InstantEntry, TextLine};
use super::digest::DatasetDigest;
use super::error::TrialError;
use super::members::Members;
use super::scale;
use super::table::{Table, table};
use crate::capture::{Edge, Gap, Status};

pub(super) const FORMAT_NAME: &str = "tautrail-trial";
pub(super) const FORMAT_VERSION: u32 = 1;

/// Names within `/raw/<device>` that no channel may take.
pub(super) const RESERVED: [&str; 7] = ["blocks", "gaps", "rejected", "edges", "status", "text_lines", "descriptions"];

/// Lists of sentences within `/result`.
pub(super) const EVIDENCE: &str = "outcome_evidence";
pub(super) const FINDINGS: &str = "findings";
/// Names within `/result` that no derived number may take.
pub(super) const RESULT_RESERVED: [&str; 4] = [EVIDENCE, FINDINGS, "instants", "absent"];

table! {
    BlockTable of BlockRow {
        first_index: u64, "1", "first_index";
        first_tick: u64, "tick", "first_tick";
        sent_tick: u64, "tick", "sent_tick";
        host_ns: i64, "ns", "host_time";
        boot_id: u32, "1", "boot_id";
        sequence: u32, "1", "seq";
        n_samples: u32, "1", "n";
        overruns: u32, "1", "overruns";
        crc: u32, "1", "crc";
        layout: u16, "1", "layout";
        stream: u8, "1", "stream";
    }
}

table! {
    GapTable of Gap {
        host_ns: i64, "ns", "host_time";
        boot_id: u32, "1", "boot_id";
        stream: u8, "1", "stream";
        first_missing_index: u64, "1", "first_missing_index";
        n_missing: u64, "1", "n_missing";
    }
}

table! {
    EdgeTable of Edge {
        host_ns: i64, "ns", "host_time";
        boot_id: u32, "1", "boot_id";
        input: u8, "1", "input";
        rising: bool, "1", "rising";
        tick: u64, "tick", "tick";
    }
}

table! {
    StatusTable of Status {
        host_ns: i64, "ns", "host_time";
        boot_id: u32, "1", "boot_id";
        tick: u64, "tick", "tick";
        temperature_c: f32, "degC", "temperature";
        supply_v: f32, "V", "supply";
        excitation_v: f32, "V", "excitation";
        overruns: u32, "1", "overruns";
    }
}

table! {
    TextLineTable of TextLine {
        host_ns: i64, "ns", "host_time";
        text: String, "", "text";
    }
}

/// Where the bytes of one refusal lie in `/raw/<device>/rejected/bytes`.
pub(super) struct RejectedRow {
    pub(super) host_ns: i64,
    pub(super) reason: String,
    pub(super) offset: u64,
    pub(super) length: u32,
}

table! {
    RejectedTable of RejectedRow {
        host_ns: i64, "ns", "host_time";
        reason: String, "", "reason";
        offset: u64, "byte", "offset";
        length: u32, "byte", "length";
    }
}

table! {
    ClockTable of ClockRow {
        origin_tick: u64, "tick", "origin_tick";
        host_ns_at_origin: f64, "ns", "host_time_at_origin";
        ns_per_tick: f64, "ns/tick", "period";
        standard_uncertainty_ns: f64, "ns", "standard_uncertainty";
        asymmetry_ns: f64, "ns", "asymmetry";
        boot_id: u32, "1", "boot_id";
        first_tick: u64, "tick", "first_tick";
        last_tick: u64, "tick", "last_tick";
        two_way: bool, "1", "two_way";
    }
}

table! {
    ExchangeTable of ExchangeRow {
        requested_host_ns: i64, "ns", "requested_host_time";
        replied_host_ns: i64, "ns", "replied_host_time";
        received_tick: u64, "tick", "received_tick";
        sent_tick: u64, "tick", "sent_tick";
        boot_id: u32, "1", "boot_id";
        residual_ns: f64, "ns", "residual";
    }
}

table! {
    HostClocksTable of HostClocksRow {
        monotonic_ns: i64, "ns", "monotonic";
        monotonic_raw_ns: i64, "ns", "monotonic_raw";
        boottime_ns: i64, "ns", "boottime";
        realtime_ns: i64, "ns", "realtime";
    }
}

table! {
    EventTable of EventRow {
        time_s: f64, "s", "time";
        kind: String, "", "kind";
        source: String, "", "source";
        person: String, "", "person";
        text: String, "", "text";
    }
}

table! {
    InstantTable of InstantEntry {
        time_s: f64, "s", "time";
        standard_uncertainty_s: f64, "s", "standard_uncertainty";
        name: String, "", "name";
        evidence: String, "", "evidence";
    }
}

table! {
    AbsentTable of AbsentEntry {
        name: String, "", "name";
        reason: String, "", "reason";
    }
}

impl EventTable {
    /// Ends the table with its time column as the axis of the others.
    pub(super) fn finish_on_axis(self) -> Result<(), TrialError> {
        let time = self.time_s.dataset().clone();
        let texts = [&self.kind, &self.source, &self.person, &self.text].map(|column| column.dataset().clone());
        scale::attach(&time, "time", &texts.iter().collect::<Vec<_>>())?;
        self.finish("events")?;
        Ok(())
    }
}
