//! Whether a device's clock keeps to what the device states of it, seen from arrivals alone.
//!
//! The clock map believes no clock to be more than 2 % off and begins anew where times contradict that; so a clock that
//! is far off looks good by its map. Here the earliest arrivals of successive stretches are compared by the nominal rate.

use crate::capture::{Block, NominalClock, TimeBase};

/// Device time of a stretch.
const STRETCH_S: f64 = 5.0;
/// How much the earliest arrivals of two stretches may differ in lateness: an adapter's timer and a busy host.
const LATENESS_S: f64 = 0.05;
/// Added to what the device states.
const MARGIN_PPM: f64 = 200.0;

#[derive(Debug, Clone, Copy)]
struct Place {
    device_s: f64,
    late_s: f64,
}

/// Follows the arrivals of one boot.
#[derive(Debug)]
pub struct RateWatch {
    nominal: NominalClock,
    boot_id: Option<u32>,
    zero: (u64, i64),
    earliest: Option<Place>,
    stretch: u64,
    /// Earliest arrivals of the last whole stretches, oldest first.
    before: Vec<Place>,
}

impl RateWatch {
    pub fn new(nominal: NominalClock) -> Self {
        Self { nominal, boot_id: None, zero: (0, 0), earliest: None, stretch: 0, before: Vec::new() }
    }

    pub fn arrived(&mut self, block: &Block) {
        if self.nominal.time_base != TimeBase::Ticks {
            return;
        }
        if self.boot_id != Some(block.boot_id) {
            *self = Self::new(self.nominal);
            self.boot_id = Some(block.boot_id);
            self.zero = (block.sent_tick, block.host_ns);
        }
        let device_s = block.sent_tick.saturating_sub(self.zero.0) as f64 / self.nominal.tick_rate_hz;
        let late_s = block.host_ns.saturating_sub(self.zero.1) as f64 * 1e-9 - device_s;
        let stretch = (device_s / STRETCH_S) as u64;
        if stretch != self.stretch {
            self.stretch = stretch;
            self.before.extend(self.earliest.take());
            let n_old = self.before.len().saturating_sub(3);
            self.before.drain(..n_old);
        }
        let place = Place { device_s, late_s };
        self.earliest = Some(self.earliest.filter(|earliest| earliest.late_s <= late_s).unwrap_or(place));
    }

    /// By how much the clock runs fast against the host's, parts per million, where the last two steps between stretches
    /// both say that it breaks its tolerance. One step alone may hold a host that was suspended.
    pub fn beyond_ppm(&self) -> Option<f64> {
        let [first, middle, last] = self.before[..] else { return None };
        let (one, other) = (self.step_ppm(first, middle)?, self.step_ppm(middle, last)?);
        (one * other > 0.0).then_some(0.5 * (one + other))
    }

    fn step_ppm(&self, from: Place, to: Place) -> Option<f64> {
        let span_s = to.device_s - from.device_s;
        let gained = (to.late_s - from.late_s) / span_s;
        let ppm = (1.0 / (1.0 + gained) - 1.0) * 1e6;
        (ppm.abs() > self.allowed_ppm() + LATENESS_S / span_s * 1e6).then_some(ppm)
    }

    pub fn nominal(&self) -> NominalClock {
        self.nominal
    }

    /// What may be believed of the clock.
    pub fn allowed_ppm(&self) -> f64 {
        self.nominal.tolerance_ppm + MARGIN_PPM
    }

    pub fn stated_ppm(&self) -> f64 {
        self.nominal.tolerance_ppm
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn watched(true_rate: f64, seconds: u64, suspended_s: f64) -> Option<f64> {
        let mut watch = RateWatch::new(NominalClock::ticking(1e6, 50.0));
        for k in 0..seconds * 1000 / 16 {
            let true_s = k as f64 * 0.016;
            let late_s = 0.016 * ((k * 7) % 13) as f64 / 13.0;
            let away_s = if true_s > 12.0 { suspended_s } else { 0.0 };
            watch.arrived(&Block {
                host_ns: ((true_s + late_s - away_s) * 1e9) as i64,
                boot_id: 1,
                description_id: 1,
                stream: 1,
                sequence: k as u32,
                first_index: k,
                first_tick: 0,
                sent_tick: (true_s * true_rate) as u64,
                n_samples: 1,
                overruns: 0,
                crc: 0,
                counts: Vec::new(),
            });
        }
        watch.beyond_ppm()
    }

    #[test]
    fn a_clock_far_off_is_told_after_a_quarter_of_a_minute() {
        let ppm = watched(1.1e6, 20, 0.0).unwrap();
        assert!((ppm - 1e5).abs() < 2e3, "{ppm}");
        let ppm = watched(0.97e6, 25, 0.0).unwrap();
        assert!((ppm + 3e4).abs() < 2e3, "{ppm}");
    }

    #[test]
    fn an_ordinary_clock_and_a_suspended_host_are_not() {
        assert_eq!(watched(1.000_04e6, 30, 0.0), None);
        for seconds in 13..40 {
            assert_eq!(watched(1.000_04e6, seconds, 3.0), None, "{seconds} s");
        }
    }
}
