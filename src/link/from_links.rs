//! What comes out of the links' thread, and what a full queue cost.

use serde::{Deserialize, Serialize};

use super::{DeviceIdx, LinkEvent, LinkWhat};

/// What comes out of the links' thread, in order.
#[derive(Debug, Clone, PartialEq)]
pub enum FromLinks {
    Event(LinkEvent),
    /// What a full queue cost this device before now.
    Lost {
        device: DeviceIdx,
        lost: Lost,
    },
    /// Every 20 ms, in order with the events: silence replays as it was.
    Heartbeat {
        host_ns: i64,
    },
}

/// Events that were dropped, between two times.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct Lost {
    pub n_events: u64,
    pub n_bytes: u64,
    pub first_host_ns: i64,
    pub last_host_ns: i64,
}

impl Lost {
    /// One event.
    pub fn of(event: &LinkEvent) -> Self {
        let n_bytes = if let LinkWhat::Bytes(bytes) = &event.what { bytes.len() as u64 } else { 0 };
        Self { n_events: 1, n_bytes, first_host_ns: event.host_ns, last_host_ns: event.host_ns }
    }

    pub fn join(self, later: Self) -> Self {
        Self {
            n_events: self.n_events + later.n_events,
            n_bytes: self.n_bytes + later.n_bytes,
            first_host_ns: self.first_host_ns,
            last_host_ns: later.last_host_ns,
        }
    }
}
