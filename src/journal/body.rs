//! What records say: the kinds, their payloads, and the way back. FORMAT.md gives the bytes.

use bytes::Bytes;
use serde::{Deserialize, Serialize};

use crate::link::{DeviceIdx, LinkWhat, Lost};

use super::frame::{self, RawRecord, array};

/// Version of the whole format; a reader refuses a later one.
pub const FORMAT_VERSION: u32 = 1;

/// A record as read back.
#[derive(Debug, Clone, PartialEq)]
pub struct Record {
    pub seq: u64,
    /// CLOCK_MONOTONIC of what the record tells, not of its writing.
    pub host_ns: i64,
    /// The device it is about; 0 where it is about none.
    pub device: DeviceIdx,
    pub body: Body,
}

#[derive(Debug, Clone, PartialEq)]
pub enum Body {
    /// First in every segment; does not use up a sequence number of its own.
    SegmentOpen(Box<SegmentOpen>),
    Link(LinkWhat),
    Heartbeat,
    Clocks(Clocks),
    TrialOpen(TrialOpen),
    TrialClose(TrialClose),
    Event(EventBody),
    Lost(Lost),
    /// A kind this version does not know, kept as it is.
    Unknown {
        kind: u8,
        payload: Vec<u8>,
    },
}

/// Everything needed to decode from the start of a segment.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct SegmentOpen {
    pub format_version: u32,
    pub journal_id: String,
    pub segment: u32,
    /// Sequence number of the first record after this one.
    pub first_seq: u64,
    pub program_version: String,
    pub kernel_boot_id: String,
    pub rig_text: String,
    /// In the order of the rig file: `devices[i]` is device i.
    pub devices: Vec<DeviceAtOpen>,
    /// A trial was under way.
    pub open_trial: Option<String>,
    /// Why the segment before was given up, when it was; its unsynced records are repeated here.
    pub previous_given_up: Option<String>,
    /// What trials need of this segment stays until a person lets it go, however they end.
    #[serde(default)]
    pub keep: bool,
}

#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct DeviceAtOpen {
    pub name: String,
    pub port: String,
    /// Frames that described the device's present boot, the last of each of the last four description ids, oldest first,
    /// delimiters included, lower-case hex; empty before the first.
    pub describe_hex: String,
}

impl DeviceAtOpen {
    /// The describe frames as received; `None` before the first or when the hex is damaged.
    pub fn describe(&self) -> Option<Vec<u8>> {
        if self.describe_hex.is_empty() || !self.describe_hex.is_ascii() {
            return None;
        }
        let digits = self.describe_hex.as_bytes().chunks(2);
        digits.map(|pair| std::str::from_utf8(pair).ok().and_then(|pair| u8::from_str_radix(pair, 16).ok())).collect()
    }
}

/// The machine's clocks, read together.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct Clocks {
    pub monotonic_ns: i64,
    pub monotonic_raw_ns: i64,
    pub boottime_ns: i64,
    pub realtime_ns: i64,
    /// False: the wall clock was never set since the machine started, its time means nothing.
    pub wall_clock_set: bool,
}

#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct TrialOpen {
    /// Running number and random part.
    pub trial_id: String,
    /// The trial's first record: it reaches back before this one.
    pub first_seq: u64,
    pub first_host_ns: i64,
    pub reason: String,
    /// Who opened it by command; empty when it opened by itself.
    pub person: String,
    /// The trial that a lost machine left unfinished under the same tension, if any.
    pub continues: Option<String>,
}

#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct TrialClose {
    pub trial_id: String,
    pub reason: String,
    pub person: String,
}

#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct EventBody {
    /// As on the feed: `phase`, `alarm`, `link`, `trial`, `seal`, `mark`, `note`, `journal`, …
    pub kind: String,
    pub source: String,
    pub person: Option<String>,
    pub text: String,
}

pub(super) mod kind {
    pub const SEGMENT_OPEN: u8 = 1;
    pub const LINK_UP: u8 = 2;
    pub const BYTES: u8 = 3;
    pub const TIME_REQUESTED: u8 = 4;
    pub const LINK_DOWN: u8 = 5;
    pub const HEARTBEAT: u8 = 6;
    pub const CLOCKS: u8 = 7;
    pub const TRIAL_OPEN: u8 = 8;
    pub const TRIAL_CLOSE: u8 = 9;
    pub const EVENT: u8 = 10;
    pub const LOST: u8 = 11;
    pub const LINK_NOTE: u8 = 12;
}

#[derive(Serialize, Deserialize)]
struct UpPayload {
    path: String,
    baud: u32,
}

