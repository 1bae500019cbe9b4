//! A channel's recent past in short bins: level, slope and extremes without keeping every sample.
//!
//! Times are host nanoseconds of the samples, not of their arrival. A clock map that is fitted again may step back a
//! little; a pause in which the channel fell silent or a real step back starts the trail anew, so no slope is ever drawn across a
//! gap.

use std::collections::VecDeque;

const BIN_NS: i64 = 5_000_000;
/// A step back up to this is a refit of the clock map.
const STEP_BACK_NS: i64 = 20_000_000;
const N_BINS_MAX: usize = 400;

#[derive(Debug, Clone, Copy)]
struct Bin {
    slot: i64,
    n: u32,
    /// Sums over the bin's samples; times relative to the slot's start, so that nothing is lost to rounding.
    offset_sum_ns: f64,
    value_sum: f64,
}

impl Bin {
    fn mean_t_ns(&self) -> i64 {
        self.slot * BIN_NS + (self.offset_sum_ns / f64::from(self.n)) as i64
    }

    fn mean(&self) -> f64 {
        self.value_sum / f64::from(self.n)
    }
}

/// Bins of 5 ms over the last 2 s of one channel.
#[derive(Debug, Default)]
pub struct Trail {
    bins: VecDeque<Bin>,
    newest_t_ns: Option<i64>,
}

impl Trail {
    /// Mean of the samples within a time; none where there is a hole of a third of it or more. A display that gives a few
    /// values a second is as good as a converter that gives thousands.
    pub fn mean_between(&self, from_ns: i64, to_ns: i64) -> Option<f64> {
        let slots = from_ns.div_euclid(BIN_NS)..to_ns.div_euclid(BIN_NS);
        let (mut sum, mut n, mut longest, mut last) = (0.0, 0.0, 0, slots.start);
        for bin in self.bins.iter().filter(|bin| slots.contains(&bin.slot)) {
            (sum, n) = (sum + bin.value_sum, n + f64::from(bin.n));
            longest = longest.max(bin.slot.saturating_sub(last));
            last = bin.slot;
        }
        longest = longest.max(slots.end.saturating_sub(last));
        (3 * longest < slots.end.saturating_sub(slots.start) && n > 0.0).then(|| sum / n)
    }

    /// Takes one finite sample; others are the caller's to refuse. After more than `pause_ns` the trail begins anew.
    pub fn push(&mut self, t_ns: i64, value: f64, pause_ns: i64) {
        let since_ns = self.newest_t_ns.map_or(0, |newest| t_ns - newest);
        if !(-STEP_BACK_NS..=pause_ns).contains(&since_ns) {
            self.bins.clear();
        }
        let t_ns = if (-STEP_BACK_NS..0).contains(&since_ns) { t_ns - since_ns } else { t_ns };
        self.newest_t_ns = Some(t_ns);
        let slot = t_ns.div_euclid(BIN_NS);
        let offset_ns = t_ns.rem_euclid(BIN_NS) as f64;
        match self.bins.back_mut() {
            Some(bin) if bin.slot == slot => {
                bin.n += 1;
                bin.offset_sum_ns += offset_ns;
                bin.value_sum += value;
            }
            _ => {
                if self.bins.len() == N_BINS_MAX {
                    self.bins.pop_front();
                }
                self.bins.push_back(Bin { slot, n: 1, offset_sum_ns: offset_ns, value_sum: value });
            }
        }
    }

    /// Mean over the samples of the last 5 to 10 ms.
    pub fn level(&self) -> Option<f64> {
        let newest = self.bins.back()?;
        let recent = self.bins.iter().rev().take(2).filter(|bin| newest.slot - bin.slot <= 1);
        let (n, sum) = recent.fold((0, 0.0), |(n, sum), bin| (n + bin.n, sum + bin.value_sum));
        Some(sum / f64::from(n))
    }

