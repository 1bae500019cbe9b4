//! What the display knows: the newest snapshot, when it came, what happened lately. No terminal, no clock.

use std::collections::VecDeque;

use crate::feed::message::{Event, Hello, Message, Snapshot};
use crate::live::{CordsNow, Phase};

use super::history::{RailTrace, Range, TimeHistory};
use super::shown::ShownUnits;
use super::theme::Theme;
use super::words::{Freshness, Reading};

const N_EVENTS_KEPT: usize = 200;

/// Everything that [`super::draw`] needs.
#[derive(Debug, Clone)]
pub struct ViewState {
    pub hello: Hello,
    pub theme: Theme,
    pub snapshot: Option<Box<Snapshot>>,
    /// How long ago the newest snapshot came. The owner of the clock keeps it up to date.
    pub since_snapshot_s: f64,
    /// Newest last.
    pub events: VecDeque<Event>,
    pub history: TimeHistory,
    pub trace: RailTrace,
    /// Why there is no connection, while there is none.
    pub lost: Option<String>,
    /// Messages the daemon had to leave out for this client.
    pub n_dropped: u64,
    /// Answer to the last key.
    pub notice: Option<String>,
    pub help: bool,
    pub units: ShownUnits,
    /// Large numbers in place of chart and panels.
    pub big: bool,
    /// What is said in front of everything while a recorded trial is shown; `None` when the display is live.
    pub recorded: Option<String>,
}

/// What the cords' line may say.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum CordsShown {
    Loaded { tension_n: f64, energy_j: Option<f64>, freshness: Freshness },
    Slack,
    Unknown,
}

impl ViewState {
    pub fn new(hello: Hello, theme: Theme) -> Self {
        Self {
            hello,
            theme,
            snapshot: None,
            since_snapshot_s: f64::INFINITY,
            events: VecDeque::new(),
            history: TimeHistory::default(),
            trace: RailTrace::default(),
            lost: None,
            n_dropped: 0,
            notice: None,
            help: false,
            units: ShownUnits::default(),
            big: false,
            recorded: None,
        }
    }

    /// Begins anew, as after a jump in a recorded trial: what was shown is forgotten, choices stay.
    pub fn begin_anew(&mut self) {
        self.snapshot = None;
        self.events.clear();
        self.history = TimeHistory::default();
        self.trace = RailTrace::default();
    }

    /// Takes a message; true when it must be seen at once.
    pub fn apply(&mut self, message: Message) -> bool {
        match message {
            Message::Hello(hello) => self.hello = hello,
            Message::Snapshot(snapshot) => self.take_snapshot(snapshot),
            Message::Event(event) => {
                let urgent = event.kind == "alarm" || event.kind == "phase";
                if self.events.len() == N_EVENTS_KEPT {
                    self.events.pop_front();
                }
                self.events.push_back(event);
                return urgent;
            }
            // For who calibrates.
            Message::Raw(_) => {}
            Message::Dropped { n } => self.n_dropped += n,
            Message::Reply { ok, text, .. } => {
                self.notice = Some(if ok { text } else { format!("refused: {text}") });
            }
            Message::Bye { reason } => self.lost = Some(reason),
        }
        false
    }

    fn take_snapshot(&mut self, snapshot: Box<Snapshot>) {
        self.since_snapshot_s = 0.0;
        self.lost = None;
        let began = |phase| matches!(phase, Phase::WinchBack);
        let was_slack = self.snapshot.as_ref().is_none_or(|had| matches!(had.phase, Phase::Slack | Phase::Rest));
        if began(snapshot.phase) && was_slack {
            self.trace.clear();
        }
        let line = snapshot.channels.iter().find(|channel| channel.role == "release_line_tension");
        if let Some(line) = line.filter(|line| Reading::of(line, 0.0).freshness == Freshness::Fresh) {
            if let (Some(min), Some(max)) = (line.min, line.max) {
                self.history.push(snapshot.host_ns, Range { min, max });
            }
            let drawn = matches!(snapshot.phase, Phase::WinchBack | Phase::Hold | Phase::LetDown);
            if let (Some(x_m), Some(tension_n), true) = (snapshot.x_m, line.max, drawn) {
                self.trace.push(x_m, self.hello.rail_length_m, tension_n);
            }
        }
        self.snapshot = Some(snapshot);
    }

    pub fn snapshot_freshness(&self) -> Freshness {
        if self.snapshot.is_none() { Freshness::Silent } else { Freshness::of(self.since_snapshot_s) }
    }

    /// The newest snapshot unless it is too old to show any of its numbers.
    pub fn current(&self) -> Option<&Snapshot> {
        self.snapshot.as_deref().filter(|_| self.snapshot_freshness() != Freshness::Silent)
    }

    /// Old data never say slack.
    pub fn cords(&self) -> CordsShown {
        let freshness = self.snapshot_freshness();
        match self.current().map(|snapshot| snapshot.cords) {
            Some(CordsNow::Loaded { tension_n, energy_j }) => CordsShown::Loaded { tension_n, energy_j, freshness },
            Some(CordsNow::Slack) if freshness == Freshness::Fresh => CordsShown::Slack,
            _ => CordsShown::Unknown,
        }
    }

    /// The phase, unless the data are too old to tell.
    pub fn phase(&self) -> Phase {
        let phase = self.current().map_or(Phase::Unknown, |snapshot| snapshot.phase);
        let says_slack = matches!(phase, Phase::Slack | Phase::Rest);
        if says_slack && self.snapshot_freshness() != Freshness::Fresh { Phase::Unknown } else { phase }
    }

    /// The newest value of the first channel with a role.
    pub fn reading(&self, role: &str) -> Reading {
        let snapshot = self.snapshot.as_ref();
        let channel = snapshot.and_then(|snapshot| snapshot.channels.iter().find(|channel| channel.role == role));
        channel.map_or(Reading::SILENT, |channel| Reading::of(channel, self.since_snapshot_s))
    }

    pub fn line_tension(&self) -> Reading {
        self.reading("release_line_tension")
    }

    /// Tension of the release line in the chosen unit, or a word.
    pub fn line_text(&self) -> String {
        let line = self.line_tension();
        let shown = Reading { value: line.value.map(|tension_n| self.units.force_value(tension_n)), ..line };
        shown.text(self.units.force.decimals(), self.units.force.symbol())
    }

    pub fn x(&self) -> Reading {
        self.reading("shuttle_position")
    }

    /// Planned tension at x: low, planned, high; none outside the plan's draw.
    pub fn band_at(&self, x_m: f64) -> Option<(f64, f64, f64)> {
        let draw_m = self.hello.zero_mark_x_m - x_m;
        let pair = self.hello.plan_band.windows(2).find(|pair| (pair[0].0..=pair[1].0).contains(&draw_m))?;
        let share = (draw_m - pair[0].0) / (pair[1].0 - pair[0].0);
        let between = |a: f64, b: f64| a + share * (b - a);
        Some((between(pair[0].1, pair[1].1), between(pair[0].2, pair[1].2), between(pair[0].3, pair[1].3)))
    }
}
