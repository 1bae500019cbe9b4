//! How the journal does: what it weighs, how exposed it was, what it lost.

use crate::link::Lost;

use super::lately::Lately;

/// Measured, not promised.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Health {
    /// All segments of this journal and those kept of earlier ones, with what killed writers left reserved.
    pub own_bytes: u64,
    /// Events of links that were lost since the start.
    pub lost_events: u64,
    pub segments_given_up: u32,
    /// Of the disk, when it last said; `None` before that.
    pub free_bytes: Option<u64>,
    /// The file system can set room aside for closing records.
    pub reserve_possible: bool,
    /// Why nothing or only little can be written, while that stands.
    pub trouble: Option<String>,
    /// Longest time from a record's writing to the end of its sync, since the start.
    pub exposure_ns_max: i64,
    /// How long the oldest record has waited that is not on the disk now: grows while a sync hangs.
    pub exposure_ns_now: i64,
    exposures: Lately<i64>,
}

impl Health {
    /// The same, over the last ten seconds, with what is waiting now.
    pub fn exposure_ns_lately(&self) -> i64 {
        self.exposures.greatest().unwrap_or(0).max(self.exposure_ns_now)
    }

    pub(super) fn exposed_for(&mut self, exposure_ns: i64, now_ns: i64) {
        self.exposure_ns_max = self.exposure_ns_max.max(exposure_ns);
        self.exposures.add(now_ns, exposure_ns);
    }

    pub(super) fn forget_old(&mut self, now_ns: i64) {
        self.exposures.forget_old(now_ns);
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
