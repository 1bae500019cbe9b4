//! Which run of a device a frame is of, also where the device starts again under a boot id that it had before.
//!
//! Two runs under one id would be joined into one that never was: indices, ticks and clock map of both mixed. So the
//! order of the frames is watched as well, for within a boot neither sequences nor ticks at send go back. A run that
//! reuses an id is given another one, which is said wherever reboots are said.

use std::collections::VecDeque;

use crate::capture::sample::RebootSeen;

/// Ids that later boots are compared with; a device that boots more often than this within one recording may get an old
/// one again.
const N_REMEMBERED: usize = 64;
/// Steps from a reused id to the one that stands for it (the golden ratio of 2^32: far from counters and from random ids).
const STEP: u32 = 0x9E37_79B9;
/// A tick at send this far back, after a sequence fell back, is a new start.
const BACK_S: f64 = 0.01;
/// A tick at send this far back, twice in a row, is a clock that started anew whatever the sequences say.
const FAR_BACK_S: f64 = 1.0;

/// What a tick at send says of the boot.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum TickSays {
    GoesOn,
    /// Far behind, for the first time: one faulty frame, or the first of a clock that started anew.
    Behind,
    Anew(RebootSeen),
}

/// Follows the boots of one device.
#[derive(Debug, Default)]
pub(super) struct Boots {
    received: Option<u32>,
    named: u32,
    used: VecDeque<u32>,
    /// A sequence fell back, and no tick at send has told yet whether the device started again.
    fell_back: bool,
}

impl Boots {
    /// The id under which the frames now coming are recorded; `None` before the first.
    pub(super) fn named(&self) -> Option<u32> {
        self.received.map(|_| self.named)
    }

    /// Takes a frame's boot id. Where it begins another boot: how that was seen.
    pub(super) fn follow(&mut self, received: u32) -> Option<RebootSeen> {
        if self.received == Some(received) {
            return None;
        }
        let first = self.received.is_none();
        let seen = if self.used.contains(&received) { RebootSeen::IdOfAnEarlierBoot } else { RebootSeen::NewId };
        self.received = Some(received);
        self.begin(received);
        (!first).then_some(seen)
    }

    /// Begins a run under the received id, or under one that stands for it.
    fn begin(&mut self, received: u32) {
        self.named = received;
        while self.used.contains(&self.named) {
            self.named = self.named.wrapping_add(STEP);
        }
        if self.used.len() == N_REMEMBERED {
            self.used.pop_front();
        }
        self.used.push_back(self.named);
        self.fell_back = false;
    }

    /// A sequence fell back; true where that is new.
    pub(super) fn sequence_fell_back(&mut self) -> bool {
        !std::mem::replace(&mut self.fell_back, true)
    }

    /// Takes a tick at send and the newest one before it from the same source; `again`: the frame before was behind too.
    pub(super) fn sent(&mut self, tick: u64, newest: Option<u64>, again: bool, tick_rate_hz: f64) -> TickSays {
        let back_s = newest.map_or(0.0, |newest| newest.saturating_sub(tick) as f64 / tick_rate_hz);
        let seen = if self.fell_back && back_s > BACK_S {
            RebootSeen::OldId
        } else if back_s <= FAR_BACK_S {
            self.fell_back = false;
            return TickSays::GoesOn;
        } else if again {
            RebootSeen::ClockAnew
        } else {
            return TickSays::Behind;
        };
        self.begin(self.received.unwrap_or_default());
        TickSays::Anew(seen)
    }

    /// What came so far was no part of the recording.
    pub(super) fn start_here(&mut self) {
        self.fell_back = false;
    }
}
