//! A device's printed time to ticks that never run backward within a boot.
//!
//! A counter that wraps is carried on, over several turns by the host's time; one that begins again is a new boot. One
//! line whose time does not fit the lines around it (a damaged digit) is refused and changes nothing.

/// Printed time may run ahead of the host's by this, and by a part of the time passed (±1 % resonators, generously).
const AHEAD_NS: f64 = 2e9;
/// And by this once so many lines were heard that one of them was prompt (an adapter's 16 ms and the host's, generously).
const AHEAD_SETTLED_NS: f64 = 5e7;
const N_SETTLED: u32 = 50;
const AHEAD_PART: f64 = 0.05;

/// A time that goes back by less than this follows a damaged digit that passed as a little ahead: lines are refused until
/// they have caught up. A board that boots goes back by more.
const STEPS_BACK_NS: u64 = 100_000_000;

/// A line's time among the lines before it.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Placed {
    /// Nanoseconds of the device's time.
    Tick(u64),
    /// The device's time began again.
    NewBoot(u64),
    Refused(&'static str),
}

pub const STANDS_STILL: &str = "device time stands still";
pub const JUMPS: &str = "device time jumps";
pub const BEYOND_WRAP: &str = "device time beyond its wrap";

#[derive(Debug, Clone, Copy)]
struct Seen {
    printed_ns: u64,
    tick: u64,
    host_ns: i64,
}

/// Follows one device's printed time.
#[derive(Debug, Clone, Default)]
pub struct PrintedTime {
    /// Where the counter begins again at 0.
    pub wrap_ns: Option<u64>,
    last: Option<Seen>,
    /// The last line, if its time did not fit.
    odd: Option<Seen>,
    /// Least of host time less ticks in this boot: the promptest line. It rises by a part of the time passed, for clocks that
    /// run slow.
    least_offset_ns: f64,
    /// In this boot.
    n_lines: u32,
}

impl PrintedTime {
    pub fn wrapping_at(wrap_ns: Option<u64>) -> Self {
        Self { wrap_ns, ..Self::default() }
    }

    pub fn place(&mut self, printed_ns: u64, host_ns: i64) -> Placed {
        if self.wrap_ns.is_some_and(|wrap_ns| printed_ns >= wrap_ns) {
            return Placed::Refused(BEYOND_WRAP);
        }
        let Some(last) = self.last else { return self.begin(printed_ns, host_ns) };
        if printed_ns == last.printed_ns && self.turns(last, printed_ns, host_ns) == 0 {
            return Placed::Refused(STANDS_STILL);
        }
        let tick = self.onward(last, printed_ns, host_ns).filter(|tick| self.fits(last, *tick, host_ns));
        let Some(tick) = tick else { return self.does_not_fit(printed_ns, host_ns) };
        self.odd = None;
        self.accept(Seen { printed_ns, tick, host_ns });
        Placed::Tick(tick)
    }

    fn begin(&mut self, printed_ns: u64, host_ns: i64) -> Placed {
        let first = self.last.is_none();
        self.odd = None;
        self.least_offset_ns = f64::INFINITY;
        self.n_lines = 0;
        self.accept(Seen { printed_ns, tick: printed_ns, host_ns });
        if first { Placed::Tick(printed_ns) } else { Placed::NewBoot(printed_ns) }
    }

    fn accept(&mut self, seen: Seen) {
        let passed_ns = self.last.map_or(0, |last| seen.host_ns.saturating_sub(last.host_ns).max(0)) as f64;
        let risen_ns = self.least_offset_ns + AHEAD_PART * passed_ns;
        self.least_offset_ns = risen_ns.min(offset_ns(seen.tick, seen.host_ns));
        self.n_lines = self.n_lines.saturating_add(1);
        self.last = Some(seen);
    }

    /// The tick, if time went on from `last`.
    fn onward(&self, last: Seen, printed_ns: u64, host_ns: i64) -> Option<u64> {
        let turned_ns = match self.wrap_ns {
            Some(wrap_ns) => {
                let once = u64::from(printed_ns < last.printed_ns);
                let turns = once.max(self.turns(last, printed_ns, host_ns));
                turns.checked_mul(wrap_ns)?
            }
            None => 0,
        };
        last.tick.checked_add(turned_ns.checked_add(printed_ns)?.checked_sub(last.printed_ns)?)
    }

    /// Whole turns of the counter since `last`, by the host's time.
    fn turns(&self, last: Seen, printed_ns: u64, host_ns: i64) -> u64 {
        let Some(wrap_ns) = self.wrap_ns else { return 0 };
        let passed_ns = host_ns.saturating_sub(last.host_ns) as f64;
        let moved_ns = printed_ns as f64 - last.printed_ns as f64;
        ((passed_ns - moved_ns) / wrap_ns as f64).round().max(0.0) as u64
    }

    /// Whether a line of this tick can have come by now: late it may be, ahead of its time it is not.
    fn fits(&self, last: Seen, tick: u64, host_ns: i64) -> bool {
        let passed_ns = host_ns.saturating_sub(last.host_ns) as f64;
        let ahead_ns = if self.n_lines < N_SETTLED { AHEAD_NS } else { AHEAD_SETTLED_NS };
        offset_ns(tick, host_ns) >= self.least_offset_ns - ahead_ns - AHEAD_PART * passed_ns
    }

    /// Twice in a row, further back, and the two fit each other: the device began again.
    fn does_not_fit(&mut self, printed_ns: u64, host_ns: i64) -> Placed {
        let back_ns = self.last.map_or(0, |last| last.printed_ns.saturating_sub(printed_ns));
        if (1..=STEPS_BACK_NS).contains(&back_ns) {
            return Placed::Refused(JUMPS);
        }
        let agrees = self.odd.is_some_and(|odd| {
            let moved_ns = printed_ns as f64 - odd.printed_ns as f64;
            let passed_ns = host_ns.saturating_sub(odd.host_ns) as f64;
            moved_ns > 0.0 && moved_ns <= passed_ns * (1.0 + AHEAD_PART) + AHEAD_NS
        });
        if agrees {
            return self.begin(printed_ns, host_ns);
        }
        self.odd = Some(Seen { printed_ns, tick: 0, host_ns });
        Placed::Refused(JUMPS)
    }
}

fn offset_ns(tick: u64, host_ns: i64) -> f64 {
    host_ns as f64 - tick as f64
}
