//! The channels a reading may trust, found by role, and why the others were refused.
//!
//! A channel that contradicts itself or the rig (time running backward, values that are no numbers, a tension that
//! goes negative under load, an encoder that counts the wrong way) is left out whole: a result that needs it is
//! absent with this reason.

use crate::calibration::Signal;
use crate::rig::{Rig, Role};

use super::series::{BIN_S, Binned};

#[derive(Debug, Clone, Default)]
pub(super) struct Sensors<'a> {
    pub line: Option<&'a Signal>,
    pub anchor: Option<&'a Signal>,
    /// Cells at the left and the right anchor.
    pub left: Option<&'a Signal>,
    pub right: Option<&'a Signal>,
    pub position: Option<&'a Signal>,
    pub specific_force: Option<&'a Signal>,
    pub refused: Vec<(Role, String)>,
}

impl<'a> Sensors<'a> {
    pub(super) fn new(signals: &'a [Signal], rig: &Rig) -> Self {
        let mut sensors = Self::default();
        for signal in signals {
            if let Some(reason) = broken(signal) {
                sensors.refuse(signal.role, format!("channel {}: {reason}", signal.name));
                continue;
            }
            if let Some(slot) = sensors.slot(signal.role) {
                *slot = slot.or(Some(signal));
            }
        }
        sensors.refuse_reversed_tension(rig);
        sensors.refuse_backward_encoder(rig);
        sensors
    }

    fn slot(&mut self, role: Role) -> Option<&mut Option<&'a Signal>> {
        match role {
            Role::ReleaseLineTension => Some(&mut self.line),
            Role::CordAnchorTension => Some(&mut self.anchor),
            Role::LeftAnchorTension => Some(&mut self.left),
            Role::RightAnchorTension => Some(&mut self.right),
            Role::ShuttlePosition => Some(&mut self.position),
            Role::ShuttleSpecificForce => Some(&mut self.specific_force),
        }
    }

    pub(super) fn refuse(&mut self, role: Role, reason: String) {
        if let Some(slot) = self.slot(role) {
            *slot = None;
        }
        self.refused.push((role, reason));
    }

    /// Why there is no channel for a role.
    pub(super) fn why_not(&self, role: Role) -> String {
        let refusal = self.refused.iter().find(|(refused, _)| *refused == role);
        refusal.map_or_else(|| format!("no channel with role {}", role.word()), |(_, reason)| reason.clone())
    }

    /// First and last instant that any channel covers.
    pub(super) fn extent_s(&self) -> Option<(f64, f64)> {
        let all = [self.line, self.anchor, self.position, self.specific_force];
        all.iter().flatten().filter_map(|signal| Some((*signal.time_s.first()?, *signal.time_s.last()?))).fold(
            None,
            |extent, (first, last)| match extent {
                None => Some((first, last)),
                Some((start, end)) => Some((f64::min(start, first), f64::max(end, last))),
            },
        )
    }

    fn refuse_reversed_tension(&mut self, rig: &Rig) {
        let reversed = |signal: Option<&Signal>| {
            let signal = signal?;
            let binned = Binned::new(signal, *signal.time_s.first()?, *signal.time_s.last()?);
            let least = binned.filled().map(|(_, bin)| bin.mean).fold(f64::INFINITY, f64::min);
            let greatest = binned.filled().map(|(_, bin)| bin.mean).fold(f64::NEG_INFINITY, f64::max);
            let slack_n = rig.plan.slack_tension_n;
            (least < -3.0 * slack_n && -least > 2.0 * greatest).then(|| {
                format!(
                    "channel {} goes to {least:.0} N and never above {greatest:.0} N: a line cannot push, its sign is reversed",
                    signal.name
                )
            })
        };
        let cells = [
            (Role::ReleaseLineTension, self.line),
            (Role::CordAnchorTension, self.anchor),
            (Role::LeftAnchorTension, self.left),
            (Role::RightAnchorTension, self.right),
        ];
        let refused = cells.map(|(role, signal)| (role, reversed(signal)));
        for (role, reason) in refused {
            if let Some(reason) = reason {
                self.refuse(role, reason);
            }
        }
    }

    /// Cords pull toward the exit, so tension rises only while x falls.
    fn refuse_backward_encoder(&mut self, rig: &Rig) {
        if let Some(reason) = self.backward_encoder(rig) {
            self.refuse(Role::ShuttlePosition, reason);
        }
    }

    fn backward_encoder(&self, rig: &Rig) -> Option<String> {
        let (position, tension) = (self.position?, self.line.or(self.anchor)?);
        let (start_s, end_s) = self.extent_s()?;
        let (x, load) = (Binned::new(position, start_s, end_s), Binned::new(tension, start_s, end_s));
        let (peak_idx, peak) = load.filled().max_by(|a, b| a.1.mean.total_cmp(&b.1.mean))?;
        let (low_idx, low) =
            load.filled().take_while(|(idx, _)| *idx <= peak_idx).min_by(|a, b| a.1.mean.total_cmp(&b.1.mean))?;
        if peak.mean - low.mean < 5.0 * rig.plan.slack_tension_n {
            return None;
        }
        let near = (0.2 / BIN_S) as usize;
        let moved_m = x.mean(peak_idx.saturating_sub(near)..peak_idx + 1)? - x.mean(low_idx..low_idx + near)?;
        (moved_m > 0.05).then(|| {
            format!(
                "channel {}: x rose by {moved_m:.2} m while the tension rose from {:.0} to {:.0} N; drawing back must lower it, so the encoder runs backward",
                position.name, low.mean, peak.mean
            )
        })
    }
}

/// Values at which a channel saturates, lower first: its stated range, and levels at which it stands for 2 ms or more
/// at its own extreme, where noise would move a channel that still follows.
pub(super) fn limits(signal: &Signal) -> (f64, f64) {
    let (low, high) = signal.range.unwrap_or((f64::NEG_INFINITY, f64::INFINITY));
    let least = signal.value.iter().copied().fold(f64::INFINITY, f64::min);
    let greatest = signal.value.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    if greatest - least < 10.0 * signal.resolution {
        return (low, high);
    }
    let n_stuck = ((0.002 * signal.nominal_rate_hz) as usize).max(5);
    let stuck_at = |level: f64| {
        let runs = signal.value.chunk_by(|a, b| a == b);
        runs.filter(|run| run.first() == Some(&level)).any(|run| run.len() >= n_stuck)
    };
    (if stuck_at(least) { low.max(least) } else { low }, if stuck_at(greatest) { high.min(greatest) } else { high })
}

/// Why a signal cannot be used at all.
fn broken(signal: &Signal) -> Option<String> {
    if signal.time_s.len() != signal.value.len() {
        return Some(format!("{} times for {} values", signal.time_s.len(), signal.value.len()));
    }
    if signal.time_s.len() < 2 {
        return Some(format!("only {} samples", signal.time_s.len()));
    }
    if !signal.nominal_rate_hz.is_finite() || signal.nominal_rate_hz <= 0.0 {
        return Some(format!("a nominal rate of {} samples a second", signal.nominal_rate_hz));
    }
    if let Some(idx) =
        signal.time_s.windows(2).position(|pair| pair[1].partial_cmp(&pair[0]) != Some(std::cmp::Ordering::Greater))
    {
        return Some(format!("time does not advance at sample {}", idx + 1));
    }
    if !signal.time_s.iter().all(|t| t.is_finite()) {
        return Some("a time that is no number".to_owned());
    }
    let bad = signal.value.iter().position(|value| !value.is_finite())?;
    Some(format!("the value of sample {bad} is no number"))
}
