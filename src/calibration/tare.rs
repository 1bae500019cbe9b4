//! The zero of a cell, set anew while the cords are slack. Apart from calibration: the scale stays the record's.

use std::fmt;
use std::str::FromStr;

use thiserror::Error;

use crate::rig::{Coefficients, Role};

use super::value_per_count;

/// A zero that was set anew. As text: `line: zero 12000 to 12034.5 counts, 0.017 N were read there`.
#[derive(Debug, Clone, PartialEq)]
pub struct Tare {
    pub channel: String,
    pub old_counts: f64,
    pub new_counts: f64,
    /// What the cell read before, N.
    pub level_n: f64,
}

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum TareError {
    #[error(
        "{channel}: an accelerometer is never tared: at rest on the rail it must read g sin of the incline; calibrate it by turning it ±1 g"
    )]
    Accelerometer { channel: String },
    #[error("{channel}: an encoder is not tared: bring the shuttle to a mark, or calibrate it along the marks")]
    Encoder { channel: String },
    #[error("{channel}: the cords are not known to be slack: a tare would hide their tension; let them down first")]
    NotSlack { channel: String },
    #[error("{channel}: no fresh second of values: check sensor, device and cable")]
    NoValue { channel: String },
    #[error(
        "{channel}: the reading has not settled, it moved by {moved_n:.2} N in the last two seconds: wait, then tare"
    )]
    Unsettled { channel: String, moved_n: f64 },
    #[error(
        "{channel}: the zero would be {away_n:+.1} N away from its calibration, {allowed_n:.1} N are allowed: check the cell, calibrate it anew"
    )]
    TooFar { channel: String, away_n: f64, allowed_n: f64 },
}

/// What was read of a cell when its tare was asked for.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Level {
    /// Mean over the last second, N; none where the channel is silent.
    pub newest_n: Option<f64>,
    /// Mean over the second before it, N.
    pub before_n: Option<f64>,
    pub slack: bool,
}

/// The zero that makes a slack cell read nothing. `record_zero_counts` is the calibration's, `now` what is in force.
///
/// # Errors
/// [`TareError`]: not a cell, not slack, silent, unsettled, or further than `allowed_n` from the calibration's zero.
pub fn tare(
    (channel, role): (&str, Role),
    now: &Coefficients,
    record_zero_counts: f64,
    level: Level,
    allowed_n: f64,
) -> Result<Tare, TareError> {
    let channel = || channel.to_owned();
    match role {
        Role::ShuttleSpecificForce => return Err(TareError::Accelerometer { channel: channel() }),
        Role::ShuttlePosition => return Err(TareError::Encoder { channel: channel() }),
        _ => {}
    }
    if !level.slack {
        return Err(TareError::NotSlack { channel: channel() });
    }
    let (Some(level_n), Some(before_n)) = (level.newest_n, level.before_n) else {
        return Err(TareError::NoValue { channel: channel() });
    };
    let moved_n = (level_n - before_n).abs();
    if moved_n > 0.1 * allowed_n {
        return Err(TareError::Unsettled { channel: channel(), moved_n });
    }
    let n_per_count = value_per_count(now, now.zero_counts);
    let new_counts = now.zero_counts + level_n / n_per_count;
    let away_n = (new_counts - record_zero_counts) * n_per_count;
    if !away_n.is_finite() || away_n.abs() > allowed_n {
        return Err(TareError::TooFar { channel: channel(), away_n, allowed_n });
    }
    Ok(Tare { channel: channel(), old_counts: now.zero_counts, new_counts, level_n })
}

impl Tare {
    /// What stands before a tare's text in a trial that opened while it held.
    pub const IN_FORCE: &str = "in force: ";
}

impl fmt::Display for Tare {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        let Self { channel, old_counts, new_counts, level_n } = self;
        write!(f, "{channel}: zero {old_counts} to {new_counts} counts, {level_n:.3} N were read there")
    }
}

