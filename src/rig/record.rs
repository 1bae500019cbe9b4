//! Calibration records: dated TOML texts that say how counts become a value, how well, within which range, until when.
//!
//! Only what is needed to use a record is read here; its `[evidence]` (readings, residuals, statistics) is for people and
//! stays as it is. Refused: a record without date, person, end of validity or tested range.

use std::fmt;

use jiff::civil::Date;

use super::document::{Findings, Section};
use super::finding::Finding;
use super::text_read::read_text;
use super::{Coefficients, Role, sections};

/// What kind of sensor a record is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum RecordKind {
    Cell,
    Encoder,
    Accelerometer,
}

impl RecordKind {
    pub const ALL: [Self; 3] = [Self::Cell, Self::Encoder, Self::Accelerometer];

    /// The word in records.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Cell => "cell",
            Self::Encoder => "encoder",
            Self::Accelerometer => "accelerometer",
        }
    }

    /// Unit of the values.
    pub const fn unit(self) -> &'static str {
        match self {
            Self::Cell => "N",
            Self::Encoder => "m",
            Self::Accelerometer => "m/s2",
        }
    }

    /// The kind that a role needs.
    pub const fn for_role(role: Role) -> Self {
        match role {
            Role::ReleaseLineTension | Role::CordAnchorTension | Role::LeftAnchorTension | Role::RightAnchorTension => {
                Self::Cell
            }
            Role::ShuttlePosition => Self::Encoder,
            Role::ShuttleSpecificForce => Self::Accelerometer,
        }
    }
}

/// The reading with the shunt resistor switched in, less the zero: what a cell must still give at the rig.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Shunt {
    pub deflection_counts: f64,
    /// Standard uncertainty.
    pub uncertainty_counts: f64,
}

/// What a calibration record says, as far as it is used.
#[derive(Debug, Clone, PartialEq)]
pub struct CalibrationRecord {
    /// Where the rig file found it.
    pub name: String,
    pub kind: RecordKind,
    pub channel: String,
    /// Maker's plate or serial of the sensor.
    pub sensor: String,
    pub person: String,
    pub date: Date,
    pub valid_until: Date,
    pub invented: bool,
    pub coefficients: Coefficients,
    /// Values between which it was tested, in the kind's unit.
    pub tested: (f64, f64),
    /// Relative standard uncertainty of the scale that each year since the calibration adds (with the square root of
    /// the time: a random walk).
    pub drift_relative_per_year: f64,
    pub shunt: Option<Shunt>,
    /// Readings are shares of the excitation, which was this at the calibration, V.
    pub excitation_v: Option<f64>,
}

/// What is to be said of a channel's calibration on a day.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum RecordState {
    Valid,
    /// The coefficients stand in the rig file itself: no date, no range, no evidence.
    WithoutRecord,
    Expired {
        name: String,
        valid_until: Date,
        days: i64,
    },
    /// The day is before the calibration's: one of both clocks is wrong.
    FromLater {
        name: String,
        date: Date,
    },
    /// Nobody knows the day.
    Undated {
        name: String,
        valid_until: Date,
    },
}

impl RecordState {
    pub fn of(record: Option<&CalibrationRecord>, today: Option<Date>) -> Self {
        let Some(record) = record else { return Self::WithoutRecord };
        let name = record.name.clone();
        match today {
            None => Self::Undated { name, valid_until: record.valid_until },
            Some(today) if today < record.date => Self::FromLater { name, date: record.date },
            Some(today) if today > record.valid_until => {
                let days = days_between(record.valid_until, today);
                Self::Expired { name, valid_until: record.valid_until, days }
            }
            Some(_) => Self::Valid,
        }
    }

    pub fn is_valid(&self) -> bool {
        *self == Self::Valid
    }
}

