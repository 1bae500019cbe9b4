//! Writes an amendment: checked against the trial first, then made under the next free number.

use std::io;
use std::path::{Path, PathBuf};

use jiff::Timestamp;
use thiserror::Error;

use super::super::numbered::{Kind, create};
use super::amended::{Amended, AmendedError};
use super::text::{AmendmentText, Draft, FORMAT, FORMAT_VERSION, RecordSaid};
use crate::rig;
use crate::trial::{CarriedText, text_sha256};

/// Others who amend the same trial at once are waited for this often.
const ATTEMPTS: usize = 1000;

/// Why nothing was written.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum AmendError {
    #[error(transparent)]
    Trial(#[from] AmendedError),
    #[error("{0} is empty: say who amends the trial and why")]
    Unsaid(&'static str),
    #[error("the amendment says nothing: give a note, an answer, a condition or a corrected record")]
    Nothing,
    #[error("the amendments so far are not sound, so none is added: {0}; `tautrail verify` says more")]
    Unsound(String),
    #[error("condition {name}: {value} is no finite number")]
    NotFinite { name: String, value: f64 },
    #[error("condition {name} is in {expected}, not in {unit}")]
    Unit { name: String, unit: String, expected: String },
    #[error("the rig file has no inspection item {item:?}; it has: {known}")]
    NoSuchItem { item: String, known: String },
    #[error("the trial carries no text {name:?} that could be corrected; it carries: {known}")]
    NoSuchRecord { name: String, known: String },
    #[error("with the corrected {name} the rig file is refused, so nothing was written: {what}")]
    Refused { name: String, what: String },
    #[error("the corrected {name} is the text that the trial has already")]
    Unchanged { name: String },
    #[error("the amendment can't be put into TOML: {0}")]
    Text(#[from] toml::ser::Error),
    #[error("the amendment of {path} can't be written: {source}", path = path.display())]
    Io { path: PathBuf, source: io::Error },
    #[error("others amend {path} all the time: try again", path = path.display())]
    Busy { path: PathBuf },
}

/// Writes the amendment beside `trial` and gives its path. `now` is what the computer's clock says.
///
/// # Errors
/// [`AmendError`]; nothing was written then.
pub fn amend(trial: &Path, draft: &Draft, now: Timestamp) -> Result<PathBuf, AmendError> {
    said(draft)?;
    for _ in 0..ATTEMPTS {
        let amended = Amended::open(trial).map_err(AmendedError::from)?;
        let text = text(&amended, draft, now)?;
        match create(trial, Kind::Amendment, text.number, &toml::to_string_pretty(&text)?) {
            Err(error) if error.kind() == io::ErrorKind::AlreadyExists => {}
            made => return made.map_err(|source| AmendError::Io { path: trial.to_owned(), source }),
        }
    }
    Err(AmendError::Busy { path: trial.to_owned() })
}

fn said(draft: &Draft) -> Result<(), AmendError> {
    for (what, text) in [("--person", &draft.person), ("--reason", &draft.reason)] {
        if text.trim().is_empty() {
            return Err(AmendError::Unsaid(what));
        }
    }
    let nothing = draft.notes.is_empty() && draft.answers.is_empty();
    if nothing && draft.conditions.is_empty() && draft.records.is_empty() {
        return Err(AmendError::Nothing);
    }
    Ok(())
}

fn text(amended: &Amended, draft: &Draft, now: Timestamp) -> Result<AmendmentText, AmendError> {
    let (trial_id, raw_sha256) = (amended.trial.header().trial_id.clone(), amended.raw_sha256.clone());
    if let Some(finding) = amended.findings.first() {
        return Err(AmendError::Unsound(finding.clone()));
    }
    conditions_fit(amended, draft)?;
    answers_fit(amended, draft)?;
    let record = records(amended, draft)?;
    let last = amended.chain.last();
    Ok(AmendmentText {
        format: FORMAT.to_owned(),
        format_version: FORMAT_VERSION,
        number: last.map_or(1, |last| last.number + 1),
        trial_id,
        raw_sha256,
        predecessor_sha256: last.map_or_else(String::new, |last| last.sha256.clone()),
        written: now.to_string(),
        person: draft.person.clone(),
        reason: draft.reason.clone(),
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        note: draft.notes.clone(),
        answer: draft.answers.clone(),
        condition: draft.conditions.clone(),
        record,
    })
}

fn conditions_fit(amended: &Amended, draft: &Draft) -> Result<(), AmendError> {
    let sealed = amended.conditions().map_err(AmendedError::from)?;
    for condition in &draft.conditions {
        let (name, value) = (condition.name.clone(), condition.value);
        if !value.is_finite() {
            return Err(AmendError::NotFinite { name, value });
        }
        let known = sealed.iter().find(|(known, _)| known.name == name).map(|(known, _)| known.unit.clone());
        if let Some(expected) = known.filter(|expected| *expected != condition.unit) {
            return Err(AmendError::Unit { name, unit: condition.unit.clone(), expected });
        }
    }
    Ok(())
}

/// An answer to what nobody asked would never be seen again. A trial whose rig file can't be read takes every answer.
fn answers_fit(amended: &Amended, draft: &Draft) -> Result<(), AmendError> {
    let Ok(rig) = amended.rig() else { return Ok(()) };
    let items: Vec<&String> = rig.rig.details.stages.iter().flat_map(|stage| &stage.inspect).collect();
    let unknown = |item: &str| !items.iter().any(|known| known.trim().eq_ignore_ascii_case(item.trim()));
    match draft.answers.iter().find(|answer| unknown(&answer.item)) {
        None => Ok(()),
        Some(answer) => Err(AmendError::NoSuchItem { item: answer.item.clone(), known: listed(items.into_iter()) }),
    }
}

fn records(amended: &Amended, draft: &Draft) -> Result<Vec<RecordSaid>, AmendError> {
    let mut texts = amended.texts().map_err(AmendedError::from)?;
    let mut records = Vec::new();
    for (name, text) in &draft.records {
        let name = name.clone();
        let Some(known) = texts.iter_mut().find(|known| known.name == name) else {
            return Err(AmendError::NoSuchRecord { name, known: listed(texts.iter().map(|text| &text.name)) });
        };
        if known.text == *text {
            return Err(AmendError::Unchanged { name });
        }
        let replaces_sha256 = text_sha256(&known.text);
        known.text.clone_from(text);
        accepted(&name, &texts)?;
        records.push(RecordSaid { name, replaces_sha256, text: text.clone() });
    }
    Ok(records)
}

/// A correction that this program can't read would leave the trial without results.
fn accepted(name: &str, texts: &[CarriedText]) -> Result<(), AmendError> {
    let refused = |what: String| AmendError::Refused { name: name.to_owned(), what };
    let joined = super::amended::joined(texts).ok_or_else(|| refused("the trial carries no rig.toml".to_owned()))?;
    rig::parse(&joined).map(|_| ()).map_err(|error| refused(error.to_string()))
}

fn listed<'a>(names: impl Iterator<Item = &'a String>) -> String {
    let names: Vec<String> = names.map(|name| format!("{name:?}")).collect();
    if names.is_empty() { "none".to_owned() } else { names.join(", ") }
}
