//! The amendments of a trial, read and held against each other.

use std::path::{Path, PathBuf};

use thiserror::Error;

use super::super::numbered::{Kind, numbered, read_text};
use super::text::{AmendmentText, Answer, ConditionSaid, NoteSaid, RecordSaid};
use crate::trial::text_sha256;

/// One amendment as it stands beside its trial.
#[derive(Debug, Clone, PartialEq)]
pub struct Amendment {
    pub path: PathBuf,
    pub number: u32,
    /// SHA-256 of the file, byte for byte: what its successor carries.
    pub sha256: String,
    pub trial_id: String,
    pub raw_sha256: String,
    pub predecessor_sha256: String,
    /// RFC 3339.
    pub written: String,
    pub person: String,
    pub reason: String,
    pub notes: Vec<NoteSaid>,
    pub answers: Vec<Answer>,
    pub conditions: Vec<ConditionSaid>,
    pub records: Vec<RecordSaid>,
}

/// Why the amendments of a trial cannot be had.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum ChainError {
    #[error("the folder of {path} can't be listed for amendments: {source}", path = path.display())]
    Unlisted { path: PathBuf, source: std::io::Error },
    #[error("{path} can't be read: {source}", path = path.display())]
    Unreadable { path: PathBuf, source: std::io::Error },
    #[error("{path} is no amendment that this program reads: {what}", path = path.display())]
    NotOne { path: PathBuf, what: String },
}

/// The amendments beside `trial`, by number.
///
/// # Errors
/// [`ChainError`]; one that can't be read fails all, since what it said is unknown.
pub fn amendments(trial: &Path) -> Result<Vec<Amendment>, ChainError> {
    let listed = numbered(trial, Kind::Amendment);
    let listed = listed.map_err(|source| ChainError::Unlisted { path: trial.to_owned(), source })?;
    listed.into_iter().map(|found| read(found.path, found.number)).collect()
}

/// What can be read of them before the first that can't be.
pub(super) fn amendments_up_to_the_first_bad(trial: &Path) -> Vec<Amendment> {
    let listed = numbered(trial, Kind::Amendment).unwrap_or_default();
    listed.into_iter().map_while(|found| read(found.path, found.number).ok()).collect()
}

fn read(path: PathBuf, number: u32) -> Result<Amendment, ChainError> {
    let text = match read_text(&path) {
        Ok(text) => text,
        Err(source) => return Err(ChainError::Unreadable { path, source }),
    };
    let parsed = match AmendmentText::parse(&text) {
        Ok(parsed) if parsed.number != number => {
            let what = format!("it says that it is number {}", parsed.number);
            return Err(ChainError::NotOne { path, what });
        }
        Ok(parsed) => parsed,
        Err(what) => return Err(ChainError::NotOne { path, what }),
    };
    Ok(Amendment {
        path,
        number,
        sha256: text_sha256(&text),
        trial_id: parsed.trial_id,
        raw_sha256: parsed.raw_sha256,
        predecessor_sha256: parsed.predecessor_sha256,
        written: parsed.written,
        person: parsed.person,
        reason: parsed.reason,
        notes: parsed.note,
        answers: parsed.answer,
        conditions: parsed.condition,
        records: parsed.record,
    })
}

/// What is wrong with a chain, in sentences: numbers without a hole, each of this trial, each with its predecessor's
/// digest. A chain cut off at its end can't be told by itself; compare the last digest with one kept elsewhere.
pub fn chain_findings(chain: &[Amendment], trial_id: &str, raw_sha256: &str) -> Vec<String> {
    let mut findings = Vec::new();
    let mut before: Option<&Amendment> = None;
    for amendment in chain {
        let number = amendment.number;
        let expected = before.map_or(1, |before| before.number + 1);
        let mut wrong = |what: String| findings.push(format!("amendment {number:04} {what}"));
        if number != expected {
            wrong(format!("follows a hole: {expected:04} is missing"));
        } else if amendment.predecessor_sha256 != before.map_or("", |before| before.sha256.as_str()) {
            wrong(before.map_or_else(
                || "is the first and yet names a predecessor".to_owned(),
                |before| format!("was written after another {:04} than the one that is there", before.number),
            ));
        }
        if amendment.trial_id != trial_id {
            wrong(format!("is of trial {}, not of {trial_id}", amendment.trial_id));
        }
        if amendment.raw_sha256 != raw_sha256 {
            wrong(format!("was written beside raw data {}, not {raw_sha256}", amendment.raw_sha256));
        }
        before = Some(amendment);
    }
    findings
}
