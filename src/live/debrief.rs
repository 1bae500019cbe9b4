//! A recorded trial as a row of snapshots, for a debrief at the live display.
//!
//! Measured values are the trial's signals, phases and events those that were recorded; forecast, cords' fit and hold are worked out
//! again from them, as they were live. Links, journal and alarms are not told: what was alarmed stands among the events.

use crate::calibration::Signal;
use crate::rig::{Rig, Role};

use super::drawn::{Drawn, Pull};
use super::plan::Plan;
use super::state::{ChannelNow, CordsNow, LaunchSeen, Phase, Snapshot, TrialNow};

/// A value older than this is none.
const SILENT_S: f64 = 1.0;
/// Spacing at which forecast and hold are followed on the way to an instant.
const STEP_S: f64 = 0.1;

/// Something that was recorded, in trial seconds.
#[derive(Debug, Clone, PartialEq)]
pub struct Recorded {
    pub time_s: f64,
    pub kind: String,
    pub source: String,
    pub person: Option<String>,
    pub text: String,
}

/// A trial that can be shown at any instant.
#[derive(Debug)]
pub struct Debrief {
    rig: Rig,
    plan: Option<Plan>,
    trial_id: String,
    signals: Vec<Signal>,
    events: Vec<Recorded>,
    /// When each phase began; rising.
    phases: Vec<(f64, Phase)>,
    launched: Option<LaunchSeen>,
    drawn: Drawn,
    /// Up to where `drawn` has followed; the last snapshot's instant.
    at_s: f64,
}

impl Debrief {
    /// `launched` is what the trial's reading gives, shown from rest on.
    pub fn new(
        rig: Rig,
        trial_id: String,
        signals: Vec<Signal>,
        mut events: Vec<Recorded>,
        launched: Option<LaunchSeen>,
    ) -> Self {
        events.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
        let phase = |event: &Recorded| {
            let words = event.text.split(" after ").next().unwrap_or_default();
            (event.kind == "phase").then(|| Phase::named(words)).flatten().map(|phase| (event.time_s, phase))
        };
        let phases = events.iter().filter_map(phase).collect();
        let mut debrief = Self {
            plan: Plan::new(&rig).ok(),
            drawn: Drawn::new(&rig),
            rig,
            trial_id,
            signals,
            events,
            phases,
            launched,
            at_s: 0.0,
        };
        debrief.at_s = debrief.span_s().0;
        debrief
    }

    /// First and last instant that any signal covers; zeros without one.
    pub fn span_s(&self) -> (f64, f64) {
        let ends = self.signals.iter().filter_map(|signal| Some((*signal.time_s.first()?, *signal.time_s.last()?)));
        ends.reduce(|all, one| (all.0.min(one.0), all.1.max(one.1))).unwrap_or((0.0, 0.0))
    }

    pub fn rig(&self) -> &Rig {
        &self.rig
    }

    /// What was recorded after `from_s` up to `to_s`.
    pub fn recorded_between(&self, from_s: f64, to_s: f64) -> &[Recorded] {
        let place = |at_s: f64| self.events.partition_point(|event| event.time_s <= at_s);
        let (from, to) = (place(from_s), place(to_s));
        &self.events[from.min(to)..to]
    }

