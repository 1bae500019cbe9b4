//! Whether a reading has settled: pure, fed with what the feed tells of a channel's counts.

use std::collections::VecDeque;

/// Counts over a short time, as the feed tells them.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Told {
    pub host_ns: i64,
    pub n: u64,
    pub mean: f64,
    pub sd: Option<f64>,
}

/// A settled reading.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Settled {
    pub counts: f64,
    /// Standard deviation of single samples.
    pub sd_counts: f64,
    pub n: u64,
    /// Over which it was taken.
    pub span_s: f64,
}

/// When a reading counts as settled.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct SettlingRule {
    /// How long it must have stood.
    pub span_s: f64,
    /// By how much its two halves may differ, counts; scatter of the halves' means is allowed on top.
    pub still_counts: f64,
}

/// Gathers what is told until it has settled.
#[derive(Debug)]
pub struct Settling {
    rule: SettlingRule,
    told: VecDeque<Told>,
}

/// Tellings kept at most: 30 a second for five minutes.
const KEPT_MAX: usize = 9000;

impl Settling {
    pub fn new(rule: SettlingRule) -> Self {
        Self { rule, told: VecDeque::new() }
    }

    /// Takes what came; the reading where it has settled by now. A pause of a second begins anew.
    pub fn take(&mut self, told: Told) -> Option<Settled> {
        const PAUSE_NS: i64 = 1_000_000_000;
        let paused = self.told.back().is_some_and(|last| !(0..=PAUSE_NS).contains(&(told.host_ns - last.host_ns)));
        if paused {
            self.told.clear();
        }
        if told.n == 0 || !told.mean.is_finite() {
            return None;
        }
        self.told.push_back(told);
        let from_ns = told.host_ns - (self.rule.span_s * 1e9) as i64;
        let old_enough = self.told.front().is_some_and(|first| first.host_ns <= from_ns) || self.told.len() > KEPT_MAX;
        while self.told.front().is_some_and(|first| first.host_ns < from_ns) || self.told.len() > KEPT_MAX {
            self.told.pop_front();
        }
        old_enough.then(|| self.judge(from_ns)).flatten()
    }

    fn judge(&self, from_ns: i64) -> Option<Settled> {
        let middle_ns = from_ns + (self.rule.span_s * 0.5e9) as i64;
        let pooled = |part: &dyn Fn(&&Told) -> bool| {
            let n: u64 = self.told.iter().filter(part).map(|told| told.n).sum();
            let mean = self.told.iter().filter(part).map(|told| told.mean * told.n as f64).sum::<f64>() / n as f64;
            let within = |told: &Told| (told.n as f64 - 1.0) * told.sd.unwrap_or(0.0).powi(2);
            let between = |told: &Told| told.n as f64 * (told.mean - mean).powi(2);
            let squares: f64 = self.told.iter().filter(part).map(|told| within(told) + between(told)).sum();
            (n, mean, squares)
        };
        let (early, late) = (pooled(&|told| told.host_ns < middle_ns), pooled(&|told| told.host_ns >= middle_ns));
        let (n, mean, squares) = pooled(&|_| true);
        if early.0 == 0 || late.0 == 0 || n < 2 {
            return None;
        }
        let sd = (squares / (n as f64 - 1.0)).sqrt();
        let tellings = self.told.len() as f64;
        let of_means = self.told.iter().map(|told| (told.mean - mean).powi(2)).sum::<f64>() / (tellings - 1.0).max(1.0);
        // Neighbours' differences show the noise alone; a swing shows in the means beside it.
        let steps = self.told.iter().zip(self.told.iter().skip(1)).map(|(one, next)| (next.mean - one.mean).powi(2));
        let noise = (steps.sum::<f64>() / (2.0 * (tellings - 1.0).max(1.0))).sqrt();
        let no_swing = of_means.sqrt() <= self.rule.still_counts + 1.5 * noise;
        let scatter = 6.0 * noise / tellings.sqrt();
        let still = no_swing && (late.1 - early.1).abs() <= self.rule.still_counts + scatter;
        still.then_some(Settled { counts: mean, sd_counts: sd, n, span_s: self.rule.span_s })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn settled_after(level: impl Fn(f64) -> f64) -> Option<(f64, Settled)> {
        let mut settling = Settling::new(SettlingRule { span_s: 2.0, still_counts: 5.0 });
        (0..900).find_map(|tick: i32| {
            let time_s = f64::from(tick) / 30.0;
            let ripple = if tick % 2 == 0 { 8.0 } else { -8.0 };
            let told = Told { host_ns: (time_s * 1e9) as i64, n: 33, mean: level(time_s) + ripple, sd: Some(40.0) };
            settling.take(told).map(|settled| (time_s, settled))
        })
    }

    #[test]
    fn a_swinging_load_is_waited_for() {
        let swing = |time_s: f64| 1e5 + 3000.0 * (-time_s / 2.0).exp() * (2.0 * time_s).cos();
        let (after_s, settled) = settled_after(swing).expect("it settles");
        assert!(after_s > 5.0, "after {after_s} s");
        assert!((settled.counts - 1e5).abs() < 60.0, "{settled:?}");
        assert!(settled.n > 1900 && (settled.sd_counts - 40.8).abs() < 3.0, "{settled:?}");
    }

    #[test]
    fn a_reading_that_creeps_on_never_settles_and_a_still_one_does_at_once() {
        assert_eq!(settled_after(|time_s| 30.0 * time_s), None);
        assert!(settled_after(|_| 12_000.0).expect("still").0 < 2.2);
    }

    #[test]
    fn a_pause_begins_anew() {
        let mut settling = Settling::new(SettlingRule { span_s: 1.0, still_counts: 5.0 });
        let told = |host_ns| Told { host_ns, n: 10, mean: 5.0, sd: Some(1.0) };
        assert_eq!(settling.take(told(0)), None);
        assert_eq!(settling.take(told(2_000_000_000)), None, "what came before the pause does not count");
    }
}
