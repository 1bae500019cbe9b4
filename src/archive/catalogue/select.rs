//! Which trials of a catalogue are wanted, and in which order.

use std::cmp::Ordering;
use std::str::FromStr;

use jiff::civil::Date;
use jiff::{Span, Timestamp, tz::Offset};
use thiserror::Error;

use super::Catalogued;
use super::row::TrialRow;

/// What a person wrote that selects nothing.
#[derive(Debug, Error, PartialEq)]
#[non_exhaustive]
pub enum BadFilter {
    #[error("{0:?} is no range of a result: write NAME=LOW..HIGH, one end may be left out: launch_speed=15..18")]
    Range(String),
    #[error("{0:?} is no date and no RFC 3339 time: write 2026-12-01 or 2026-12-01T14:00:00Z")]
    Date(String),
}

/// A result within limits, both included.
#[derive(Debug, Clone, PartialEq)]
pub struct Range {
    pub result: String,
    pub low: f64,
    pub high: f64,
}

impl FromStr for Range {
    type Err = BadFilter;

    fn from_str(text: &str) -> Result<Self, BadFilter> {
        let bad = || BadFilter::Range(text.to_owned());
        let (result, limits) = text.split_once('=').ok_or_else(bad)?;
        let (low, high) = limits.split_once("..").ok_or_else(bad)?;
        let end = |text: &str, open: f64| match text.trim() {
            "" => Ok(open),
            number => number.parse::<f64>().ok().filter(|end| !end.is_nan()).ok_or_else(bad),
        };
        let (low, high) = (end(low, f64::NEG_INFINITY)?, end(high, f64::INFINITY)?);
        if result.trim().is_empty() || low > high || (low == f64::NEG_INFINITY && high == f64::INFINITY) {
            return Err(bad());
        }
        Ok(Self { result: result.trim().to_owned(), low, high })
    }
}

/// What to keep; empty fields keep everything.
#[derive(Debug, Clone, Default)]
pub struct Selection {
    /// Started at or after this…
    pub from: Option<Timestamp>,
    /// …and before this.
    pub before: Option<Timestamp>,
    pub rig: Option<String>,
    pub outcome: Option<String>,
    /// Beginning of the rig file's SHA-256.
    pub configuration: Option<String>,
    pub series: Option<String>,
    /// Serial of a cord that the rig file lists.
    pub cord: Option<String>,
    pub results: Vec<Range>,
    pub held_only: bool,
}

impl Selection {
    /// The first instant of a day in UTC, or the instant itself.
    ///
    /// # Errors
    /// [`BadFilter::Date`].
    pub fn instant(text: &str) -> Result<Timestamp, BadFilter> {
        Self::day_or_instant(text, 0)
    }

    /// The first instant after a day in UTC, or the instant itself: where "to" a day includes the day.
    ///
    /// # Errors
    /// [`BadFilter::Date`].
    pub fn after(text: &str) -> Result<Timestamp, BadFilter> {
        Self::day_or_instant(text, 1)
    }

    fn day_or_instant(text: &str, more_days: i64) -> Result<Timestamp, BadFilter> {
        let bad = |_| BadFilter::Date(text.to_owned());
        if let Ok(instant) = text.parse::<Timestamp>() {
            return Ok(instant);
        }
        let day: Date = text.parse().map_err(bad)?;
        let day = day.checked_add(Span::new().days(more_days)).map_err(bad)?;
        Offset::UTC.to_timestamp(day.at(0, 0, 0, 0)).map_err(bad)
    }

    /// Whether it asks for anything: files that can't be read are then left out.
    pub fn is_everything(&self) -> bool {
        let none =
            [&self.rig, &self.outcome, &self.configuration, &self.series, &self.cord].iter().all(|f| f.is_none());
        none && self.from.is_none() && self.before.is_none() && self.results.is_empty() && !self.held_only
    }

    pub fn keeps(&self, trial: &Catalogued) -> bool {
        let is_it = |row: &TrialRow| self.keeps_row(row) && (trial.held || !self.held_only);
        trial.what.as_ref().map_or_else(|_| self.is_everything(), is_it)
    }

