//! Orders on their way to the recorder, in order, with a bound on what waits while it takes none.
//!
//! Orders about trials and pins are never left out, nor are the zeros a trial's values rest on: they are few, and no trial
//! is opened by hand while the bound is reached. Other events beyond the bound are counted, and the count is handed back
//! once the recorder takes orders again.

use std::collections::VecDeque;
use std::time::Instant;

use crossbeam_channel::Sender;

use crate::journal::Order;

/// Events that may wait: some minutes of a busy day. They are on the feed all the same.
pub const WAITING_MAX: usize = 4096;

#[derive(Debug)]
pub struct Outgoing {
    orders: Sender<Order>,
    waiting: VecDeque<Order>,
    n_left_out: u64,
}

impl Outgoing {
    pub fn new(orders: Sender<Order>) -> Self {
        Self { orders, waiting: VecDeque::new(), n_left_out: 0 }
    }

    /// The recorder takes nothing, and as much waits as may.
    pub fn is_full(&self) -> bool {
        self.waiting.len() >= WAITING_MAX
    }

    /// Puts an order in the queue; false if it was an event that found no room.
    pub fn push(&mut self, order: Order) -> bool {
        if self.is_full() && matches!(order, Order::Event { .. }) {
            self.n_left_out += 1;
            return false;
        }
        self.push_needed(order);
        true
    }

    /// Puts in the queue what a trial cannot do without, bound or not.
    pub fn push_needed(&mut self, order: Order) {
        self.waiting.push_back(order);
    }

    /// Hands on what the recorder takes; gives the number of events left out before, once nothing waits any more.
    pub fn send(&mut self) -> Option<u64> {
        while let Some(order) = self.waiting.pop_front() {
            if let Err(refused) = self.orders.try_send(order) {
                self.waiting.push_front(refused.into_inner());
                return None;
            }
        }
        let n_left_out = std::mem::take(&mut self.n_left_out);
        (n_left_out > 0).then_some(n_left_out)
    }

    /// The last orders, waited for until `deadline`; the recorder learns then that no more come.
    pub fn send_last(self, deadline: Instant) {
        for order in self.waiting {
            if self.orders.send_deadline(order, deadline).is_err() {
                return; // the recorder hangs in the disk or is gone; its farewell says so
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::journal::EventBody;
    use crossbeam_channel::bounded;

    fn event(host_ns: i64) -> Order {
        let (kind, source) = ("mark".to_owned(), "feed".to_owned());
        Order::Event { host_ns, event: EventBody { kind, source, person: None, text: String::new() } }
    }

    #[test]
    fn what_a_trial_needs_is_taken_beyond_the_bound_and_stays_in_order() {
        let (orders, taken) = bounded(2 * WAITING_MAX);
        let mut outgoing = Outgoing::new(orders);
        let n = WAITING_MAX as i64;
        assert!((0..n).all(|host_ns| outgoing.push(event(host_ns))));
        assert!(!outgoing.push(event(n)), "the bound");
        outgoing.push_needed(event(n + 1));
        assert_eq!(outgoing.send(), Some(1));
        assert_eq!(taken.try_iter().last(), Some(event(n + 1)));
    }

    #[test]
    fn while_the_recorder_hangs_events_are_bounded_and_what_is_left_out_is_counted() {
        let (orders, taken) = bounded(10);
        let mut outgoing = Outgoing::new(orders);
        let n = WAITING_MAX as i64 + 500;
        let kept = (0..n).filter(|host_ns| outgoing.push(event(*host_ns))).count();
        assert_eq!((kept, outgoing.is_full()), (WAITING_MAX, true));
        assert!(outgoing.push(Order::Pin { first_seq: Some(7) }), "what trials need is never left out");
        assert_eq!(outgoing.send(), None, "the queue takes ten");
        let mut heard = Vec::new();
        let told = loop {
            heard.extend(taken.try_iter());
            if let Some(n_left_out) = outgoing.send() {
                break n_left_out;
            }
        };
        heard.extend(taken.try_iter());
        assert_eq!(told, 500);
        assert_eq!(heard.len(), WAITING_MAX + 1);
        assert_eq!(heard[0], event(0), "in order");
        assert_eq!(heard[WAITING_MAX], Order::Pin { first_seq: Some(7) });
        assert_eq!(outgoing.send(), None, "told once");
    }
}