impl fmt::Display for RecordState {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        match self {
            Self::Valid => f.write_str("calibrated"),
            Self::WithoutRecord => f.write_str(
                "coefficients without a calibration record: no date, no tested range; make one with `tautrail calibrate`",
            ),
            Self::Expired { name, valid_until, days } => {
                write!(f, "calibration {name} expired on {valid_until}, {days} days ago: calibrate again")
            }
            Self::FromLater { name, date } => {
                write!(f, "calibration {name} is of {date}, which is still to come: check the computer's date")
            }
            Self::Undated { name, valid_until } => {
                write!(f, "calibration {name} ends on {valid_until} and the day is not known: set the computer's clock")
            }
        }
    }
}

fn days_between(from: Date, to: Date) -> i64 {
    from.until(to).map_or(0, |span| i64::from(span.get_days()))
}

impl CalibrationRecord {
    /// The coefficients on a day: the scale's uncertainty has grown with the time since the calibration.
    pub fn coefficients_on(&self, day: Option<Date>) -> Coefficients {
        // Without a date the worst within its validity.
        let days = days_between(self.date, day.unwrap_or(self.valid_until)).max(0);
        let drift = self.drift_relative_per_year * (days as f64 / 365.25).sqrt();
        let coefficients = self.coefficients.clone();
        let scale_relative_uncertainty = coefficients.scale_relative_uncertainty.hypot(drift);
        Coefficients { scale_relative_uncertainty, ..coefficients }
    }

    /// A record's text, with every finding. `name` is where it was found.
    pub fn read(name: &str, text: &str) -> (Option<Self>, Vec<Finding>) {
        read_text(text, |root, findings| whole(name, root, findings))
    }
}