impl Body {
    /// Kind and payload as written.
    fn encode(&self) -> (u8, Vec<u8>) {
        match self {
            Self::SegmentOpen(open) => (kind::SEGMENT_OPEN, json(open)),
            Self::Link(LinkWhat::Up { path, baud }) => {
                (kind::LINK_UP, json(&UpPayload { path: path.clone(), baud: *baud }))
            }
            Self::Link(LinkWhat::Bytes(bytes)) => (kind::BYTES, bytes.to_vec()),
            Self::Link(LinkWhat::TimeRequested { token }) => (kind::TIME_REQUESTED, token.to_le_bytes().to_vec()),
            Self::Link(LinkWhat::Down { reason }) => (kind::LINK_DOWN, reason.as_bytes().to_vec()),
            Self::Link(LinkWhat::Note { text }) => (kind::LINK_NOTE, text.as_bytes().to_vec()),
            Self::Heartbeat => (kind::HEARTBEAT, Vec::new()),
            Self::Clocks(clocks) => (kind::CLOCKS, json(clocks)),
            Self::TrialOpen(open) => (kind::TRIAL_OPEN, json(open)),
            Self::TrialClose(close) => (kind::TRIAL_CLOSE, json(close)),
            Self::Event(event) => (kind::EVENT, json(event)),
            Self::Lost(lost) => (kind::LOST, json(lost)),
            Self::Unknown { kind, payload } => (*kind, payload.clone()),
        }
    }

    /// True for what must reach the disk at once.
    pub(super) fn is_urgent(&self) -> bool {
        matches!(
            self,
            Self::TrialOpen(_)
                | Self::TrialClose(_)
                | Self::Event(_)
                | Self::Lost(_)
                | Self::Link(LinkWhat::Up { .. } | LinkWhat::Down { .. })
        )
    }
}

impl Record {
    /// Appends the record as it is written on disk.
    pub fn encode(&self, out: &mut Vec<u8>) {
        let (kind, payload) = self.body.encode();
        frame::encode(kind, self.device.0, self.seq, self.host_ns, &payload, out);
    }

    /// Understands a sound record. A payload that does not parse is kept as [`Body::Unknown`].
    pub(super) fn from_raw(raw: RawRecord) -> Self {
        let body = decode(raw.kind, &raw.payload).unwrap_or(Body::Unknown { kind: raw.kind, payload: raw.payload });
        Self { seq: raw.seq, host_ns: raw.host_ns, device: DeviceIdx(raw.device), body }
    }
}

fn decode(kind: u8, payload: &[u8]) -> Option<Body> {
    Some(match kind {
        kind::SEGMENT_OPEN => Body::SegmentOpen(Box::new(parse(payload)?)),
        kind::LINK_UP => {
            let up: UpPayload = parse(payload)?;
            Body::Link(LinkWhat::Up { path: up.path, baud: up.baud })
        }
        kind::BYTES => Body::Link(LinkWhat::Bytes(Bytes::copy_from_slice(payload))),
        kind::TIME_REQUESTED if payload.len() == 4 => {
            Body::Link(LinkWhat::TimeRequested { token: u32::from_le_bytes(array(payload)) })
        }
        kind::LINK_DOWN => Body::Link(LinkWhat::Down { reason: String::from_utf8_lossy(payload).into_owned() }),
        kind::LINK_NOTE => Body::Link(LinkWhat::Note { text: String::from_utf8_lossy(payload).into_owned() }),
        kind::HEARTBEAT => Body::Heartbeat,
        kind::CLOCKS => Body::Clocks(parse(payload)?),
        kind::TRIAL_OPEN => Body::TrialOpen(parse(payload)?),
        kind::TRIAL_CLOSE => Body::TrialClose(parse(payload)?),
        kind::EVENT => Body::Event(parse(payload)?),
        kind::LOST => Body::Lost(parse(payload)?),
        _ => return None,
    })
}

fn parse<T: serde::de::DeserializeOwned>(payload: &[u8]) -> Option<T> {
    serde_json::from_slice(payload).ok()
}

/// These types have string keys and no maps: writing them cannot fail. An empty payload would be read as `Unknown`.
fn json(value: &impl Serialize) -> Vec<u8> {
    serde_json::to_vec(value).unwrap_or_default()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_body_comes_back_as_it_was() {
        let bodies = [
            Body::Link(LinkWhat::Up { path: "/dev/ttyACM0".into(), baud: 921_600 }),
            Body::Link(LinkWhat::Bytes(Bytes::from_static(b"\x00\x01\xff"))),
            Body::Link(LinkWhat::TimeRequested { token: 0xdead_beef }),
            Body::Link(LinkWhat::Note { text: "its adapter hands bytes over within 1 ms".into() }),
            Body::Link(LinkWhat::Down { reason: "link lost: the far end closed".into() }),
            Body::Heartbeat,
            Body::Lost(Lost { n_events: 3, n_bytes: 4, first_host_ns: 5, last_host_ns: 6 }),
            Body::TrialClose(TrialClose { trial_id: "000001-abc123".into(), reason: "rest".into(), person: "".into() }),
            Body::Unknown { kind: 200, payload: vec![1, 2] },
        ];
        for body in bodies {
            let (kind, payload) = body.encode();
            let raw = RawRecord { kind, device: 1, seq: 2, host_ns: 3, payload };
            assert_eq!(Record::from_raw(raw).body, body);
        }
    }

    #[test]
    fn a_describe_frame_survives_its_hex() {
        let device = |hex: &str| DeviceAtOpen { name: "a".into(), port: "b".into(), describe_hex: hex.into() };
        assert_eq!(device("00ff10").describe(), Some(vec![0, 255, 16]));
        assert_eq!(device("").describe(), None);
        assert_eq!(device("0g").describe(), None);
        assert_eq!(device("ü0").describe(), None);
    }
}
