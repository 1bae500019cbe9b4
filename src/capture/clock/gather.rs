//! Collects from a device's captured frames what its clock map needs.

use std::collections::VecDeque;

use super::{BlockTimes, ClockPiece, NominalClock, TimeExchange, fit_clock};
use crate::capture::sample::{Captured, HostNs, TimeReply};

/// Requests that may be under way at once; older ones count as unanswered.
const N_PENDING: usize = 64;

/// Pairs time requests with their answers.
#[derive(Debug, Clone, Default)]
pub struct TimeRequests {
    pending: VecDeque<(u32, HostNs)>,
}

impl TimeRequests {
    /// A time request left at `host_ns`, stamped before it was written.
    pub fn requested(&mut self, host_ns: HostNs, token: u32) {
        if self.pending.len() == N_PENDING {
            self.pending.pop_front();
        }
        self.pending.push_back((token, host_ns));
    }

    /// The exchange that `reply` completes; `None` for a token nobody asked with, or that was answered before.
    pub fn replied(&mut self, reply: &TimeReply) -> Option<TimeExchange> {
        let place = self.pending.iter().rposition(|(token, _)| *token == reply.token)?;
        let (_, requested_host_ns) = self.pending.remove(place)?;
        Some(TimeExchange {
            boot_id: reply.boot_id,
            requested_host_ns,
            received_tick: reply.received_tick,
            sent_tick: reply.sent_tick,
            replied_host_ns: reply.host_ns,
        })
    }
}

/// Everything about a device's clock in a stretch of capture, for the two-sided map.
#[derive(Debug, Clone, Default)]
pub struct ClockSamples {
    pub arrivals: Vec<BlockTimes>,
    pub exchanges: Vec<TimeExchange>,
    requests: TimeRequests,
    nominal: Option<NominalClock>,
}

impl ClockSamples {
    /// A time request left at `host_ns`.
    pub fn requested(&mut self, host_ns: HostNs, token: u32) {
        self.requests.requested(host_ns, token);
    }

    /// Takes note of what a frame says about the clock; everything else passes.
    pub fn captured(&mut self, captured: &Captured) {
        match captured {
            Captured::Description(description) => self.nominal = Some(description.into()),
            Captured::Block(block) => self.arrivals.push(block.into()),
            Captured::TimeReply(reply) => self.exchanges.extend(self.requests.replied(reply)),
            _ => {}
        }
    }

    /// The two-sided map of everything collected; empty when the device was never described.
    pub fn fit(&self) -> Vec<ClockPiece> {
        self.nominal.map(|nominal| fit_clock(nominal, &self.arrivals, &self.exchanges)).unwrap_or_default()
    }
}
