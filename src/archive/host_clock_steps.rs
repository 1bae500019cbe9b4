//! Steps of the computer's own clocks within a trial: it slept, or its wall clock was set.
//!
//! CLOCK_BOOTTIME counts on while the machine is suspended, CLOCK_MONOTONIC does not; CLOCK_REALTIME is set by people and time
//! services, and slewed together with CLOCK_MONOTONIC (clock_gettime(2)). So a change of their differences is a step.

use crate::journal::Clocks;

/// The clocks are read one after the other, and a busy machine may stop between two reads.
const LEAST_NS: i64 = 50_000_000;

/// Compares each reading of the clocks with the one before.
#[derive(Debug, Clone, Default)]
pub(super) struct HostClockSteps {
    last: Option<Clocks>,
}

impl HostClockSteps {
    /// A sentence for each step since the last reading.
    pub(super) fn take(&mut self, now: &Clocks) -> Vec<String> {
        let Some(last) = self.last.replace(*now) else { return Vec::new() };
        let slept = |clocks: &Clocks| clocks.boottime_ns.saturating_sub(clocks.monotonic_ns);
        let wall = |clocks: &Clocks| clocks.realtime_ns.saturating_sub(clocks.boottime_ns);
        let mut said = Vec::new();
        let slept_ns = slept(now).saturating_sub(slept(&last));
        if slept_ns > LEAST_NS {
            said.push(format!(
                "this computer was suspended for {:.1} s: nothing was recorded in it, and the trial's times leave it out",
                slept_ns as f64 * 1e-9
            ));
        }
        let set_ns = wall(now).saturating_sub(wall(&last));
        if set_ns.saturating_abs() > LEAST_NS {
            let direction = if set_ns > 0 { "forward" } else { "back" };
            said.push(format!(
                "the wall clock was set {direction} by {:.3} s: times of day from before are off by that, the trial's own times are not",
                set_ns.saturating_abs() as f64 * 1e-9
            ));
        }
        said
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const S: i64 = 1_000_000_000;

    /// After `awake_s` awake and `slept_s` asleep, with the wall clock `set_ns` ahead of where it began.
    fn clocks(awake_s: i64, slept_s: i64, set_ns: i64) -> Clocks {
        let monotonic_ns = 5_000 * S + awake_s * S;
        let boottime_ns = monotonic_ns + slept_s * S;
        Clocks {
            monotonic_ns,
            monotonic_raw_ns: monotonic_ns,
            boottime_ns,
            realtime_ns: 1_790_000_000 * S + boottime_ns + set_ns,
            wall_clock_set: true,
        }
    }

    fn said(readings: &[Clocks]) -> Vec<String> {
        let mut steps = HostClockSteps::default();
        readings.iter().flat_map(|now| steps.take(now)).collect()
    }

    #[test]
    fn clocks_that_run_together_say_nothing() {
        let readings: Vec<Clocks> = (0..100).map(|s| clocks(s, 3, s % 7 * 1_000_000)).collect();
        assert_eq!(said(&readings), Vec::<String>::new(), "milliseconds between two reads are no step");
    }

    #[test]
    fn a_suspended_computer_is_told_and_its_wall_clock_was_not_set() {
        let told = said(&[clocks(0, 0, 0), clocks(1, 0, 0), clocks(2, 40, 0), clocks(3, 40, 0)]);
        let [only] = &told[..] else { panic!("{told:?}") };
        assert!(only.contains("suspended for 40.0 s"), "{only}");
    }

    #[test]
    fn a_wall_clock_that_is_set_is_told_with_its_direction() {
        let told = said(&[clocks(0, 0, 0), clocks(1, 0, 3 * S), clocks(2, 0, 3 * S), clocks(3, 0, 3 * S - S / 4)]);
        assert_eq!(told.len(), 2, "{told:?}");
        assert!(told[0].contains("forward by 3.000 s") && told[1].contains("back by 0.250 s"), "{told:?}");
    }

    #[test]
    fn no_reading_whatever_panics() {
        let wild = |n: i64| Clocks {
            monotonic_ns: n,
            monotonic_raw_ns: n,
            boottime_ns: n.wrapping_neg(),
            realtime_ns: n,
            wall_clock_set: false,
        };
        let readings = [i64::MIN, i64::MAX, 0, i64::MIN + 1, i64::MAX].map(wild);
        assert!(said(&readings).len() <= 8);
    }
}