    /// The state at an instant; extremes are those since the last snapshot. Going back starts over.
    pub fn snapshot(&mut self, at_s: f64) -> Snapshot {
        let (first_s, last_s) = self.span_s();
        let at_s = at_s.clamp(first_s, last_s);
        if at_s < self.at_s {
            self.drawn = Drawn::new(&self.rig);
            self.at_s = first_s;
        }
        let from_s = self.at_s;
        self.follow(at_s);
        let (since_s, phase) = self.phase(at_s);
        let x_m = self.level(Role::ShuttlePosition, at_s);
        let seen = matches!(phase, Phase::Rest | Phase::Slack)
            && self.phases.iter().any(|(t, p)| *t <= at_s && *p == Phase::Launch);
        let pull = self.pull(at_s);
        Snapshot {
            host_ns: nanoseconds(at_s),
            wall: String::new(),
            phase,
            phase_s: at_s - since_s,
            cords: self.cords(at_s),
            channels: self.signals.iter().map(|signal| channel(signal, from_s, at_s)).collect(),
            x_m,
            draw_m: x_m.map(|x_m| self.rig.draw_m(x_m)),
            released_now: self.drawn.released_now,
            to_go: self.drawn.to_go(&self.rig, self.plan.as_ref(), phase, pull),
            hold: self.drawn.hold_now(&self.rig),
            cords_fit: self.drawn.cords_fit(&self.rig),
            last_launch: self.launched.filter(|_| seen),
            links: Vec::new(),
            journal: None,
            trial: Some(TrialNow { id: self.trial_id.clone(), open_s: at_s - first_s }),
            alarms: Vec::new(),
        }
    }

    /// Brings forecast and hold up to an instant.
    fn follow(&mut self, to_s: f64) {
        while self.at_s < to_s {
            let before = self.phase(self.at_s).1;
            self.at_s = (self.at_s + STEP_S).min(to_s);
            let phase = self.phase(self.at_s).1;
            let host_ns = nanoseconds(self.at_s);
            if phase != before {
                self.drawn.entered(before, phase, host_ns);
            }
            let pull = self.pull(self.at_s);
            self.drawn.follow(&self.rig, self.plan.as_ref(), phase, pull, host_ns);
        }
    }

    /// Since when, and which.
    fn phase(&self, at_s: f64) -> (f64, Phase) {
        let began = self.phases.iter().take_while(|(time_s, _)| *time_s <= at_s).last();
        began.copied().unwrap_or((self.span_s().0, Phase::Unknown))
    }

    /// Newest value of a role unless it is too old.
    fn level(&self, role: Role, at_s: f64) -> Option<f64> {
        let signal = self.signals.iter().find(|signal| signal.role == role)?;
        newest(signal, at_s).filter(|(_, age_s)| *age_s < SILENT_S).map(|(value, _)| value)
    }

    fn pull(&self, at_s: f64) -> Option<Pull> {
        Some(Pull {
            line_n: self.level(Role::ReleaseLineTension, at_s)?,
            x_m: self.level(Role::ShuttlePosition, at_s)?,
        })
    }

    /// As live: slack needs every cell fresh and below the threshold.
    fn cords(&self, at_s: f64) -> CordsNow {
        let cells = || self.signals.iter().filter(|signal| signal.role.is_tension());
        let fresh = |signal: &Signal| newest(signal, at_s).filter(|(_, age_s)| *age_s < SILENT_S);
        let levels: Vec<f64> = cells().filter_map(fresh).map(|(value, _)| value).collect();
        let greatest_n = levels.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        if greatest_n > self.rig.plan.slack_tension_n {
            let draw_m = self.level(Role::ShuttlePosition, at_s).map(|x_m| self.rig.draw_m(x_m));
            let energy_j = self.plan.as_ref().map(|plan| plan.energy_j(greatest_n, draw_m));
            return CordsNow::Loaded { tension_n: greatest_n, energy_j };
        }
        let all = !levels.is_empty() && levels.len() == cells().count();
        if all { CordsNow::Slack } else { CordsNow::Unknown }
    }
}

fn nanoseconds(at_s: f64) -> i64 {
    (at_s * 1e9) as i64
}

/// The last value up to an instant, and its age.
fn newest(signal: &Signal, at_s: f64) -> Option<(f64, f64)> {
    let idx = signal.time_s.partition_point(|time_s| *time_s <= at_s).checked_sub(1)?;
    Some((*signal.value.get(idx)?, at_s - signal.time_s[idx]))
}