/// The text is not that of a tare.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
#[error("no tare in this text")]
pub struct NoTare;

impl FromStr for Tare {
    type Err = NoTare;

    fn from_str(text: &str) -> Result<Self, NoTare> {
        let (channel, rest) = text.split_once(": zero ").ok_or(NoTare)?;
        let (old, rest) = rest.split_once(" to ").ok_or(NoTare)?;
        let (new, rest) = rest.split_once(" counts, ").ok_or(NoTare)?;
        let level = rest.strip_suffix(" N were read there").ok_or(NoTare)?;
        let number = |text: &str| text.parse().ok().filter(|value: &f64| value.is_finite()).ok_or(NoTare);
        Ok(Self {
            channel: channel.to_owned(),
            old_counts: number(old)?,
            new_counts: number(new)?,
            level_n: number(level)?,
        })
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    fn cell() -> Coefficients {
        Coefficients {
            zero_counts: 12_000.0,
            coefficients: vec![0.0, 5e-4],
            zero_uncertainty: 0.3,
            scale_relative_uncertainty: 0.001,
        }
    }

    fn at(newest_n: f64, slack: bool) -> Level {
        Level { newest_n: Some(newest_n), before_n: Some(newest_n + 0.1), slack }
    }

    fn tared(role: Role, level: Level) -> Result<Tare, TareError> {
        tare(("line", role), &cell(), 12_000.0, level, 15.0)
    }

    #[test]
    fn a_slack_cell_reads_nothing_after_its_tare() {
        let found = tared(Role::ReleaseLineTension, at(2.5, true)).unwrap();
        assert_eq!(found.new_counts, 17_000.0);
        assert_eq!(found.to_string(), "line: zero 12000 to 17000 counts, 2.500 N were read there");
        let after = Coefficients { zero_counts: found.new_counts, ..cell() };
        assert!(super::super::to_value(&after, 12_000.0 + 2.5 / 5e-4).abs() < 1e-9);
    }

    #[test]
    fn a_tare_is_refused_unless_slack_settled_and_near_its_calibration() {
        let said = |role, level| tared(role, level).expect_err("must be refused").to_string();
        assert!(said(Role::ReleaseLineTension, at(2.0, false)).contains("not known to be slack"));
        assert!(said(Role::ShuttleSpecificForce, at(1.0, true)).contains("never tared"));
        assert!(said(Role::ShuttlePosition, at(0.0, true)).contains("not tared"));
        assert!(said(Role::CordAnchorTension, at(20.0, true)).contains("+20.0 N away from its calibration"));
        let moving = Level { newest_n: Some(1.0), before_n: Some(4.0), slack: true };
        assert!(said(Role::CordAnchorTension, moving).contains("has not settled, it moved by 3.00 N"));
        let silent = Level { newest_n: None, before_n: None, slack: true };
        assert!(said(Role::CordAnchorTension, silent).contains("no fresh second"));
    }

    #[test]
    fn tares_can_not_walk_away_from_the_calibration() {
        let walked = Coefficients { zero_counts: 12_000.0 + 28_000.0, ..cell() };
        let result = tare(("line", Role::ReleaseLineTension), &walked, 12_000.0, at(2.0, true), 15.0);
        assert!(matches!(result, Err(TareError::TooFar { .. })), "14 N were taken before, 2 N more are over 15 N");
    }

    proptest! {
        #[test]
        fn a_tare_comes_back_from_its_text(old in -8e6..8e6f64, new in -8e6..8e6f64, name in "[a-z-]{1,10}") {
            let tare = Tare { channel: name, old_counts: old, new_counts: new, level_n: 0.125 };
            prop_assert_eq!(tare.to_string().parse::<Tare>(), Ok(tare));
        }

        #[test]
        fn no_text_makes_it_panic(text in "(line|: zero |to| counts, |[0-9.e-]{1,4}|\\PC){0,12}") {
            let _ = text.parse::<Tare>();
        }
    }
}
