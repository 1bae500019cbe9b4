//! Counts as they arrive, gathered between two tellings, for who calibrates beside the running daemon.
//!
//! Bounded: one tap a channel, and a tap that nobody has asked for within [`WANTED_NS`] is closed.

use crate::estimation::RunningMean;
use crate::rig::Rig;

use super::state::RawNow;

/// How long a tap stays open after it was asked for.
pub const WANTED_NS: i64 = 10_000_000_000;

#[derive(Debug)]
struct Tap {
    name: String,
    device: String,
    device_channel: String,
    wanted_until_ns: Option<i64>,
    counts: RunningMean,
    extremes: Option<(f64, f64)>,
}

/// A tap for every channel of the rig: calibrated ones in the rig's order, then those without calibration.
#[derive(Debug)]
pub struct Taps(Vec<Tap>);

impl Taps {
    pub fn new(rig: &Rig) -> Self {
        let tap = |name: &String, device: &String, device_channel: &String| Tap {
            name: name.clone(),
            device: device.clone(),
            device_channel: device_channel.clone(),
            wanted_until_ns: None,
            counts: RunningMean::default(),
            extremes: None,
        };
        let calibrated = rig.channels.iter().map(|c| tap(&c.name, &c.device, &c.device_channel));
        let others = rig.uncalibrated.iter().map(|c| tap(&c.name, &c.device, &c.device_channel));
        Self(calibrated.chain(others).collect())
    }

    /// Where a device's channel goes.
    pub fn position(&self, device: &str, device_channel: &str) -> Option<usize> {
        self.0.iter().position(|tap| tap.device == device && tap.device_channel == device_channel)
    }

    /// Opens a channel's tap, or keeps it open.
    ///
    /// # Errors
    /// The names of the channels there are, where `name` is none of them.
    pub fn want(&mut self, name: &str, host_ns: i64) -> Result<(), String> {
        let known = || self.0.iter().map(|tap| tap.name.as_str()).collect::<Vec<_>>().join(", ");
        let Some(at) = self.0.iter().position(|tap| tap.name == name) else {
            return Err(format!("there is no channel {name:?}, there are: {}", known()));
        };
        let tap = &mut self.0[at];
        if tap.wanted_until_ns.is_none_or(|until_ns| until_ns < host_ns) {
            tap.counts = RunningMean::default();
            tap.extremes = None;
        }
        tap.wanted_until_ns = Some(host_ns.saturating_add(WANTED_NS));
        Ok(())
    }

    pub fn push(&mut self, at: usize, counts: f64) {
        let Some(tap) = self.0.get_mut(at).filter(|tap| tap.wanted_until_ns.is_some() && counts.is_finite()) else {
            return;
        };
        tap.counts.add(counts);
        tap.extremes = Some(tap.extremes.map_or((counts, counts), |(min, max)| (min.min(counts), max.max(counts))));
    }

    /// What came since the last call, of every open tap; closes those whose time is over.
    pub fn take(&mut self, host_ns: i64) -> Vec<RawNow> {
        let mut told = Vec::new();
        for tap in &mut self.0 {
            if tap.wanted_until_ns.is_some_and(|until_ns| until_ns < host_ns) {
                tap.wanted_until_ns = None;
            }
            if tap.wanted_until_ns.is_none() {
                continue;
            }
            let (counts, extremes) = (std::mem::take(&mut tap.counts), tap.extremes.take());
            let Some((min, max)) = extremes else { continue };
            let sd = counts.standard_deviation();
            told.push(RawNow {
                channel: tap.name.clone(),
                host_ns,
                n: counts.count(),
                mean: counts.mean(),
                sd: sd.is_finite().then_some(sd),
                min,
                max,
            });
        }
        told
    }
}
