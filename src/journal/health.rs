//! How the journal does: what it weighs, how exposed it was, what it lost.

use std::collections::VecDeque;

use crate::link::Lost;

/// How far back "lately" reaches.
const LATELY_NS: i64 = 10_000_000_000;

/// Measured, not promised.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Health {
    /// All segments of this journal and those kept of earlier ones, with what killed writers left reserved.
    pub own_bytes: u64,
    /// Events of links that were lost since the start.
    pub lost_events: u64,
    pub segments_given_up: u32,
    /// Of the disk, when it was last asked.
    pub free_bytes: u64,
    /// The file system can set room aside for closing records.
    pub reserve_possible: bool,
    /// Why nothing or only little can be written, while that stands.
    pub trouble: Option<String>,
    /// Longest time from a record's writing to the end of its sync, since the start.
    pub exposure_ns_max: i64,
    /// How long the oldest record has waited that is not on the disk now: grows while a sync hangs.
    pub exposure_ns_now: i64,
    /// (when, how long), of the last seconds.
    exposures: VecDeque<(i64, i64)>,
}

impl Health {
    /// The same, over the last ten seconds, with what is waiting now.
    pub fn exposure_ns_lately(&self) -> i64 {
        let ended = self.exposures.iter().map(|&(_, exposure_ns)| exposure_ns).max();
        ended.unwrap_or(0).max(self.exposure_ns_now)
    }

    pub(super) fn exposed_for(&mut self, exposure_ns: i64, now_ns: i64) {
        self.exposure_ns_max = self.exposure_ns_max.max(exposure_ns);
        // Only the greatest of what follows matters.
        while self.exposures.back().is_some_and(|&(_, earlier_ns)| earlier_ns <= exposure_ns) {
            self.exposures.pop_back();
        }
        self.exposures.push_back((now_ns, exposure_ns));
        self.forget_old(now_ns);
    }

    pub(super) fn forget_old(&mut self, now_ns: i64) {
        while self.exposures.front().is_some_and(|&(at_ns, _)| at_ns < now_ns - LATELY_NS) {
            self.exposures.pop_front();
        }
    }
}

/// What one device lost and was not told yet.
#[derive(Debug, Default)]
pub(super) struct Loss {
    untold: Option<Lost>,
    pub n_events_ever: u64,
}

impl Loss {
    pub fn add(&mut self, lost: Lost) {
        self.n_events_ever += lost.n_events;
        self.untold = Some(self.untold.map_or(lost, |untold| untold.join(lost)));
    }

    pub fn take(&mut self) -> Option<Lost> {
        self.untold.take()
    }
}
