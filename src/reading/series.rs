//! Small questions to a signal: what lies between two instants, its mean and scatter, its value at an instant.

use std::ops::Range;

use crate::calibration::Signal;

/// Width of the bins that the search for phases works on.
pub(super) const BIN_S: f64 = 0.01;

#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Stats {
    pub n: usize,
    pub mean: f64,
    /// Of one sample; zero for a single one.
    pub deviation: f64,
}

impl Stats {
    pub(super) fn of(values: &[f64]) -> Option<Self> {
        let n = values.len();
        if n == 0 {
            return None;
        }
        let mean = values.iter().sum::<f64>() / n as f64;
        let squares: f64 = values.iter().map(|value| (value - mean) * (value - mean)).sum();
        Some(Self { n, mean, deviation: (squares / (n - 1).max(1) as f64).sqrt() })
    }
}

/// Indices of the samples with `from_s <= time < to_s`.
pub(super) fn span(signal: &Signal, from_s: f64, to_s: f64) -> Range<usize> {
    let first = signal.time_s.partition_point(|&t| t < from_s);
    let last = signal.time_s.partition_point(|&t| t < to_s);
    first..last.max(first)
}

pub(super) fn stats_between(signal: &Signal, from_s: f64, to_s: f64) -> Option<Stats> {
    Stats::of(&signal.value[span(signal, from_s, to_s)])
}

/// The longest time without a sample between two instants; their distance when there is none at all.
pub(super) fn longest_gap_s(signal: &Signal, from_s: f64, to_s: f64) -> f64 {
    let times = &signal.time_s[span(signal, from_s, to_s)];
    let (Some(first), Some(last)) = (times.first(), times.last()) else { return to_s - from_s };
    times.windows(2).map(|pair| pair[1] - pair[0]).fold((first - from_s).max(to_s - last), f64::max)
}

/// Samples a second as the time axis has them, over its gapless parts.
pub(super) fn rate_hz(signal: &Signal) -> f64 {
    let nominal_s = 1.0 / signal.nominal_rate_hz;
    let (mut n, mut total_s) = (0_u64, 0.0);
    for pair in signal.time_s.windows(2) {
        let step_s = pair[1] - pair[0];
        if step_s < 1.5 * nominal_s {
            n += 1;
            total_s += step_s;
        }
    }
    if n == 0 { signal.nominal_rate_hz } else { n as f64 / total_s }
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Bin {
    pub mean: f64,
    pub min: f64,
    pub max: f64,
}

/// A signal in bins of [`BIN_S`]; a bin without samples is `None`.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Binned {
    pub start_s: f64,
    pub bins: Vec<Option<Bin>>,
}

impl Binned {
    pub(super) fn new(signal: &Signal, start_s: f64, end_s: f64) -> Self {
        let n_bins = ((end_s - start_s) / BIN_S).ceil().clamp(0.0, 1e7) as usize;
        let mut bins = Vec::with_capacity(n_bins);
        let mut next = signal.time_s.partition_point(|&t| t < start_s);
        for bin_idx in 0..n_bins {
            let until_s = start_s + (bin_idx + 1) as f64 * BIN_S;
            let first = next;
            while signal.time_s.get(next).is_some_and(|&t| t < until_s) {
                next += 1;
            }
            bins.push(Self::bin(&signal.value[first..next]));
        }
        Self { start_s, bins }
    }

    fn bin(values: &[f64]) -> Option<Bin> {
        let (mut sum, mut min, mut max) = (0.0, f64::INFINITY, f64::NEG_INFINITY);
        for &value in values {
            sum += value;
            min = f64::min(min, value);
            max = f64::max(max, value);
        }
        (!values.is_empty()).then(|| Bin { mean: sum / values.len() as f64, min, max })
    }

    pub(super) fn time_s(&self, bin_idx: usize) -> f64 {
        self.start_s + (bin_idx as f64 + 0.5) * BIN_S
    }

    /// Mean over the filled bins of a range; `None` when there is none.
    pub(super) fn mean(&self, bins: Range<usize>) -> Option<f64> {
        let range = bins.start.min(self.bins.len())..bins.end.min(self.bins.len());
        let filled: Vec<f64> = self.bins[range].iter().flatten().map(|bin| bin.mean).collect();
        Stats::of(&filled).map(|stats| stats.mean)
    }

    /// Filled bins with their index.
    pub(super) fn filled(&self) -> impl DoubleEndedIterator<Item = (usize, Bin)> + '_ {
        self.bins.iter().enumerate().filter_map(|(idx, bin)| bin.map(|bin| (idx, bin)))
    }
}
