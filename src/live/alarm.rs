//! Standing alarms: each cause at most once, as a sentence with cause and advice.
//!
//! An alarm whose cause is gone stays on the board until a person has acknowledged it, unless its cause is one that
//! heals by itself and harmed nothing ([`Cause::latches`]).

use super::happening::{AlarmChange, Happening};
use super::state::AlarmNow;

/// What can be wrong. The order is the order of urgency.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Cause {
    TensionOverLimit,
    /// The cords hold energy and nobody can see how much.
    LoadedAndBlind,
    /// The release line let go, or its cell failed, and the shuttle has not moved.
    ReleasedNotMoving,
    /// A hold lost more tension at once than rubber does.
    FallingInHold,
    /// The shuttle jumped in the hold and was held again.
    HookSlip,
    /// It let go short of the plan's draw.
    EarlyRelease,
    RisingTooFast,
    TensionOverPlan,
    /// A release now could pass the acceleration limit.
    PeakOverLimit,
    /// Another number of cords, free length or zero mark than the rig file's.
    Misrigged,
    TensionBelowPlan,
    /// Elongation near the end of what the cords' card was tested for.
    NearCardEnd,
    /// A release now would miss the launch-speed window.
    OutOfWindow,
    /// A tension cell reads below zero: index in the rig's channels.
    BelowZero(usize),
    LinkLost(u16),
    ChannelSilent(usize),
    /// The very same value without its usual noise.
    ChannelStuck(usize),
    /// At the end of its converter's range.
    ChannelSaturated(usize),
    ChannelNoisy(usize),
    /// A device's clock is known badly.
    ClockPoor(u16),
    /// A device's clock is farther off than the device states.
    ClockBeyond(u16),
    /// A link is up and no sample of it was accepted.
    NoSamples(u16),
    /// The device does not describe a channel that the rig file names.
    ChannelMissing(usize),
    /// A tension cell of the rig file has no calibration.
    Uncalibrated,
    /// A channel reads beyond what its calibration was tested for: index in the rig's channels.
    BeyondCalibration(usize),
    /// A cord that is to come off: index in the rig's list of cords.
    WornCord(usize),
    /// The g limit is above what the proof load allows.
    OverProof,
    /// A calibration that is expired, without record, or whose day can't be told.
    CalibrationDoubt(u16),
    /// The model cannot take the rig file's cords to the planned draw.
    NoPlan,
    /// The disk takes nothing or has too little room.
    Disk,
    /// Recording is slower than promised.
    Journal,
    /// A link that was never up in this run.
    LinkAbsent(u16),
}

impl Cause {
    /// Whether the alarm waits for a person after its cause is gone.
    fn latches(self) -> bool {
        let heals =
            matches!(self, Self::LinkAbsent(_) | Self::ChannelMissing(_) | Self::ClockPoor(_) | Self::OutOfWindow);
        !heals && !matches!(self, Self::ClockBeyond(_) | Self::NoSamples(_))
    }
}

#[derive(Debug)]
struct Standing {
    cause: Cause,
    now: AlarmNow,
}

/// Every alarm that stands or waits for a person. Bounded by the number of causes.
#[derive(Debug, Default)]
pub struct Board {
    standing: Vec<Standing>,
    /// Causes seen but not yet for as long as their alarm asks, since when.
    awaited: Vec<(Cause, i64)>,
}

impl Board {
    /// Raises, or brings the sentence of a standing alarm up to date; tells of the raising only.
    pub fn raise(&mut self, cause: Cause, host_ns: i64, sentence: String) -> Option<Happening> {
        if let Some(standing) = self.standing.iter_mut().find(|standing| standing.cause == cause) {
            standing.now.sentence.clone_from(&sentence);
            if standing.now.active {
                return None;
            }
            standing.now.active = true;
            standing.now.raised_ns = host_ns;
            standing.now.acknowledged_by = None;
        } else {
            let now = AlarmNow { sentence: sentence.clone(), raised_ns: host_ns, active: true, acknowledged_by: None };
            self.standing.push(Standing { cause, now });
            self.standing.sort_by_key(|standing| standing.cause);
        }
        Some(Happening::Alarm { host_ns, sentence, change: AlarmChange::Raised })
    }

