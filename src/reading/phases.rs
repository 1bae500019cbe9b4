//! A coarse look over the whole trial: when tension came, stood and went, to a hundredth of a second.
//!
//! Works on 10 ms means, so that noise, single samples and rates do not matter; instants that need more are refined
//! elsewhere. Without a release line the anchor's tension stands in, and the evidence says so.

use crate::calibration::Signal;
use crate::rig::Rig;

use super::sensors::Sensors;
use super::series::{BIN_S, Binned, stats_between};

/// A sudden drop of the load.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Drop {
    pub time_s: f64,
    /// Mean before it, least value in it, means some hundredths and a tenth of a second later.
    pub from_n: f64,
    pub low_n: f64,
    pub soon_n: f64,
    pub to_n: f64,
}

#[derive(Debug, Clone, PartialEq)]
pub(super) struct Phases {
    pub start_s: f64,
    pub end_s: f64,
    /// Indication of the unloaded channel, N.
    pub zero_n: f64,
    pub peak_load_n: f64,
    pub load_channel: &'static str,
    /// Tension above slack for the first time, and for the last.
    pub loaded_from_s: Option<f64>,
    pub loaded_until_s: Option<f64>,
    /// The winch stopped here, before the release or the let-down.
    pub hold_start_s: Option<f64>,
    pub hold_end_s: Option<f64>,
    pub release_hint_s: Option<f64>,
    /// Sudden drops that were no release.
    pub partial_drops: Vec<Drop>,
}

/// Time over which a fall of the load counts as sudden.
const SUDDEN_BINS: usize = 3;
/// Mean tension of a second that is called the unloaded indication only under this share of the peak.
const ZERO_SHARE_OF_PEAK: f64 = 0.12;
/// Fall of the load within less than a second that no held cord's relaxation gives.
const GIVEN_SHARE: f64 = 0.01;
/// Shuttle movement that ends the hold.
const STANDING_M: f64 = 0.003;

impl Phases {
    /// `None` when there is no sample at all.
    pub(super) fn find(sensors: &Sensors<'_>, rig: &Rig) -> Option<Self> {
        let (start_s, end_s) = sensors.extent_s()?;
        let (load_signal, load_channel) = match (sensors.line, sensors.anchor) {
            (Some(line), _) => (Some(line), "release line"),
            (None, Some(anchor)) => (Some(anchor), "cord anchor"),
            (None, None) => (None, "no tension channel"),
        };
        let mut phases = Self {
            start_s,
            end_s,
            zero_n: 0.0,
            peak_load_n: 0.0,
            load_channel,
            loaded_from_s: None,
            loaded_until_s: None,
            hold_start_s: None,
            hold_end_s: None,
            release_hint_s: None,
            partial_drops: Vec::new(),
        };
        if let Some(signal) = load_signal {
            phases.look_at_load(signal, rig);
        }
        if load_channel != "release line" {
            phases.release_hint_s = release_by_motion(sensors, start_s, end_s);
        }
        phases.find_hold(sensors, load_signal);
        Some(phases)
    }

    fn look_at_load(&mut self, signal: &Signal, rig: &Rig) {
        let load = Binned::new(signal, self.start_s, self.end_s);
        self.peak_load_n = load.filled().map(|(_, bin)| bin.mean).fold(0.0, f64::max);
        self.zero_n = unloaded_indication(&load, self.peak_load_n, rig.plan.slack_tension_n);
        let loaded_above_n = self.zero_n + rig.plan.slack_tension_n;
        let loaded = |(idx, bin): (usize, super::series::Bin)| (bin.mean > loaded_above_n).then(|| load.time_s(idx));
        self.loaded_from_s = load.filled().find_map(loaded);
        self.loaded_until_s = load.filled().rev().find_map(loaded);
        let least_n = f64::max(3.0 * rig.plan.slack_tension_n, 0.1 * (self.peak_load_n - self.zero_n));
        for drop in sudden_drops(&load, self.zero_n, self.peak_load_n, least_n) {
            if drop.soon_n - self.zero_n < 0.5 * (drop.from_n - self.zero_n) {
                // What is drawn on to twice as much afterwards was no release: a shuttle that breaks loose as the winch starts.
                if drop.from_n - self.zero_n < 0.5 * (self.peak_load_n - self.zero_n) {
                    continue;
                }
                self.release_hint_s = Some(drop.time_s);
                break;
            }
            self.partial_drops.push(drop);
        }
    }

