//! The two queues that links fill, and the count of what a full one cost.
//!
//! Toward the journal nothing is dropped silently: what finds the queue full is counted, and told through the same queue
//! as soon as there is room. Toward the live view the newest is dropped and counted.

use crossbeam_channel::{Sender, TrySendError};

use super::{DeviceIdx, FromLinks, LinkEvent, LinkWhat, Lost};

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