    /// The cause is gone.
    pub fn clear(&mut self, cause: Cause, host_ns: i64) -> Option<Happening> {
        let at = self.standing.iter().position(|standing| standing.cause == cause && standing.now.active)?;
        let standing = &mut self.standing[at];
        standing.now.active = false;
        let sentence = standing.now.sentence.clone();
        if !cause.latches() || standing.now.acknowledged_by.is_some() {
            self.standing.remove(at);
        }
        Some(Happening::Alarm { host_ns, sentence, change: AlarmChange::Cleared })
    }

    /// Raises a cause that has been seen without a break for `for_ns`, clears one that is not seen.
    pub fn judge(&mut self, cause: Cause, host_ns: i64, for_ns: i64, seen: Option<String>) -> Option<Happening> {
        let Some(sentence) = seen else {
            self.awaited.retain(|(awaited, _)| *awaited != cause);
            return self.clear(cause, host_ns);
        };
        let since_ns = match self.awaited.iter().find(|(awaited, _)| *awaited == cause) {
            Some((_, since_ns)) => *since_ns,
            None => {
                self.awaited.push((cause, host_ns));
                host_ns
            }
        };
        (host_ns - since_ns >= for_ns).then(|| self.raise(cause, host_ns, sentence)).flatten()
    }

    /// Whether a cause has been seen but not yet for long enough.
    pub fn is_awaited(&self, cause: Cause) -> bool {
        self.awaited.iter().any(|(awaited, _)| *awaited == cause)
    }

    pub fn is_active(&self, cause: Cause) -> bool {
        self.standing.iter().any(|standing| standing.cause == cause && standing.now.active)
    }

    /// `person` has seen everything on the board: what is over leaves it, what stands is marked. Tells how many there
    /// were that nobody had acknowledged.
    pub fn acknowledge(&mut self, person: &str) -> usize {
        let open = |standing: &&mut Standing| standing.now.acknowledged_by.is_none();
        let mut n = 0;
        for standing in self.standing.iter_mut().filter(open) {
            standing.now.acknowledged_by = Some(person.to_owned());
            n += 1;
        }
        self.standing.retain(|standing| standing.now.active);
        n
    }

    /// Most urgent first, those that still stand before those that are over.
    pub fn list(&self) -> Vec<AlarmNow> {
        let mut list: Vec<_> = self.standing.iter().map(|standing| standing.now.clone()).collect();
        list.sort_by_key(|alarm| !alarm.active);
        list
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_alarm_is_told_once_and_waits_for_a_person() {
        let mut board = Board::default();
        assert!(board.raise(Cause::TensionOverLimit, 1, "first".into()).is_some());
        assert!(board.raise(Cause::TensionOverLimit, 2, "second".into()).is_none());
        assert_eq!(board.list()[0].sentence, "second");
        assert!(board.clear(Cause::TensionOverLimit, 3).is_some());
        assert!(board.clear(Cause::TensionOverLimit, 4).is_none());
        assert_eq!(board.list().len(), 1, "gone, but nobody has acknowledged it");
        assert_eq!(board.acknowledge("duty recorder"), 1);
        assert!(board.list().is_empty());
    }

    #[test]
    fn an_acknowledged_alarm_stands_until_its_cause_is_gone() {
        let mut board = Board::default();
        board.raise(Cause::LinkLost(0), 1, "lost".into());
        assert_eq!(board.acknowledge("winch"), 1);
        assert_eq!(board.acknowledge("winch"), 0);
        assert_eq!(board.list()[0].acknowledged_by.as_deref(), Some("winch"));
        board.clear(Cause::LinkLost(0), 2);
        assert!(board.list().is_empty());
    }

    #[test]
    fn the_most_urgent_active_alarm_comes_first() {
        let mut board = Board::default();
        board.raise(Cause::Journal, 1, "journal".into());
        board.raise(Cause::LoadedAndBlind, 2, "blind".into());
        board.raise(Cause::TensionOverLimit, 3, "limit".into());
        board.clear(Cause::TensionOverLimit, 4);
        let sentences: Vec<_> = board.list().into_iter().map(|alarm| alarm.sentence).collect();
        assert_eq!(sentences, ["blind", "journal", "limit"]);
    }

    #[test]
    fn a_link_that_came_late_leaves_nothing_behind() {
        let mut board = Board::default();
        board.raise(Cause::LinkAbsent(1), 1, "absent".into());
        board.clear(Cause::LinkAbsent(1), 2);
        assert!(board.list().is_empty());
    }
}
