//! The host's monotonic clock, passed in so that tests own the time.

use std::fmt::Debug;

use rustix::time::{ClockId, clock_gettime};

/// CLOCK_MONOTONIC or its stand-in.
pub trait HostClock: Send + Sync + Debug {
    /// Nanoseconds; never goes back.
    fn monotonic_ns(&self) -> i64;
}

/// The machine's own clock.
#[derive(Debug, Clone, Copy, Default)]
pub struct SystemClock;

impl HostClock for SystemClock {
    fn monotonic_ns(&self) -> i64 {
        let now = clock_gettime(ClockId::Monotonic);
        now.tv_sec * 1_000_000_000 + now.tv_nsec
    }
}
