//! When a trial opens and closes: from the first tension to rest, and never closed over loaded or unknown cords.

use thiserror::Error;

use super::happening::Happening;
use super::state::{CordsNow, Phase};

/// Kept from before the first tension.
const PREROLL_NS: i64 = 2_000_000_000;
/// Kept after rest, or after slack without a launch.
const POSTROLL_NS: i64 = 2_000_000_000;

/// Why a trial stays as it is.
#[derive(Debug, Clone, Copy, PartialEq, Error)]
#[non_exhaustive]
pub enum KeptOpen {
    #[error("no trial is open")]
    NoneOpen,
    #[error("the trial stays open: the cords are loaded with {tension_n:.0} N; let them down first")]
    Loaded { tension_n: f64 },
    #[error(
        "the trial stays open: the tension is unknown, treat the cords as loaded; restore every tension cell first"
    )]
    Unknown,
}

#[derive(Debug, Clone, Copy, PartialEq)]
struct Open {
    /// Cords have been seen loaded since it opened.
    was_loaded: bool,
    was_launched: bool,
}

/// The trial that is open, if any.
#[derive(Debug, Default)]
pub struct TrialKeeper {
    open: Option<Open>,
}

impl TrialKeeper {
    pub fn is_open(&self) -> bool {
        self.open.is_some()
    }

    pub fn resume(&mut self) {
        self.open.get_or_insert(Open { was_loaded: true, was_launched: false });
    }

    pub fn forget(&mut self) {
        self.open = None;
    }

    pub fn open_by_hand(&mut self, host_ns: i64) -> Option<Happening> {
        if self.is_open() {
            return None;
        }
        self.open = Some(Open { was_loaded: false, was_launched: false });
        Some(Happening::OpenTrial { host_ns, preroll_from_host_ns: host_ns - PREROLL_NS })
    }

    pub fn close_by_hand(&mut self, host_ns: i64, person: &str, cords: &CordsNow) -> Result<Happening, KeptOpen> {
        if !self.is_open() {
            return Err(KeptOpen::NoneOpen);
        }
        match cords {
            CordsNow::Loaded { tension_n, .. } => Err(KeptOpen::Loaded { tension_n: *tension_n }),
            CordsNow::Unknown => Err(KeptOpen::Unknown),
            CordsNow::Slack => {
                self.open = None;
                Ok(Happening::CloseTrial { host_ns, reason: format!("closed by {person}") })
            }
        }
    }

    /// Judges one instant.
    pub fn judge(&mut self, host_ns: i64, phase: Phase, since_ns: i64, cords: &CordsNow) -> Option<Happening> {
        let drawn = matches!(phase, Phase::WinchBack | Phase::Hold | Phase::LetDown | Phase::Launch);
        let Some(open) = &mut self.open else {
            if !drawn {
                return None;
            }
            self.open = Some(Open { was_loaded: true, was_launched: phase == Phase::Launch });
            return Some(Happening::OpenTrial { host_ns, preroll_from_host_ns: host_ns - PREROLL_NS });
        };
        open.was_loaded |= drawn;
        open.was_launched |= phase == Phase::Launch;
        let over = matches!(phase, Phase::Slack | Phase::Rest) && host_ns - since_ns >= POSTROLL_NS;
        if !(open.was_loaded && over && *cords == CordsNow::Slack) {
            return None;
        }
        let reason = if open.was_launched { "launched and at rest" } else { "slack again without a launch" };
        self.open = None;
        Some(Happening::CloseTrial { host_ns, reason: reason.to_owned() })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const S: i64 = 1_000_000_000;
    const LOADED: CordsNow = CordsNow::Loaded { tension_n: 40.0, energy_j: Some(3.0) };

    #[test]
    fn a_trial_never_closes_while_tension_stands_or_is_unknown() {
        let mut keeper = TrialKeeper::default();
        assert!(keeper.judge(S, Phase::WinchBack, S, &LOADED).is_some());
        for cords in [LOADED, CordsNow::Unknown] {
            for phase in [Phase::Rest, Phase::Slack, Phase::Unknown] {
                assert_eq!(keeper.judge(1_000 * S, phase, 2 * S, &cords), None);
            }
            assert!(keeper.close_by_hand(1_000 * S, "winch", &cords).is_err());
        }
        assert!(matches!(
            keeper.judge(1_001 * S, Phase::Rest, 2 * S, &CordsNow::Slack),
            Some(Happening::CloseTrial { .. })
        ));
    }

    #[test]
    fn a_trial_opened_by_hand_waits_for_its_first_tension() {
        let mut keeper = TrialKeeper::default();
        assert!(keeper.open_by_hand(10 * S).is_some());
        assert_eq!(keeper.open_by_hand(11 * S), None);
        assert_eq!(keeper.judge(100 * S, Phase::Slack, S, &CordsNow::Slack), None);
        assert!(keeper.close_by_hand(101 * S, "winch", &CordsNow::Slack).is_ok());
        assert_eq!(keeper.close_by_hand(102 * S, "winch", &CordsNow::Slack), Err(KeptOpen::NoneOpen));
    }

    #[test]
    fn a_resumed_trial_is_not_opened_twice_and_closes_once_slack() {
        let mut keeper = TrialKeeper::default();
        keeper.resume();
        assert_eq!(keeper.judge(5 * S, Phase::Hold, 4 * S, &LOADED), None);
        let closed = keeper.judge(9 * S, Phase::Slack, 6 * S, &CordsNow::Slack);
        assert!(matches!(closed, Some(Happening::CloseTrial { reason, .. }) if reason.contains("without a launch")));
    }
}
