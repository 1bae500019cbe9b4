//! What the reading is to see of one signal, in bounded memory: the latest samples whole, means over 10 ms before them.
//!
//! A launch is at a trial's end, and what comes before it is slow: phases, tensions and their decay are read from bins of
//! 10 ms anyway. Times of means are the means of their times.

use crate::calibration::Signal;

/// Bins in which earlier samples are averaged; the reading looks for phases in bins of this width.
const BIN_S: f64 = 0.01;

/// The samples kept of a signal.
#[derive(Debug)]
pub(super) struct KeptSamples {
    /// Whole samples, with all that describes the signal.
    latest: Signal,
    coarse_time_s: Vec<f64>,
    coarse_value: Vec<f64>,
    is_cut: bool,
}

impl KeptSamples {
    pub(super) fn new(first: Signal) -> Self {
        Self { latest: first, coarse_time_s: Vec::new(), coarse_value: Vec::new(), is_cut: false }
    }

    pub(super) fn extend(&mut self, part: &Signal) {
        self.latest.time_s.extend_from_slice(&part.time_s);
        self.latest.value.extend_from_slice(&part.value);
    }

    /// First and last instant of the whole samples.
    pub(super) fn span_s(&self) -> Option<(f64, f64)> {
        Some((*self.latest.time_s.first()?, *self.latest.time_s.last()?))
    }

    pub(super) fn n_coarse(&self) -> usize {
        self.coarse_time_s.len()
    }

    /// Averages the whole samples before the bin of an instant; gives how many they were.
    pub(super) fn coarsen_before(&mut self, from_s: f64) -> usize {
        let from_s = (from_s / BIN_S).floor() * BIN_S;
        let Signal { time_s, value, .. } = &mut self.latest;
        let n = time_s.partition_point(|time_s| *time_s < from_s);
        let mut first = 0;
        while first < n {
            let bin = (time_s[first] / BIN_S).floor();
            let in_bin = time_s[first..n].iter().take_while(|time_s| (**time_s / BIN_S).floor() <= bin).count().max(1);
            let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len() as f64;
            self.coarse_time_s.push(mean(&time_s[first..first + in_bin]));
            self.coarse_value.push(mean(&value[first..first + in_bin]));
            first += in_bin;
        }
        time_s.drain(..n);
        value.drain(..n);
        n
    }

    /// Lets go of the older half of the means.
    pub(super) fn cut_coarse(&mut self) {
        let n = self.coarse_time_s.len() / 2;
        self.coarse_time_s.drain(..n);
        self.coarse_value.drain(..n);
        self.is_cut |= n > 0;
    }

    /// The signal for the reading; since when it has every sample, if not from its beginning; and since when it has
    /// anything at all, if not from its beginning.
    pub(super) fn finish(self) -> (Signal, Option<f64>, Option<f64>) {
        let Self { mut latest, mut coarse_time_s, mut coarse_value, is_cut } = self;
        if coarse_time_s.is_empty() {
            return (latest, None, None);
        }
        let whole_from_s = latest.time_s.first().copied();
        let seen_from_s = coarse_time_s.first().copied().filter(|_| is_cut);
        coarse_time_s.append(&mut latest.time_s);
        coarse_value.append(&mut latest.value);
        (Signal { time_s: coarse_time_s, value: coarse_value, ..latest }, whole_from_s, seen_from_s)
    }
}
