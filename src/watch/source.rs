//! Where the display's messages come from: a daemon's feed, or a recorded trial that is played for a debrief.

use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use crate::feed::message::{Command, Event, Hello, Message};
use crate::feed::{ClientError, FeedClient};
use crate::live::{Debrief, Recorded};

const SNAPSHOT_EVERY: Duration = Duration::from_millis(33);
/// How far an arrow key goes.
const SEEK_S: f64 = 5.0;
const FASTEST: f64 = 64.0;
const SLOWEST: f64 = 1.0 / 16.0;

/// What the display follows.
#[derive(Debug)]
pub enum Source {
    /// The socket of a daemon.
    Daemon(PathBuf),
    Trial(Box<TrialPlayer>),
}

/// A trial's time going on with the wall's.
#[derive(Debug)]
pub struct TrialPlayer {
    debrief: Debrief,
    at_s: f64,
    /// Trial seconds for each second.
    pace: f64,
    paused: bool,
    last: Option<Instant>,
    /// Events up to here have been told.
    told_s: f64,
    /// After a jump what came before is shown again.
    fresh: bool,
}

impl TrialPlayer {
    pub fn new(debrief: Debrief, pace: f64) -> Self {
        let (at_s, _) = debrief.span_s();
        Self { debrief, at_s, pace, paused: false, last: None, told_s: f64::NEG_INFINITY, fresh: true }
    }

    pub fn hello(&self) -> Hello {
        Hello::of(self.debrief.rig())
    }

    /// Said in front of everything while a trial is played.
    pub fn banner(&self) -> String {
        let (first_s, last_s) = self.debrief.span_s();
        let state = match (self.paused, self.at_s >= last_s) {
            (true, _) => "paused".to_owned(),
            (false, true) => "at its end".to_owned(),
            (false, false) => format!("x{}", self.pace),
        };
        format!("RECORDED, NOT LIVE: {:.1} of {:.1} s, {state}", self.at_s - first_s, last_s - first_s)
    }

    pub fn pause(&mut self) {
        self.paused = !self.paused;
    }

    pub fn faster(&mut self) {
        self.pace = (2.0 * self.pace).min(FASTEST);
    }

    pub fn slower(&mut self) {
        self.pace = (0.5 * self.pace).max(SLOWEST);
    }

    /// Jumps by so many arrow keys; to the start with negative infinity.
    pub fn seek(&mut self, n_keys: f64) {
        let (first_s, last_s) = self.debrief.span_s();
        self.at_s = (self.at_s + n_keys * SEEK_S).clamp(first_s, last_s);
        self.told_s = f64::NEG_INFINITY;
        self.fresh = true;
    }

    /// What there is to tell at an instant of the wall's clock; true beside it when the view has to begin anew.
    pub fn due(&mut self, now: Instant) -> Option<(bool, Vec<Message>)> {
        let elapsed = self.last.map_or(SNAPSHOT_EVERY, |last| now.saturating_duration_since(last));
        if elapsed < SNAPSHOT_EVERY {
            return None;
        }
        self.last = Some(now);
        let (_, last_s) = self.debrief.span_s();
        if !self.paused && !self.fresh {
            self.at_s = (self.at_s + self.pace * elapsed.as_secs_f64()).min(last_s);
        }
        let fresh = std::mem::take(&mut self.fresh);
        let recorded = self.debrief.recorded_between(self.told_s, self.at_s);
        let mut messages: Vec<Message> = recorded.iter().map(|event| Message::Event(told(event))).collect();
        self.told_s = self.at_s;
        messages.push(Message::Snapshot(Box::new(self.debrief.snapshot(self.at_s))));
        Some((fresh, messages))
    }
}

fn told(event: &Recorded) -> Event {
    Event {
        host_ns: (event.time_s * 1e9) as i64,
        kind: event.kind.clone(),
        source: event.source.clone(),
        person: event.person.clone(),
        text: event.text.clone(),
    }
}

/// A source that answers, or when to try again.
pub(super) enum Link {
    Up(Box<FeedClient>),
    Down { try_at: Instant },
    Trial(Box<TrialPlayer>),
}

impl Link {
    pub(super) fn open(source: Source) -> Result<(Self, Hello, Option<PathBuf>), ClientError> {
        match source {
            Source::Daemon(socket) => {
                let client = connected(&socket)?;
                let hello = client.hello().clone();
                Ok((Self::Up(client), hello, Some(socket)))
            }
            Source::Trial(player) => {
                let hello = player.hello();
                Ok((Self::Trial(player), hello, None))
            }
        }
    }

    pub(super) fn player(&mut self) -> Option<&mut TrialPlayer> {
        match self {
            Self::Trial(player) => Some(player),
            Self::Up(_) | Self::Down { .. } => None,
        }
    }

    /// False when there is nobody to take it.
    pub(super) fn send(&mut self, command: &Command) -> Result<bool, ClientError> {
        match self {
            Self::Up(client) => client.send(command).map(|()| true),
            Self::Down { .. } | Self::Trial(_) => Ok(false),
        }
    }
}

pub(super) fn connected(socket: &Path) -> Result<Box<FeedClient>, ClientError> {
    FeedClient::connect(socket).map(Box::new)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::live::Phase;
    use crate::live::debrief::tests::debrief;

    fn phase(messages: &[Message]) -> Option<Phase> {
        messages.iter().rev().find_map(|message| match message {
            Message::Snapshot(snapshot) => Some(snapshot.phase),
            _ => None,
        })
    }

    #[test]
    fn a_recorded_trial_goes_on_with_the_walls_clock_and_stops_when_told() {
        let mut player = TrialPlayer::new(debrief(), 2.0);
        let start = Instant::now();
        let after = |s: f64| start + Duration::from_secs_f64(s);
        let (anew, first) = player.due(start).unwrap();
        assert!(anew && phase(&first) == Some(Phase::Unknown), "{first:?}");
        assert!(player.due(after(0.01)).is_none(), "no more than thirty a second");
        let (anew, hold) = player.due(after(4.0)).unwrap();
        assert!(!anew && phase(&hold) == Some(Phase::Hold), "8 s of the trial after 4 s at twice the pace");
        assert_eq!(hold.iter().filter(|message| matches!(message, Message::Event(_))).count(), 2);
        player.pause();
        player.due(after(20.0)).unwrap();
        assert!(player.banner().contains("8.0 of 15.0 s, paused"), "{}", player.banner());
        player.pause();
        player.seek(1.0);
        let (anew, rest) = player.due(after(20.1)).unwrap();
        assert!(anew && phase(&rest) == Some(Phase::Rest), "{}", player.banner());
        player.seek(f64::NEG_INFINITY);
        let (_, first) = player.due(after(20.2)).unwrap();
        assert_eq!(phase(&first), Some(Phase::Unknown));
        player.due(after(100.0)).unwrap();
        assert!(player.banner().contains("at its end"), "{}", player.banner());
    }
}