fn whole(name: &str, mut root: Section<'_, '_>, findings: &mut Findings<'_>) -> Option<CalibrationRecord> {
    let kind_word = root.text(findings, "kind");
    let kind = RecordKind::ALL.into_iter().find(|kind| kind.word() == kind_word);
    if kind.is_none() && !kind_word.is_empty() {
        let known = RecordKind::ALL.map(RecordKind::word).join(", ");
        findings.error("kind", format!("{kind_word:?} is no kind of record, there are: {known}"));
    }
    let [channel, sensor, person] = ["channel", "sensor", "person"].map(|key| root.text(findings, key));
    let dates = ["date", "valid_until"].map(|key| root.date(findings, key));
    let invented = root.optional_flag(findings, "invented");
    let mut values = root.section(findings, "values");
    let unit = kind.map_or("N", RecordKind::unit);
    let coefficients = Coefficients {
        zero_counts: values.number(findings, "zero_counts", -2_147_483_648.0..=2_147_483_647.0),
        coefficients: sections::coefficients(&mut values, findings, unit),
        zero_uncertainty: values.quantity(findings, "zero_uncertainty", unit, 0.0..=1e6),
        scale_relative_uncertainty: values.quantity(findings, "scale_uncertainty", "%", 0.0..=50.0),
    };
    let [low, high] = ["tested_from", "tested_to"].map(|key| values.quantity(findings, key, unit, -1e7..=1e7));
    let drift = values.quantity(findings, "drift_per_year", "%", 0.0..=50.0);
    let shunt_counts = values.optional_number(findings, "shunt_counts", -2e9..=2e9);
    let shunt_uncertainty = values.optional_number(findings, "shunt_uncertainty_counts", 0.0..=1e9);
    let excitation_v = values.optional_number(findings, "excitation_v", 0.1..=100.0);
    values.finish(findings);
    // For people: what it was found from.
    root.optional(findings, "evidence");
    root.finish(findings);
    if low >= high {
        findings.error("values.tested_to", format!("is not above tested_from: {high} against {low} {unit}"));
    }
    let [date, valid_until] = dates;
    let (kind, date, valid_until) = (kind?, date?, valid_until?);
    if valid_until < date {
        findings.error("valid_until", format!("{valid_until} is before the calibration itself, {date}"));
    }
    let shunt = shunt_counts
        .map(|deflection_counts| Shunt { deflection_counts, uncertainty_counts: shunt_uncertainty.unwrap_or(0.0) });
    Some(CalibrationRecord {
        name: name.to_owned(),
        kind,
        channel,
        sensor,
        person,
        date,
        valid_until,
        invented,
        coefficients,
        tested: (low, high),
        drift_relative_per_year: drift,
        shunt,
        excitation_v,
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    const LINE: &str = r#"
kind = "cell"
channel = "line"
sensor = "invented cell 0417"
person = "rig engineer"
date = "2031-05-04"
valid_until = "2032-05-04"
[values]
zero_counts = 12000
coefficients = ["0 N", "0.0005 N"]
zero_uncertainty = "0.3 N"
scale_uncertainty = "0.3 %"
tested_from = "0 N"
tested_to = "950 N"
drift_per_year = "0.4 %"
[evidence]
anything = "goes"
"#;

    fn read(text: &str) -> (Option<CalibrationRecord>, Vec<String>) {
        let (record, findings) = CalibrationRecord::read("line.toml", text);
        (record, findings.iter().map(ToString::to_string).collect())
    }

    fn day(text: &str) -> Option<Date> {
        Some(text.parse().unwrap())
    }

    #[test]
    fn a_record_is_read_and_grows_less_certain_with_time() {
        let (record, findings) = read(LINE);
        assert_eq!(findings, Vec::<String>::new());
        let record = record.unwrap();
        assert_eq!(record.tested, (0.0, 950.0));
        let at = |when| record.coefficients_on(when).scale_relative_uncertainty;
        assert!((at(day("2031-05-04")) - 0.003).abs() < 1e-12);
        // √(0.3² + 0.4²·366/365.25) %
        assert!((at(day("2032-05-04")) - 0.005_003_284).abs() < 1e-6, "{}", at(day("2032-05-04")));
        assert_eq!(at(None), at(day("2032-05-04")));
        assert!((at(day("2030-01-01")) - 0.003).abs() < 1e-12);
    }

    #[test]
    fn an_expired_record_says_since_when() {
        let record = read(LINE).0;
        let state = |when| RecordState::of(record.as_ref(), when).to_string();
        assert_eq!(state(day("2032-05-04")), "calibrated");
        assert_eq!(
            state(day("2032-07-04")),
            "calibration line.toml expired on 2032-05-04, 61 days ago: calibrate again"
        );
        assert!(state(day("2031-01-01")).contains("still to come"));
        assert!(state(None).contains("the day is not known"));
        assert!(RecordState::of(None, None).to_string().starts_with("coefficients without a calibration record"));
    }

    #[test]
    fn what_a_record_lacks_is_told_with_its_place() {
        for (from, to, said) in [
            ("person = \"rig engineer\"\n", "", "person: is missing"),
            ("\"2031-05-04\"\nv", "\"4 May\"\nv", "6:8: error: date: \"4 May\" is no date, write it as \"2031-05-04\""),
            (
                "\"2032-05-04\"",
                "\"2030-05-04\"",
                "valid_until: 2030-05-04 is before the calibration itself, 2031-05-04",
            ),
            ("\"950 N\"", "\"95 kg\"", "\"kg\" is a mass, not a force; write \"kgf\""),
            ("\"0 N\"\ntested_to", "\"960 N\"\ntested_to", "is not above tested_from: 950 against 960 N"),
            ("\"cell\"", "\"scale\"", "\"scale\" is no kind of record, there are: cell, encoder, accelerometer"),
            ("\"0.3 N\"", "0.3", "has no unit"),
            ("[values]", "[value]", "values: is missing"),
        ] {
            let (record, findings) = read(&LINE.replacen(from, to, 1));
            assert!(record.is_none(), "{said}");
            assert!(findings.iter().any(|finding| finding.contains(said)), "{said} in {findings:?}");
        }
    }
}
