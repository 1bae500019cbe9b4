//! A device's clock: ticks against the host's monotonic time.

use crate::draw::{Draw, Purpose};
use serde::Serialize;

pub const TICK_RATE_HZ: f64 = 1e6;
/// What the devices state.
pub const TICK_TOLERANCE_PPM: f32 = 100.0;

const RATE_ERROR_PPM: f64 = 25.0;
const RATE_ERROR_BOUND_PPM: f64 = 60.0;
const MOST_TICKS_AT_BOOT: f64 = 4e9;

const WANDER_PERIOD_S: f64 = 20.0;
/// Rounds of the inversion of a wandering clock; each shrinks the error by the wander's ppm.
const N_INVERSIONS: u32 = 4;

/// Ticks run from `tick_at_epoch` at `epoch_host_ns`, faster than nominal by `rate_error_ppm` and a swing of
/// `wander_ppm` with a period of 20 s.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct DeviceClock {
    pub epoch_host_ns: i64,
    pub tick_at_epoch: u64,
    pub rate_error_ppm: f64,
    pub wander_ppm: f64,
}

impl DeviceClock {
    /// Rate and offset of `device` as drawn for `seed`.
    pub fn drawn(seed: u64, device: u8, epoch_host_ns: i64) -> Self {
        let mut draw = Draw::new(seed, Purpose::Clock { device });
        let rate_error_ppm = draw.normal_within(RATE_ERROR_PPM, RATE_ERROR_BOUND_PPM);
        let tick_at_epoch = draw.even(0.0, MOST_TICKS_AT_BOOT) as u64;
        Self { epoch_host_ns, tick_at_epoch, rate_error_ppm, wander_ppm: 0.0 }
    }

    /// The same crystal after a new boot.
    pub fn rebooted(self, epoch_host_ns: i64) -> Self {
        Self { epoch_host_ns, tick_at_epoch: 0, ..self }
    }

    fn ns_per_tick(&self) -> f64 {
        1e9 / (TICK_RATE_HZ * (1.0 + self.rate_error_ppm * 1e-6))
    }

    /// Integral of the rate's swing, ns.
    fn swing_ns(&self, since_epoch_ns: f64) -> f64 {
        let w_per_ns = std::f64::consts::TAU / (WANDER_PERIOD_S * 1e9);
        self.wander_ppm * 1e-6 / w_per_ns * (1.0 - (w_per_ns * since_epoch_ns).cos())
    }

    /// Host time at which `tick` begins, ns after the epoch.
    pub fn since_epoch_ns(&self, tick: u64) -> f64 {
        let even_ns = (tick as f64 - self.tick_at_epoch as f64) * self.ns_per_tick();
        let mut since_ns = even_ns;
        for _ in 0..N_INVERSIONS {
            since_ns = even_ns - self.swing_ns(since_ns);
        }
        since_ns
    }

    /// The tick that is running at `host_ns`.
    pub fn tick_at(&self, host_ns: i64) -> u64 {
        let since_ns = (host_ns - self.epoch_host_ns) as f64;
        let ticks = ((since_ns + self.swing_ns(since_ns)) / self.ns_per_tick()).floor();
        self.tick_at_epoch.saturating_add_signed(ticks as i64)
    }
}
