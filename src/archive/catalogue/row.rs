//! What a list shows of a trial, read from its file and its amendments.

use std::path::Path;

use serde::{Deserialize, Serialize};

use super::super::again::{Nowhere, read_again};
use super::super::amendment::{Amended, AmendedError};
use super::super::derive::result_set;
use crate::rig;
use crate::trial::ResultSet;

/// A result as a list shows it.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ResultValue {
    pub name: String,
    pub value: f64,
    pub standard_uncertainty: f64,
    pub unit: String,
}

/// What a list shows of a trial.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct TrialRow {
    pub trial_id: String,
    pub journal_id: String,
    pub rig: String,
    /// RFC 3339; the quality says whether the wall clock was ever set.
    pub started: String,
    pub started_quality: String,
    pub outcome: String,
    pub series: String,
    pub configuration_hash: String,
    pub raw_sha256: String,
    /// Serials of the cords that the rig file lists.
    pub cords: Vec<String>,
    /// As sealed; derived again where amendments changed what they rest on.
    pub results: Vec<ResultValue>,
    pub n_amendments: usize,
    /// What amendments changed of the rig file and conditions, in words.
    pub changes: Vec<String>,
    /// What is wrong with the amendments.
    pub findings: Vec<String>,
}

impl TrialRow {
    pub fn result(&self, name: &str) -> Option<f64> {
        self.results.iter().find(|result| result.name == name).map(|result| result.value)
    }
}

/// Results that hold: as sealed, or derived again where amendments changed what they rest on.
pub(in crate::archive) struct Effective {
    pub(in crate::archive) results: ResultSet,
    pub(in crate::archive) cords: Vec<String>,
    pub(in crate::archive) changes: Vec<String>,
}

/// # Errors
/// [`AmendedError`]. A rig file that this program refuses is none: there are counts, and results of whoever sealed it.
pub(in crate::archive) fn effective(amended: &Amended) -> Result<Effective, AmendedError> {
    let rig = match amended.rig() {
        Ok(rig) => rig,
        Err(AmendedError::Rig(_) | AmendedError::NoRig) => {
            return Ok(Effective { results: amended.trial.results()?, cords: Vec::new(), changes: Vec::new() });
        }
        Err(error) => return Err(error),
    };
    let (cords, changes) = (serials(&rig.rig), rig.changes);
    let results = if changes.is_empty() {
        amended.trial.results()?
    } else {
        result_set(&read_again(&amended.trial, rig.rig, &mut Nowhere)?, None)
    };
    Ok(Effective { results, cords, changes })
}

/// Reads a trial; the sentence says why it can't be.
pub(super) fn read(path: &Path) -> Result<TrialRow, String> {
    let amended = Amended::open(path).map_err(|error| error.to_string())?;
    let header = amended.trial.header().clone();
    let Effective { results, cords, changes } =
        effective(&amended).map_err(|error| format!("{}: {error}", path.display()))?;
    Ok(TrialRow {
        trial_id: header.trial_id,
        journal_id: header.journal_id,
        rig: header.rig,
        started: header.started,
        started_quality: header.started_quality,
        outcome: if changes.is_empty() { amended.trial.outcome().to_owned() } else { results.outcome },
        series: header.series,
        configuration_hash: header.configuration_hash,
        raw_sha256: amended.raw_sha256,
        cords,
        results: results.entries.into_iter().map(shown).collect(),
        n_amendments: amended.chain.len(),
        changes,
        findings: amended.findings,
    })
}

fn serials(rig: &rig::Rig) -> Vec<String> {
    rig.details.cord_items.iter().map(|cord| cord.serial.clone()).collect()
}

fn shown(entry: crate::trial::ResultEntry) -> ResultValue {
    let crate::trial::ResultEntry { name, value, standard_uncertainty, unit, .. } = entry;
    ResultValue { name, value, standard_uncertainty, unit }
}
