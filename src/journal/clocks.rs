//! The machine's four clocks, read together.

use rustix::time::{ClockId, clock_gettime};

use super::Clocks;

/// Wall-clock times before this, 2025-01-01T00:00:00Z, were never set: the program is younger.
const YOUNGEST_UNSET_NS: i64 = 1_735_689_600_000_000_000;

impl Clocks {
    /// Reads the machine's clocks one after the other, within about a microsecond.
    pub fn read() -> Self {
        let ns = |id| {
            let time = clock_gettime(id);
            time.tv_sec * 1_000_000_000 + time.tv_nsec
        };
        let realtime_ns = ns(ClockId::Realtime);
        Self {
            monotonic_ns: ns(ClockId::Monotonic),
            monotonic_raw_ns: ns(ClockId::MonotonicRaw),
            boottime_ns: ns(ClockId::Boottime),
            realtime_ns,
            wall_clock_set: realtime_ns >= YOUNGEST_UNSET_NS,
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_boot_clock_is_never_behind_the_monotonic_one() {
        // clock_gettime(2): CLOCK_BOOTTIME also counts suspended time
        let clocks = Clocks::read();
        assert!(clocks.boottime_ns + 1_000_000 >= clocks.monotonic_ns, "{clocks:?}");
    }
}
