//! The two queues that links fill, and the count of what a full one cost.
//!
//! Toward the journal nothing is dropped silently: what finds the queue full is counted, and told through the same queue
//! as soon as there is room. Toward the live view the newest is dropped and counted.

use crossbeam_channel::{Sender, TrySendError};
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

/// Both queues.
#[derive(Debug, Clone)]
pub struct Sinks {
    pub journal: Sender<FromLinks>,
    pub live: Sender<FromLinks>,
}

/// One task's end of the queues, with its own counts. Never blocks.
#[derive(Debug)]
pub(super) struct Outlet {
    device: DeviceIdx,
    journal: Queue,
    live: Queue,
}

#[derive(Debug)]
struct Queue {
    sender: Sender<FromLinks>,
    untold: Option<Lost>,
}

impl Outlet {
    pub fn new(device: DeviceIdx, sinks: Sinks) -> Self {
        let queue = |sender| Queue { sender, untold: None };
        Self { device, journal: queue(sinks.journal), live: queue(sinks.live) }
    }

    pub fn send(&mut self, host_ns: i64, what: LinkWhat) {
        let event = LinkEvent { host_ns, device: self.device, what };
        self.live.send(event.clone());
        self.journal.send(event);
    }

    /// A heartbeat that finds a queue full is not missed there: what filled the queue shows the time.
    pub fn heartbeat(&mut self, host_ns: i64) {
        let _ = self.live.sender.try_send(FromLinks::Heartbeat { host_ns });
        let _ = self.journal.sender.try_send(FromLinks::Heartbeat { host_ns });
    }
}

impl Queue {
    fn send(&mut self, event: LinkEvent) {
        if let Some(lost) = self.untold.take()
            && self.sender.try_send(FromLinks::Lost { device: event.device, lost }).is_err()
        {
            self.untold = Some(lost.join(Lost::of(&event)));
            return;
        }
        match self.sender.try_send(FromLinks::Event(event)) {
            // A receiver that is gone was stopped or has died: the daemon ends, nothing is told to nobody.
            Ok(()) | Err(TrySendError::Disconnected(_)) => {}
            Err(TrySendError::Full(FromLinks::Event(event))) => self.untold = Some(Lost::of(&event)),
            Err(TrySendError::Full(_)) => {}
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use bytes::Bytes;

    #[test]
    fn what_a_full_queue_cost_is_told_before_the_next_event() {
        let (journal, journal_end) = crossbeam_channel::bounded(2);
        let (live, _live_end) = crossbeam_channel::bounded(100);
        let mut outlet = Outlet::new(DeviceIdx(3), Sinks { journal, live });
        for i in 0..5 {
            outlet.send(i, LinkWhat::Bytes(Bytes::from_static(b"abc")));
        }
        assert_eq!(journal_end.try_iter().count(), 2);
        outlet.send(9, LinkWhat::Bytes(Bytes::from_static(b"abc")));
        let told: Vec<FromLinks> = journal_end.try_iter().collect();
        let lost = Lost { n_events: 3, n_bytes: 9, first_host_ns: 2, last_host_ns: 4 };
        assert_eq!(told[0], FromLinks::Lost { device: DeviceIdx(3), lost });
        assert!(matches!(&told[1], FromLinks::Event(LinkEvent { host_ns: 9, .. })));
    }
}
