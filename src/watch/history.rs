//! Tension over the last minutes, least and greatest kept per interval, so that no spike is lost however narrow the
//! screen; and tension over the rail since the trial began.

use std::collections::VecDeque;

/// Length of one interval.
pub const BIN_S: f64 = 0.25;
const N_BINS_MAX: usize = 960;
const N_RAIL_BINS: usize = 400;

/// Least and greatest within one interval or place.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Range {
    pub min: f64,
    pub max: f64,
}

impl Range {
    fn joined(self, other: Self) -> Self {
        Self { min: self.min.min(other.min), max: self.max.max(other.max) }
    }
}

/// The last four minutes; an interval without data stays empty.
#[derive(Debug, Clone, Default)]
pub struct TimeHistory {
    /// Index of the newest interval since the monotonic clock's zero.
    newest: Option<i64>,
    bins: VecDeque<Option<Range>>,
}

impl TimeHistory {
    pub fn push(&mut self, host_ns: i64, range: Range) {
        let bin = (host_ns as f64 * 1e-9 / BIN_S).floor() as i64;
        let newest = self.newest.unwrap_or(bin - 1);
        if bin < newest || bin - newest > N_BINS_MAX as i64 {
            self.bins.clear();
            self.bins.push_back(None);
        } else {
            (newest..bin).for_each(|_| self.bins.push_back(None));
        }
        self.newest = Some(bin);
        while self.bins.len() > N_BINS_MAX {
            self.bins.pop_front();
        }
        if let Some(last) = self.bins.back_mut() {
            *last = Some(last.map_or(range, |had| had.joined(range)));
        }
    }

    /// The newest `n` columns of `per_column` intervals each, oldest first. Columns keep to the clock, so they do not
    /// change as newer ones come.
    pub fn columns(&self, n: usize, per_column: usize) -> Vec<Option<Range>> {
        let per_column = per_column.max(1);
        let newest = self.newest.unwrap_or(0);
        let in_newest = newest.rem_euclid(per_column as i64) as usize + 1;
        let first = self.bins.len().saturating_sub(in_newest);
        let joined = |bins: Vec<Option<Range>>| bins.into_iter().flatten().reduce(Range::joined);
        let mut columns = vec![joined(self.bins.range(first..).copied().collect())];
        let mut end = first;
        while end > 0 && columns.len() < n {
            let start = end.saturating_sub(per_column);
            columns.push(joined(self.bins.range(start..end).copied().collect()));
            end = start;
        }
        columns.truncate(n);
        columns.reverse();
        columns
    }
}

/// Greatest tension seen at each place of the rail.
#[derive(Debug, Clone, Default)]
pub struct RailTrace {
    greatest_n: Vec<Option<f64>>,
}

impl RailTrace {
    pub fn clear(&mut self) {
        self.greatest_n.clear();
    }

    pub fn push(&mut self, x_m: f64, rail_length_m: f64, tension_n: f64) {
        if self.greatest_n.is_empty() {
            self.greatest_n.resize(N_RAIL_BINS, None);
        }
        let place = (x_m / rail_length_m * N_RAIL_BINS as f64).floor();
        if place >= 0.0
            && let Some(greatest_n) = self.greatest_n.get_mut(place as usize)
        {
            *greatest_n = Some(greatest_n.map_or(tension_n, |had| had.max(tension_n)));
        }
    }

    /// Greatest tension between two places.
    pub fn between(&self, from_x_m: f64, to_x_m: f64, rail_length_m: f64) -> Option<f64> {
        let place = |x_m: f64| (x_m / rail_length_m * N_RAIL_BINS as f64).max(0.0) as usize;
        let (from, to) = (place(from_x_m).min(self.greatest_n.len()), place(to_x_m).min(self.greatest_n.len()));
        self.greatest_n.get(from..to)?.iter().flatten().copied().reduce(f64::max)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_spike_survives_in_its_interval_and_silence_stays_empty() {
        let mut history = TimeHistory::default();
        for (t_ms, value) in [(0, 10.0), (33, 700.0), (66, 11.0), (1_300, 12.0)] {
            history.push(t_ms * 1_000_000, Range { min: value, max: value });
        }
        let bins = history.columns(10, 1);
        assert_eq!(bins[0], Some(Range { min: 10.0, max: 700.0 }));
        assert_eq!(bins[1..5], [None; 4]);
        assert_eq!(bins[5].map(|range| range.max), Some(12.0));
    }

    #[test]
    fn wider_columns_keep_the_spike_and_their_place() {
        let mut history = TimeHistory::default();
        for bin in 0..41 {
            let value = if bin == 13 { 700.0 } else { 1.0 };
            history.push(bin * 250_000_000, Range { min: value, max: value });
        }
        let columns = history.columns(100, 4);
        let spikes: Vec<_> =
            columns.iter().enumerate().filter(|(_, range)| range.is_some_and(|r| r.max == 700.0)).collect();
        assert_eq!((columns.len(), spikes.len(), spikes[0].0), (11, 1, 3));
        assert_eq!(history.columns(2, 4).len(), 2);
    }

    #[test]
    fn the_history_is_bounded_and_survives_a_clock_that_jumps() {
        let mut history = TimeHistory::default();
        for t_s in [0_i64, 1_000_000, 5, 7_000_000_000] {
            history.push(t_s * 1_000_000_000, Range { min: 0.0, max: 1.0 });
            assert!(history.columns(usize::MAX, 1).len() <= N_BINS_MAX);
        }
    }

    #[test]
    fn the_rail_remembers_the_greatest_tension_at_each_place() {
        let mut trace = RailTrace::default();
        for (x_m, tension_n) in [(1.0, 300.0), (1.001, 500.0), (3.0, 100.0), (-5.0, 900.0), (99.0, 900.0)] {
            trace.push(x_m, 7.0, tension_n);
        }
        assert_eq!(trace.between(0.9, 1.1, 7.0), Some(500.0));
        assert_eq!(trace.between(1.5, 2.5, 7.0), None);
        assert_eq!(trace.between(-3.0, 70.0, 7.0), Some(500.0));
    }
}