    /// Change a second over about the last `window_ns`; none before the trail is at least half as long.
    pub fn slope_per_s(&self, window_ns: i64) -> Option<f64> {
        let newest = self.bins.back()?;
        let from_ns = newest.mean_t_ns() - window_ns;
        let oldest = self.bins.iter().rev().take_while(|bin| bin.mean_t_ns() >= from_ns - BIN_NS / 2).last()?;
        let span_ns = newest.mean_t_ns() - oldest.mean_t_ns();
        (span_ns * 2 >= window_ns).then(|| (newest.mean() - oldest.mean()) / (span_ns as f64 * 1e-9))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const MS: i64 = 1_000_000;
    const PAUSE_NS: i64 = 500 * MS;

    fn ramp(from_ms: i64, to_ms: i64, per_s: f64, trail: &mut Trail) {
        for tenth in from_ms * 10..to_ms * 10 {
            let t_ns = tenth * MS / 10;
            trail.push(t_ns, per_s * t_ns as f64 * 1e-9, PAUSE_NS);
        }
    }

    #[test]
    fn the_slope_of_a_ramp_is_its_rate() {
        let mut trail = Trail::default();
        ramp(0, 300, 2.5, &mut trail);
        for window_ms in [10, 20, 100] {
            let slope = trail.slope_per_s(window_ms * MS).unwrap();
            assert!((slope - 2.5).abs() < 1e-6, "{slope} over {window_ms} ms");
        }
    }

    #[test]
    fn a_slow_display_has_a_mean_and_a_hole_has_none() {
        let shown = |times_ms: &[i64]| {
            let mut trail = Trail::default();
            times_ms.iter().for_each(|ms| trail.push(ms * MS, *ms as f64, PAUSE_NS));
            trail.mean_between(1000 * MS, 2000 * MS)
        };
        assert_eq!(shown(&[1000, 1200, 1400, 1600, 1800]), Some(1400.0));
        assert_eq!(shown(&[1000, 1200, 1400, 1800]), None, "0.4 s are missing");
        assert_eq!(shown(&[1400, 1600, 1800]), None, "its beginning is missing");
        assert_eq!(shown(&[1000, 1200, 1400]), None, "its end is missing");
        assert_eq!(shown(&[]), None);
    }

    #[test]
    fn no_slope_is_drawn_across_a_gap() {
        let mut trail = Trail::default();
        ramp(0, 200, 1.0, &mut trail);
        ramp(900, 904, 1.0, &mut trail);
        assert_eq!(trail.slope_per_s(100 * MS), None);
        assert!((trail.level().unwrap() - 0.902).abs() < 1e-3);
    }

    #[test]
    fn a_refitted_clock_does_not_end_the_trail_and_a_reset_one_does() {
        let mut trail = Trail::default();
        ramp(0, 200, 1.0, &mut trail);
        ramp(199, 250, 1.0, &mut trail);
        assert!((trail.slope_per_s(100 * MS).unwrap() - 1.0).abs() < 0.05);
        ramp(0, 8, 1.0, &mut trail);
        assert_eq!(trail.slope_per_s(100 * MS), None);
    }

    #[test]
    fn the_level_forgets_what_is_older_than_ten_milliseconds() {
        let mut trail = Trail::default();
        for ms in 0..100 {
            trail.push(ms * MS, 700.0, PAUSE_NS);
        }
        for ms in 100..110 {
            trail.push(ms * MS, 3.0, PAUSE_NS);
        }
        assert_eq!(trail.level(), Some(3.0));
    }

    #[test]
    fn a_channel_of_ten_samples_a_second_has_a_slope_too() {
        let mut trail = Trail::default();
        for n in 0..10 {
            trail.push(n * 100 * MS, n as f64, PAUSE_NS);
        }
        assert!((trail.slope_per_s(500 * MS).unwrap() - 10.0).abs() < 1e-9);
        assert_eq!(trail.slope_per_s(20 * MS), None);
    }
}
