//! What the hold does to the tension: how much is gone, how it goes on, and when the launch-speed window is missed.
//!
//! Rubber gives way along the logarithm of time at constant length (common practice, no published source; the sealed
//! trial's reading fits the constants). So the tension since the winch stopped is fitted by least squares as
//! `T = a − b·ln(1 + t/1 s)` and continued along it.

use super::state::HoldNow;

/// Levels are taken this often, until the hold is so old that they are thinned.
const EVERY_NS: i64 = 100_000_000;
/// The first level: what the winch left.
const FIRST_S: f64 = 0.3;
/// Hold seen before anything is continued.
const LEAST_S: f64 = 2.0;
/// A change between two levels that is no relaxation: what comes after it is another hold.
const JUMP_SHARE: f64 = 0.02;
/// How far ahead a miss is told.
const AHEAD_S: f64 = 3_600.0;

/// Sums of the least squares since the hold began.
#[derive(Debug, Clone, Copy, Default)]
pub struct HoldWatch {
    began_ns: Option<i64>,
    taken_ns: i64,
    first_n: Option<f64>,
    newest: Option<(f64, f64)>,
    n: f64,
    sum_l: f64,
    sum_ll: f64,
    sum_t: f64,
    sum_lt: f64,
}

impl HoldWatch {
    /// Forgets the last hold; a new one begins at `host_ns`.
    pub fn begin(&mut self, host_ns: i64) {
        *self = Self { began_ns: Some(host_ns), ..Self::default() };
    }

    pub fn end(&mut self) {
        *self = Self::default();
    }

    /// Takes the line's level.
    pub fn take(&mut self, host_ns: i64, line_n: f64) {
        let Some(began_ns) = self.began_ns else { return };
        if host_ns - self.taken_ns < EVERY_NS {
            return;
        }
        let jumped = self.newest.is_some_and(|(_, before_n)| (line_n - before_n).abs() > JUMP_SHARE * before_n.abs());
        if jumped {
            self.begin(host_ns);
        }
        self.taken_ns = host_ns;
        let began_ns = self.began_ns.unwrap_or(began_ns);
        let since_s = (host_ns - began_ns) as f64 * 1e-9;
        if since_s >= FIRST_S {
            self.first_n.get_or_insert(line_n);
        }
        let l = since_s.max(0.0).ln_1p();
        self.newest = Some((since_s, line_n));
        self.n += 1.0;
        self.sum_l += l;
        self.sum_ll += l * l;
        self.sum_t += line_n;
        self.sum_lt += l * line_n;
    }

    /// Newtons lost per unit of ln(1 + t/1 s), when the hold is long enough to tell.
    fn decay(&self) -> Option<f64> {
        let (since_s, _) = self.newest?;
        let spread = self.n * self.sum_ll - self.sum_l * self.sum_l;
        (since_s >= LEAST_S && spread > 0.0).then(|| (self.sum_l * self.sum_t - self.n * self.sum_lt) / spread)
    }

    /// The hold as it is told. `to_lose_n` is the tension that may go before the window is missed, if that is known.
    pub fn now(&self, to_lose_n: Option<f64>) -> Option<HoldNow> {
        let (first_n, (since_s, newest_n)) = (self.first_n?, self.newest?);
        let decay = self.decay();
        let in_a_minute_n = decay.map(|decay| newest_n - decay * ((since_s + 61.0).ln() - since_s.ln_1p()));
        let missed_in_s = match (to_lose_n, decay) {
            (Some(to_lose_n), _) if to_lose_n <= 0.0 => Some(0.0),
            (Some(to_lose_n), Some(decay)) if decay > 0.0 => {
                Some((1.0 + since_s) * ((to_lose_n / decay).exp() - 1.0)).filter(|ahead_s| *ahead_s <= AHEAD_S)
            }
            _ => None,
        };
        Some(HoldNow { fell_n: first_n - newest_n, in_a_minute_n, window_missed_in_s: missed_in_s })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const S: i64 = 1_000_000_000;

    /// Closed form: T = 620 − 8·ln(1 + t).
    fn watched(for_s: i64) -> HoldWatch {
        let mut watch = HoldWatch::default();
        watch.begin(100 * S);
        for tenth in 0..for_s * 10 {
            let t_s = tenth as f64 * 0.1;
            watch.take(100 * S + tenth * S / 10, 620.0 - 8.0 * (1.0 + t_s).ln());
        }
        watch
    }

    #[test]
    fn the_decay_goes_on_along_the_logarithm_of_time() {
        let now = watched(20).now(Some(4.0)).unwrap();
        let at = |t_s: f64| 620.0 - 8.0 * (1.0 + t_s).ln();
        assert!((now.fell_n - (at(0.3) - at(19.9))).abs() < 1e-6, "{now:?}");
        assert!((now.in_a_minute_n.unwrap() - at(79.9)).abs() < 1e-6, "{now:?}");
        let missed_s = 19.9 + now.window_missed_in_s.unwrap();
        assert!((at(19.9) - at(missed_s) - 4.0).abs() < 1e-6, "{now:?}");
    }

    #[test]
    fn a_cord_that_fails_is_no_relaxation_and_begins_another_hold() {
        let mut watch = watched(10);
        watch.take(110 * S, 500.0);
        watch.take(110 * S + S / 2, 500.0);
        let now = watch.now(Some(50.0)).unwrap();
        assert_eq!((now.fell_n, now.in_a_minute_n, now.window_missed_in_s), (0.0, None, None));
    }

    #[test]
    fn a_window_that_is_missed_already_or_never_is_said_so() {
        assert_eq!(watched(5).now(Some(-1.0)).unwrap().window_missed_in_s, Some(0.0));
        assert_eq!(watched(5).now(Some(200.0)).unwrap().window_missed_in_s, None, "longer than an hour");
        assert_eq!(watched(1).now(Some(3.0)).unwrap().in_a_minute_n, None, "too short to tell");
        assert_eq!(HoldWatch::default().now(None), None);
    }
}