    fn keeps_row(&self, row: &TrialRow) -> bool {
        let same = |wanted: &Option<String>, found: &str| wanted.as_ref().is_none_or(|wanted| wanted == found);
        same(&self.rig, &row.rig)
            && same(&self.outcome, &row.outcome)
            && same(&self.series, &row.series)
            && self.configuration.as_ref().is_none_or(|hash| row.configuration_hash.starts_with(hash.as_str()))
            && self.cord.as_ref().is_none_or(|serial| row.cords.contains(serial))
            && self.keeps_start(row)
            && self
                .results
                .iter()
                .all(|range| row.result(&range.result).is_some_and(|value| range.low <= value && value <= range.high))
    }

    fn keeps_start(&self, row: &TrialRow) -> bool {
        if self.from.is_none() && self.before.is_none() {
            return true;
        }
        let Ok(started) = row.started.parse::<Timestamp>() else { return false };
        self.from.is_none_or(|from| from <= started) && self.before.is_none_or(|before| started < before)
    }
}

/// What a list is sorted by. Trials without it come last, whichever way round.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum SortKey {
    /// File name: the running number first, whatever the wall clock said.
    Name,
    Started,
    Rig,
    Outcome,
    Result(String),
}

impl FromStr for SortKey {
    type Err = std::convert::Infallible;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        Ok(match text {
            "name" => Self::Name,
            "started" => Self::Started,
            "rig" => Self::Rig,
            "outcome" => Self::Outcome,
            result => Self::Result(result.to_owned()),
        })
    }
}

impl SortKey {
    pub fn sort(&self, trials: &mut [Catalogued], reverse: bool) {
        let turned = |order: Ordering| if reverse { order.reverse() } else { order };
        trials.sort_by(|a, b| {
            let by_key = match (a.what.as_ref().ok(), b.what.as_ref().ok()) {
                (Some(a), Some(b)) => self.compare(a, b, turned),
                (a, b) => b.is_some().cmp(&a.is_some()),
            };
            by_key.then_with(|| turned(a.path.cmp(&b.path)))
        });
    }

    fn compare(&self, a: &TrialRow, b: &TrialRow, turned: impl Fn(Ordering) -> Ordering) -> Ordering {
        let last_without = |a: Option<f64>, b: Option<f64>| match (a, b) {
            (Some(a), Some(b)) => turned(a.total_cmp(&b)),
            (a, b) => b.is_some().cmp(&a.is_some()),
        };
        let instant = |row: &TrialRow| row.started.parse::<Timestamp>().ok().map(|at| at.as_nanosecond() as f64);
        match self {
            Self::Name => Ordering::Equal,
            Self::Started => last_without(instant(a), instant(b)),
            Self::Rig => turned(a.rig.cmp(&b.rig)),
            Self::Outcome => turned(a.outcome.cmp(&b.outcome)),
            Self::Result(name) => last_without(a.result(name), b.result(name)),
        }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_range_has_a_name_and_at_least_one_end() {
        let range = |text: &str| text.parse::<Range>();
        assert_eq!(
            range("launch_speed=15..18").unwrap(),
            Range { result: "launch_speed".into(), low: 15.0, high: 18.0 }
        );
        assert_eq!(range("draw=..4").unwrap().low, f64::NEG_INFINITY);
        for bad in ["launch_speed", "launch_speed=15", "=1..2", "draw=..", "draw=4..3", "draw=a..b", "draw=nan..2"] {
            assert!(range(bad).is_err(), "{bad}");
        }
    }

    #[test]
    fn to_a_day_includes_the_day() {
        assert_eq!(Selection::instant("2026-12-01").unwrap().to_string(), "2026-12-01T00:00:00Z");
        assert_eq!(Selection::after("2026-12-31").unwrap().to_string(), "2027-01-01T00:00:00Z");
        assert_eq!(Selection::after("2026-12-01T14:00:00+02:00").unwrap().to_string(), "2026-12-01T12:00:00Z");
        assert!(Selection::instant("yesterday").is_err());
        assert!(Selection::after("9999-12-31").is_err());
    }
}