    /// The hold is the time before release (or before the tension's last fall) in which the shuttle stood.
    fn find_hold(&mut self, sensors: &Sensors<'_>, load: Option<&Signal>) {
        let Some(loaded_from_s) = self.loaded_from_s.or(self.release_hint_s.map(|_| self.start_s)) else { return };
        let end_s = self.release_hint_s.or_else(|| {
            let high_until_s = self.tension_top_end_s(load)?;
            let drawn_until_s = sensors.position.and_then(|x| deepest_until(x, self.start_s, high_until_s));
            Some(drawn_until_s.map_or(high_until_s, |t| self.before_the_line_gives(load, t)))
        });
        let Some(end_s) = end_s else { return };
        let stood_from_s = match sensors.position {
            Some(position) => standing_since(position, self.start_s, end_s),
            None => load.and_then(|signal| top_of_tension(signal, self.start_s, end_s)),
        };
        self.hold_end_s = Some(end_s);
        self.hold_start_s = stood_from_s.map(|t| t.max(loaded_from_s)).filter(|&t| end_s - t > 5.0 * BIN_S);
    }

    /// A winch that lets down first takes the stiction out of the line, before the shuttle moves: back to before that fall.
    fn before_the_line_gives(&self, load: Option<&Signal>, until_s: f64) -> f64 {
        let Some(load) = load.map(|signal| Binned::new(signal, self.start_s, until_s)) else { return until_s };
        let fallen = |idx: usize| {
            let earlier_n = load.mean(idx.saturating_sub(100)..idx.saturating_sub(20))? - self.zero_n;
            Some(load.bins[idx]?.mean - self.zero_n < (1.0 - GIVEN_SHARE) * earlier_n)
        };
        let held = (0..load.bins.len()).rev().find(|&idx| fallen(idx) == Some(false));
        held.map_or(until_s, |idx| load.time_s(idx))
    }

    /// Without a release: where the tension last stood within a tenth of its peak.
    fn tension_top_end_s(&self, load: Option<&Signal>) -> Option<f64> {
        let load = Binned::new(load?, self.start_s, self.end_s);
        let near_peak_n = self.zero_n + 0.85 * (self.peak_load_n - self.zero_n);
        let found = load.filled().rev().find(|(_, bin)| bin.mean > near_peak_n)?.0;
        Some(load.time_s(found))
    }

    pub(super) fn loaded_at_end(&self) -> bool {
        self.loaded_until_s.is_some_and(|until_s| self.end_s - until_s < 5.0 * BIN_S)
    }
}

/// The least mean over one second, where it is small enough to be an unloaded channel; else zero.
fn unloaded_indication(load: &Binned, peak_n: f64, slack_n: f64) -> f64 {
    let second = (1.0 / BIN_S) as usize;
    let n_starts = load.bins.len().saturating_sub(second);
    let least =
        (0..n_starts).step_by(10).filter_map(|first| load.mean(first..first + second)).fold(f64::INFINITY, f64::min);
    if least.abs() < f64::max(ZERO_SHARE_OF_PEAK * peak_n, slack_n) { least } else { 0.0 }
}

