//! The reading of a trial, as the trial file stores it.

use jiff::civil::Date;

use crate::calibration::{self, Signal};
use crate::reading::{Beside, Motion, Outcome, Reading, Verdict, read_beside};
use crate::rig::Rig;
use crate::trial::{AbsentEntry, DerivedSignal, InstantEntry, ResultEntry, ResultSet};

/// The reading of a trial's signals, with what is doubtful about their calibrations on the day.
pub(super) fn reading(signals: &[Signal], beside: &Beside, rig: &Rig, day: Option<Date>) -> Reading {
    let mut reading = read_beside(signals, beside, rig);
    reading.findings.extend(calibration::said_of(rig, day, signals));
    reading
}

/// Results, instants and evidence; `truncated` says in a sentence why the trial's end is missing, if it is.
pub(super) fn result_set(reading: &Reading, truncated: Option<String>) -> ResultSet {
    let mut outcome_evidence = reading.outcome_evidence.clone();
    let mut outcome = reading.outcome;
    if let Some(why) = truncated {
        outcome_evidence.insert(0, format!("{why}; as far as it goes it reads: {}", outcome.word()));
        outcome = Outcome::Truncated;
    }
    ResultSet {
        outcome: outcome.word().to_owned(),
        outcome_evidence,
        findings: reading.findings.clone(),
        entries: reading.results.iter().map(entry).chain(reading.verdicts.iter().filter_map(verdict)).collect(),
        instants: reading
            .instants
            .iter()
            .map(|instant| InstantEntry {
                name: instant.name.clone(),
                time_s: instant.time_s,
                standard_uncertainty_s: instant.standard_uncertainty_s,
                evidence: instant.evidence.clone(),
            })
            .collect(),
        absent: reading
            .absent
            .iter()
            .map(|absent| AbsentEntry { name: absent.name.clone(), reason: absent.reason.clone() })
            .chain(reading.verdicts.iter().filter(|verdict| verdict.probability.is_none()).map(|verdict| AbsentEntry {
                name: format!("{VERDICT_PREFIX}{}", verdict.name),
                reason: verdict_sentence(verdict),
            }))
            .collect(),
    }
}

/// Before the name of a result that is a verdict: its value is the probability that what was asked was kept.
pub const VERDICT_PREFIX: &str = "verdict_";

fn verdict_sentence(verdict: &Verdict) -> String {
    format!("{}: {}: {}", verdict.decision.word(), verdict.asked, verdict.why)
}

fn verdict(verdict: &Verdict) -> Option<ResultEntry> {
    let probability = verdict.probability?;
    Some(ResultEntry {
        name: format!("{VERDICT_PREFIX}{}", verdict.name),
        value: probability,
        unit: "1".to_owned(),
        standard_uncertainty: 0.0,
        low: probability,
        high: probability,
        method: verdict_sentence(verdict),
        budget: Vec::new(),
    })
}

fn entry(row: &crate::reading::ResultRow) -> ResultEntry {
    ResultEntry {
        name: row.name.clone(),
        value: row.value,
        unit: row.unit.clone(),
        standard_uncertainty: row.standard_uncertainty,
        low: row.low,
        high: row.high,
        method: row.method.clone(),
        budget: row.budget.iter().map(|term| (term.source.clone(), term.standard_uncertainty)).collect(),
    }
}

/// Position, velocity and acceleration along the rail.
pub(super) fn motion_signals(motion: &Motion) -> [DerivedSignal; 3] {
    let signal = |name: &str, unit: &str, value: &[f64], uncertainty: &[f64]| DerivedSignal {
        name: name.to_owned(),
        unit: unit.to_owned(),
        method: format!("smoothed from {}", motion.sensors),
        time_s: motion.time_s.clone(),
        value: value.to_vec(),
        standard_uncertainty: uncertainty.to_vec(),
    };
    [
        signal("motion_position", "m", &motion.x_m, &motion.u_x_m),
        signal("motion_velocity", "m/s", &motion.v_mps, &motion.u_v_mps),
        signal("motion_acceleration", "m/s^2", &motion.a_mps2, &motion.u_a_mps2),
    ]
}
