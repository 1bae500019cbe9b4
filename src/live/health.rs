//! What a channel's samples say of the channel itself: noise, standing still, standing at the end of its range.
//!
//! Noise is judged from differences of neighbouring samples, so that a ramp does not count (von Neumann, "Distribution
//! of the ratio of the mean square successive difference to the variance", 1941: half their mean square is the variance).

/// Over which noise is told at least, by the samples' own times.
const WINDOW_NS: i64 = 1_000_000_000;
/// Samples in a window before its noise is believed.
const N_LEAST: u32 = 20;

#[derive(Debug, Clone, Copy, Default)]
struct Window {
    from_ns: i64,
    n: u32,
    square_sum: f64,
    n_turns: u32,
}

/// Follows one channel's counts, sample by sample.
#[derive(Debug, Clone, Copy, Default)]
pub struct Health {
    last: Option<(i64, f64)>,
    window: Window,
    noise_counts: Option<f64>,
    least_noise_counts: Option<f64>,
    moved_ns: i64,
    /// The last step that was one.
    last_step: f64,
    /// Share of samples at which the counts turned round, in the liveliest window so far: noise does, a ramp does not.
    liveliest: f64,
    at_end_since_ns: Option<i64>,
    /// Where the device says that its converter ends.
    range_counts: Option<(f64, f64)>,
}

impl Health {
    /// The device says where its converter ends.
    pub fn set_range(&mut self, low_counts: f64, high_counts: f64) {
        self.range_counts = (low_counts < high_counts).then_some((low_counts, high_counts));
    }

    pub fn take(&mut self, t_ns: i64, counts: f64) {
        let at_end = self.range_counts.is_some_and(|(low, high)| counts <= low || counts >= high);
        self.at_end_since_ns = if at_end { self.at_end_since_ns.or(Some(t_ns)) } else { None };
        let Some((_, before)) = self.last.replace((t_ns, counts)) else {
            self.moved_ns = t_ns;
            self.window.from_ns = t_ns;
            return;
        };
        let step = counts - before;
        self.window.n += 1;
        self.window.square_sum += step * step;
        if step != 0.0 {
            self.window.n_turns += u32::from(step * self.last_step < 0.0);
            self.last_step = step;
            self.moved_ns = t_ns;
        }
        let window_ns = t_ns - self.window.from_ns;
        if window_ns < 0 || (window_ns >= WINDOW_NS && self.window.n >= N_LEAST) {
            self.turn(t_ns);
        }
    }

    fn turn(&mut self, t_ns: i64) {
        let window = std::mem::replace(&mut self.window, Window { from_ns: t_ns, ..Window::default() });
        if window.n < N_LEAST {
            return;
        }
        let n = f64::from(window.n);
        let noise = (0.5 * window.square_sum / n).sqrt();
        self.noise_counts = Some(noise);
        self.liveliest = self.liveliest.max(f64::from(window.n_turns) / n);
        self.least_noise_counts = Some(self.least_noise_counts.map_or(noise, |least| least.min(noise)));
    }

    /// Standard deviation of one sample over the last whole window, counts.
    pub fn noise_counts(&self) -> Option<f64> {
        self.noise_counts
    }

    /// The quietest window so far, counts.
    pub fn least_noise_counts(&self) -> Option<f64> {
        self.least_noise_counts
    }

    /// For how long the newest samples are all the same, of a channel whose samples used to differ.
    pub fn stuck_ns(&self) -> Option<i64> {
        /// White noise turns round at two samples of three; a channel that did at one of four has noise, and the same value
        /// again and again is no measurement of it.
        const LIVELY: f64 = 0.25;
        let (newest_ns, _) = self.last?;
        (self.liveliest >= LIVELY).then_some(newest_ns - self.moved_ns)
    }

    /// For how long the channel has stood at the end of its range.
    pub fn at_end_ns(&self) -> Option<i64> {
        let (newest_ns, _) = self.last?;
        self.at_end_since_ns.map(|since_ns| newest_ns - since_ns)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const STEP_NS: i64 = 500_000;

    /// Plays counts at 2,000 samples a second.
    fn played(counts: impl Fn(i64) -> f64, n: i64, health: &mut Health, from: i64) {
        for k in from..from + n {
            health.take(k * STEP_NS, counts(k));
        }
    }

    /// ±1 in a row without a pattern that a difference would miss: variance 1.
    fn signs(k: i64) -> f64 {
        let mixed = (k as u64).wrapping_mul(0x9E37_79B9_7F4A_7C15);
        if (mixed ^ (mixed >> 31)).wrapping_mul(0xBF58_476D_1CE4_E5B9) >> 63 == 0 { 1.0 } else { -1.0 }
    }

    #[test]
    fn noise_is_told_whatever_the_ramp_below_it() {
        let mut health = Health::default();
        played(|k| 3.0 * signs(k) + 0.01 * k as f64, 4_001, &mut health, 0);
        let noise = health.noise_counts().unwrap();
        assert!((noise - 3.0).abs() < 0.2, "{noise}");
    }

    #[test]
    fn a_lively_channel_that_stands_is_stuck_and_a_quiet_one_is_not() {
        let mut lively = Health::default();
        played(signs, 4_000, &mut lively, 0);
        assert!(lively.stuck_ns().unwrap() < 40 * STEP_NS);
        played(|_| 7.0, 3_000, &mut lively, 4_000);
        assert_eq!(lively.stuck_ns(), Some(2_999 * STEP_NS));
        let mut encoder = Health::default();
        played(|_| 7.0, 7_000, &mut encoder, 0);
        assert_eq!(encoder.stuck_ns(), None);
        let mut coarse = Health::default();
        played(|k| (0.7 * k as f64).floor(), 4_000, &mut coarse, 0);
        played(|_| 2_799.0, 4_000, &mut coarse, 4_000);
        assert_eq!(coarse.stuck_ns(), None, "a coarse indicator moved with the winch, and stands in slack");
    }

    #[test]
    fn the_end_of_the_range_is_noticed_and_left() {
        let mut health = Health::default();
        health.set_range(-100.0, 100.0);
        played(|_| 100.0, 101, &mut health, 0);
        assert_eq!(health.at_end_ns(), Some(100 * STEP_NS));
        played(|_| 99.0, 1, &mut health, 101);
        assert_eq!(health.at_end_ns(), None);
    }
}