/// Falls of the load within two hundredths of a second, one a place, in order of time.
///
/// A winch lets go of a few newtons in that time, so a twentieth of the peak and a tenth of the load is sudden.
fn sudden_drops(load: &Binned, zero_n: f64, peak_n: f64, least_n: f64) -> Vec<Drop> {
    const LATER: usize = (0.1 / BIN_S) as usize;
    let sudden_n = 0.05 * (peak_n - zero_n);
    let mut drops = Vec::new();
    let mut idx = 2 + SUDDEN_BINS;
    while idx < load.bins.len() {
        let before = load.mean(idx - 2..idx - 1);
        let low = load.bins[idx].map(|bin| bin.min);
        if let (Some(from_n), Some(low_n)) = (before, low)
            && from_n - zero_n > least_n
            && from_n - low_n > sudden_n.max(0.1 * (from_n - zero_n))
        {
            let soon_n = load.mean(idx + 2..idx + 2 + SUDDEN_BINS).unwrap_or(low_n);
            let to_n = load.mean(idx + LATER..idx + 2 * LATER).unwrap_or(soon_n);
            drops.push(Drop { time_s: load.time_s(idx), from_n, low_n, soon_n, to_n });
            idx += LATER;
        } else {
            idx += 1;
        }
    }
    drops
}

/// Without a release line: the shuttle starts toward the exit at once.
fn release_by_motion(sensors: &Sensors<'_>, start_s: f64, end_s: f64) -> Option<f64> {
    if let Some(signal) = sensors.specific_force {
        let force = Binned::new(signal, start_s, end_s);
        let (peak_idx, peak) = force.filled().max_by(|a, b| a.1.mean.total_cmp(&b.1.mean))?;
        let quiet = force.mean(peak_idx.saturating_sub(60)..peak_idx.saturating_sub(10))?;
        let half = quiet + 0.5 * (peak.mean - quiet);
        let first = force.filled().find(|(idx, bin)| *idx + 60 > peak_idx && bin.mean > half)?.0;
        return (peak.mean - quiet > 5.0).then(|| force.time_s(first.saturating_sub(1)) + BIN_S / 2.0);
    }
    let x = Binned::new(sensors.position?, start_s, end_s);
    let fast_m = 1.0 * BIN_S;
    let fast = x.filled().zip(x.filled().skip(1)).find(|((_, a), (_, b))| b.mean - a.mean > fast_m)?.0.0;
    let origin = x.bins[fast]?.mean;
    let still = x
        .filled()
        .rev()
        .skip_while(|(idx, _)| *idx >= fast)
        .find(|(_, bin)| origin - bin.mean >= 0.0 && bin.max - bin.min < STANDING_M)?;
    Some(x.time_s(still.0) + BIN_S / 2.0)
}

/// Since when x stayed within [`STANDING_M`] of where it is just before `end_s`.
fn standing_since(position: &Signal, start_s: f64, end_s: f64) -> Option<f64> {
    let x_end = stats_between(position, end_s - 0.1, end_s - 2.0 * BIN_S)?.mean;
    let x = Binned::new(position, start_s, end_s - 2.0 * BIN_S);
    let moved = x.filled().rev().find(|(_, bin)| (bin.mean - x_end).abs() > STANDING_M);
    Some(moved.map_or(start_s, |(idx, _)| x.time_s(idx) + BIN_S / 2.0))
}

/// Where the shuttle last was drawn furthest before `end_s`: a winch that lets down moves it away from there before the
/// tension has fallen much.
fn deepest_until(position: &Signal, start_s: f64, end_s: f64) -> Option<f64> {
    let x = Binned::new(position, start_s, end_s);
    let deepest_m = x.filled().map(|(_, bin)| bin.mean).min_by(f64::total_cmp)?;
    let (idx, _) = x.filled().rev().find(|(_, bin)| bin.mean - deepest_m < STANDING_M)?;
    Some(x.time_s(idx) + BIN_S / 2.0)
}

/// Without an encoder: the highest tension is where the winch stopped, for a held cord only relaxes.
fn top_of_tension(load: &Signal, start_s: f64, end_s: f64) -> Option<f64> {
    let load = Binned::new(load, start_s, end_s - 2.0 * BIN_S);
    let top = load.filled().max_by(|a, b| a.1.mean.total_cmp(&b.1.mean))?.0;
    Some(load.time_s(top))
}