fn channel(signal: &Signal, from_s: f64, at_s: f64) -> ChannelNow {
    let now = newest(signal, at_s);
    let place = |time_s: f64| signal.time_s.partition_point(|t| *t <= time_s);
    let (from, to) = (place(from_s), place(at_s).min(signal.value.len()));
    let since = &signal.value[from.min(to)..to];
    ChannelNow {
        name: signal.name.clone(),
        role: signal.role.word().to_owned(),
        unit: signal.role.unit().to_owned(),
        value: now.map(|now| now.0),
        min: since.iter().copied().reduce(f64::min).or(now.map(|now| now.0)),
        max: since.iter().copied().reduce(f64::max).or(now.map(|now| now.0)),
        age_s: now.map(|now| now.1),
    }
}

#[cfg(test)]
pub(crate) mod tests {
    use super::*;

    /// Drawn from 2 s to 6 s to 400 N, released at 10 s. Invented data.
    pub(crate) fn debrief() -> Debrief {
        let rig = crate::rig::testing::north_pier();
        let time_s: Vec<f64> = (0..1500).map(|k| f64::from(k) * 0.01).collect();
        let drawn = |t: f64| if t < 10.0 { ((t - 2.0) / 4.0).clamp(0.0, 1.0) } else { 0.0 };
        let signal = |name: &str, role: Role, value: &dyn Fn(f64) -> f64| Signal {
            name: name.into(),
            role,
            value: time_s.iter().map(|t| value(*t)).collect(),
            time_s: time_s.clone(),
            zero_uncertainty: 0.5,
            scale_relative_uncertainty: 1e-3,
            time_uncertainty_s: 1e-5,
            nominal_rate_hz: 100.0,
            bandwidth_hz: None,
            resolution: 0.1,
            range: None,
        };
        let mut anchor = signal("anchor", Role::CordAnchorTension, &|t| 410.0 * drawn(t));
        anchor.time_s.truncate(1300);
        anchor.value.truncate(1300);
        let signals = vec![
            signal("line", Role::ReleaseLineTension, &|t| 400.0 * drawn(t)),
            anchor,
            signal("encoder", Role::ShuttlePosition, &|t| 4.0 - 2.6 * drawn(t)),
        ];
        let event = |time_s: f64, text: &str| Recorded {
            time_s,
            kind: "phase".into(),
            source: "live".into(),
            person: None,
            text: text.into(),
        };
        let events = vec![
            event(2.1, "winch-back after slack"),
            event(6.2, "hold after winch-back"),
            event(10.03, "launch after hold"),
            event(10.6, "rest after run-out"),
        ];
        let launched = Some(LaunchSeen { launch_speed_mps: 12.3, peak_g: 5.0 });
        Debrief::new(rig, "000001-abcdef".into(), signals, events, launched)
    }

    #[test]
    fn a_trial_is_shown_as_it_was_and_backward_too() {
        let mut debrief = debrief();
        let hold = debrief.snapshot(8.0);
        assert_eq!(hold.phase, Phase::Hold);
        assert!((hold.phase_s - 1.8).abs() < 1e-9);
        assert!(matches!(hold.cords, CordsNow::Loaded { tension_n, .. } if (tension_n - 410.0).abs() < 1e-9));
        assert!(hold.released_now.is_some() && hold.hold.is_some(), "{hold:?}");
        let rest = debrief.snapshot(11.0);
        assert_eq!((rest.phase, rest.cords), (Phase::Rest, CordsNow::Slack));
        assert_eq!(rest.last_launch.map(|seen| seen.launch_speed_mps), Some(12.3));
        let again = debrief.snapshot(8.0);
        assert_eq!((again.phase, again.cords, again.last_launch), (hold.phase, hold.cords, None));
        assert_eq!(debrief.recorded_between(2.1, 10.03).len(), 2);
    }

    #[test]
    fn a_cell_that_fell_silent_is_never_slack() {
        let mut debrief = debrief();
        assert_eq!(debrief.snapshot(14.5).cords, CordsNow::Unknown);
    }

    #[test]
    fn a_spike_between_two_snapshots_is_kept() {
        let mut debrief = debrief();
        debrief.snapshot(7.0);
        let at = debrief.signals[0].time_s.partition_point(|t| *t < 7.02);
        debrief.signals[0].value[at] = 870.0;
        assert_eq!(debrief.snapshot(7.05).channels[0].max, Some(870.0));
    }
}
