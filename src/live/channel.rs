//! One channel of the rig as it is now: counts to values, age, extremes since the last snapshot, recent past.

use crate::calibration::{Level, Tare, TareError, tare, to_value};
use crate::rig::{Channel, Coefficients, Device, LONGEST_INTERVAL_S, Protocol, Role, SILENT_INTERVALS};

use super::health::Health;
use super::state::ChannelNow;
use super::trail::Trail;

/// From this age on a value is not used for any decision; of a slow instrument after [`SILENT_INTERVALS`] of its intervals.
pub const SILENT_NS: i64 = 500_000_000;
/// However slow an instrument is, an older value says nothing of the cords now.
const SILENT_AT_LAST_NS: i64 = (LONGEST_INTERVAL_S * SILENT_INTERVALS * 1e9) as i64;

#[derive(Debug)]
pub struct ChannelMonitor {
    pub name: String,
    pub role: Role,
    pub device: String,
    calibration: Coefficients,
    /// Between two samples, as the rig file or the device declares it.
    interval_ns: i64,
    newest: Option<(i64, f64)>,
    extremes: Option<(f64, f64)>,
    trail: Trail,
    pub health: Health,
}

impl ChannelMonitor {
    /// `devices` are the rig's.
    pub fn new(channel: &Channel, devices: &[Device]) -> Self {
        let declared_s = devices.iter().find(|device| device.name == channel.device).and_then(|device| {
            if let Protocol::Text(instrument) = &device.protocol { Some(instrument.interval_s) } else { None }
        });
        Self {
            interval_ns: declared_s.map_or(0, |interval_s| (interval_s * 1e9) as i64),
            name: channel.name.clone(),
            role: channel.role,
            device: channel.device.clone(),
            calibration: channel.calibration.clone(),
            newest: None,
            extremes: None,
            trail: Trail::default(),
            health: Health::default(),
        }
    }

    /// Takes one sample and gives its value. A value that is not finite is as good as none: the channel goes silent.
    pub fn push(&mut self, t_ns: i64, counts: f64) -> Option<f64> {
        let value = to_value(&self.calibration, counts);
        if !value.is_finite() {
            return None;
        }
        self.newest = Some((t_ns, value));
        self.extremes = Some(self.extremes.map_or((value, value), |(min, max)| (min.min(value), max.max(value))));
        self.trail.push(t_ns, value, self.silent_ns());
        self.health.take(t_ns, counts);
        Some(value)
    }

    /// Size of one count near the zero, in the role's unit.
    pub fn per_count(&self) -> f64 {
        self.calibration.coefficients.get(1).map_or(0.0, |slope| slope.abs())
    }

    pub fn is_tension(&self) -> bool {
        self.role.is_tension()
    }

    /// Age of the newest sample; none before the first.
    pub fn age_ns(&self, host_ns: i64) -> Option<i64> {
        self.newest.map(|(t_ns, _)| (host_ns - t_ns).max(0))
    }

    pub fn is_fresh(&self, host_ns: i64) -> bool {
        self.age_ns(host_ns).is_some_and(|age_ns| age_ns < self.silent_ns())
    }

    /// Age from which on the newest value counts for nothing.
    pub fn silent_ns(&self) -> i64 {
        ((SILENT_INTERVALS * self.interval_ns as f64) as i64).clamp(SILENT_NS, SILENT_AT_LAST_NS)
    }

    /// Between two samples.
    pub fn interval_ns(&self) -> i64 {
        self.interval_ns
    }

    /// The device declares how far its samples are apart.
    pub fn set_interval(&mut self, interval_ns: i64) {
        self.interval_ns = interval_ns;
    }

    /// Mean over the last 5 to 10 ms, of a fresh channel only.
    pub fn level(&self, host_ns: i64) -> Option<f64> {
        if self.is_fresh(host_ns) { self.trail.level() } else { None }
    }

    /// Sets the zero where a slack cell stands.
    ///
    /// # Errors
    /// As [`tare`].
    pub fn tare(
        &mut self,
        host_ns: i64,
        record_zero_counts: f64,
        slack: bool,
        allowed_n: f64,
    ) -> Result<Tare, TareError> {
        const SECOND_NS: i64 = 1_000_000_000;
        let fresh = self.is_fresh(host_ns);
        let mean = |from_ns, to_ns| self.trail.mean_between(from_ns, to_ns).filter(|_| fresh);
        let level = Level {
            newest_n: mean(host_ns - SECOND_NS, host_ns),
            before_n: mean(host_ns - 2 * SECOND_NS, host_ns - SECOND_NS),
            slack,
        };
        let tare = tare((&self.name, self.role), &self.calibration, record_zero_counts, level, allowed_n)?;
        self.calibration.zero_counts = tare.new_counts;
        self.trail = Trail::default();
        Ok(tare)
    }

    /// The last level known, however old.
    pub fn last_level(&self) -> Option<f64> {
        self.trail.level()
    }

    /// Change a second over about `window_ns`, of a fresh channel only.
    pub fn slope_per_s(&self, host_ns: i64, window_ns: i64) -> Option<f64> {
        if self.is_fresh(host_ns) { self.trail.slope_per_s(window_ns) } else { None }
    }

    /// The channel's part of a snapshot; starts new extremes.
    pub fn take_now(&mut self, host_ns: i64) -> ChannelNow {
        let extremes = self.extremes.take();
        let value = self.newest.map(|(_, value)| value);
        ChannelNow {
            name: self.name.clone(),
            role: self.role.word().to_owned(),
            unit: self.role.unit().to_owned(),
            value,
            min: extremes.map(|(min, _)| min).or(value),
            max: extremes.map(|(_, max)| max).or(value),
            age_s: self.age_ns(host_ns).map(|age_ns| age_ns as f64 * 1e-9),
        }
    }
}
