//! Holds: while one is set, nothing about a trial is deleted by this program.
//!
//! Setting and lifting are numbered files beside the trial, like amendments, so that who did what and when stays. The one
//! of the greatest number counts; one that can't be read counts as set.

use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use jiff::Timestamp;
use serde::{Deserialize, Serialize};
use thiserror::Error;

use super::recover::journal_dir;
use crate::journal::{Disk, JournalReader, TrialRange};
use crate::trial::TrialFile;

use super::numbered::{Kind, create, numbered, read_text};

const FORMAT: &str = "tautrail-hold";
const FORMAT_VERSION: u32 = 1;

/// One setting or lifting of a hold.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub struct Hold {
    format: String,
    format_version: u32,
    pub number: u32,
    /// Name of the trial file.
    pub trial: String,
    pub set: bool,
    /// RFC 3339.
    pub written: String,
    pub person: String,
    pub reason: String,
}

/// Why a hold was not set or lifted.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum HoldError {
    #[error("there is no trial file {path}", path = .0.display())]
    NoTrial(PathBuf),
    #[error("{0} is empty: say who sets or lifts the hold and why")]
    Unsaid(&'static str),
    #[error("{path} is held already", path = .0.display())]
    HeldAlready(PathBuf),
    #[error("{path} is not held", path = .0.display())]
    NotHeld(PathBuf),
    #[error("somebody else sets or lifts a hold on {path} at this moment: look and try again", path = .0.display())]
    Busy(PathBuf),
    #[error("the hold can't be put into TOML: {0}")]
    Text(#[from] toml::ser::Error),
    #[error("the hold on {path} can't be read or written: {source}", path = path.display())]
    Io { path: PathBuf, source: io::Error },
}

/// Sets (`set`) or lifts the hold on a trial file, which need not be readable.
///
/// # Errors
/// [`HoldError`]; nothing changed then.
pub fn set_hold(trial: &Path, set: bool, person: &str, reason: &str, now: Timestamp) -> Result<PathBuf, HoldError> {
    let io = |source| HoldError::Io { path: trial.to_owned(), source };
    if !trial.is_file() {
        return Err(HoldError::NoTrial(trial.to_owned()));
    }
    for (what, text) in [("--person", person), ("--reason", reason)] {
        if text.trim().is_empty() {
            return Err(HoldError::Unsaid(what));
        }
    }
    let before = numbered(trial, Kind::Hold).map_err(io)?;
    let last = before.last();
    match (last.is_some_and(|last| is_set(&last.path)), set) {
        (true, true) => return Err(HoldError::HeldAlready(trial.to_owned())),
        (false, false) => return Err(HoldError::NotHeld(trial.to_owned())),
        _ => {}
    }
    let hold = Hold {
        format: FORMAT.to_owned(),
        format_version: FORMAT_VERSION,
        number: last.map_or(1, |last| last.number.saturating_add(1)),
        trial: trial.file_name().unwrap_or_default().to_string_lossy().into_owned(),
        set,
        written: now.to_string(),
        person: person.to_owned(),
        reason: reason.to_owned(),
    };
    match create(trial, Kind::Hold, hold.number, &toml::to_string_pretty(&hold)?) {
        Err(error) if error.kind() == io::ErrorKind::AlreadyExists => Err(HoldError::Busy(trial.to_owned())),
        made => made.map_err(io),
    }
}

/// What was set and lifted on a trial, by number; a sentence for what can't be read.
///
/// # Errors
/// The folder can't be listed.
pub fn holds(trial: &Path) -> io::Result<Vec<Result<Hold, String>>> {
    let read = |path: &Path| parse(path).map_err(|what| format!("{}: {what}", path.display()));
    Ok(numbered(trial, Kind::Hold)?.iter().map(|found| read(&found.path)).collect())
}

/// Whether a hold file of the greatest number sets a hold: so does one that can't be read.
pub(super) fn is_set(path: &Path) -> bool {
    parse(path).map_or(true, |hold| hold.set)
}

/// Whether a trial file is held. What can't be looked at counts as held.
pub fn is_held(trial: &Path) -> bool {
    numbered(trial, Kind::Hold).map_or(true, |holds| holds.last().is_some_and(|last| is_set(&last.path)))
}

/// The held trial files of an id in an archive: `trial-<id>.h5`, and `trial-<id>-2.h5` of a range that grew, there or gone.
pub(super) fn held_of(dir: &Path, trial_id: &str) -> io::Result<Vec<PathBuf>> {
    let mut stems = std::collections::BTreeSet::new();
    for entry in std::fs::read_dir(dir)? {
        let name = entry?.file_name().to_string_lossy().into_owned();
        let Some((stem, _)) = name.split_once(".hold-") else { continue };
        let Some(rest) = stem.strip_prefix("trial-").and_then(|rest| rest.strip_prefix(trial_id)) else { continue };
        let is_later = |digits: &str| !digits.is_empty() && digits.bytes().all(|byte| byte.is_ascii_digit());
        if rest.is_empty() || rest.strip_prefix('-').is_some_and(is_later) {
            stems.insert(stem.to_owned());
        }
    }
    Ok(stems.iter().map(|stem| dir.join(format!("{stem}.h5"))).filter(|trial| is_held(trial)).collect())
}

fn parse(path: &Path) -> Result<Hold, String> {
    let text = read_text(path).map_err(|error| error.to_string())?;
    let hold: Hold = toml::from_str(&text).map_err(|error| error.to_string().trim_end().replace('\n', " / "))?;
    match (hold.format.as_str(), hold.format_version) {
        (FORMAT, FORMAT_VERSION) => Ok(hold),
        (format, version) => {
            Err(format!("it is {format:?} version {version}, not {FORMAT:?} version {FORMAT_VERSION}"))
        }
    }
}

/// Why the journal of a held trial is not kept.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum NotKept {
    #[error("the trial file can't be read: {0}")]
    Trial(#[from] crate::trial::TrialError),
    #[error("{0}")]
    Journal(#[from] crate::journal::ReadError),
    #[error("journal {journal_id} is not in {dir} any more", dir = dir.display())]
    Gone { journal_id: String, dir: PathBuf },
    #[error("journal {journal_id} has not all of the trial's records any more")]
    NotAll { journal_id: String },
    #[error("{0}")]
    Seal(#[from] super::error::SealError),
}

/// Links the journal segments of a held trial into a directory of the trial's own, as far as they are still there; gives
/// that directory.
///
/// # Errors
/// [`NotKept`]: what is there is linked all the same.
pub fn keep_for_hold(trial: &Path, disk: &Arc<dyn Disk>) -> Result<PathBuf, NotKept> {
    let dir = super::numbered::folder(trial);
    let header = TrialFile::open(trial)?.header().clone();
    let kept_dir = journal_dir(&dir).join("kept").join(&header.trial_id);
    let (journal_id, in_dir) = (header.journal_id.clone(), journal_dir(&dir));
    let range_of = |reader: &JournalReader| -> Result<Option<TrialRange>, NotKept> {
        let is_it = |range: &TrialRange| {
            range.trial_id == header.trial_id
                && range.first_seq == header.first_seq
                && range.last_seq >= header.last_seq
        };
        Ok(reader.trials()?.into_iter().find(is_it))
    };
    let opened = JournalReader::open(Arc::clone(disk), &in_dir, &journal_id).ok();
    let found = opened.and_then(|reader| range_of(&reader).ok()?.map(|range| (reader, range)));
    let Some((reader, range)) = found else {
        // The recorder has let it go; it may be kept already.
        let kept = JournalReader::open(Arc::clone(disk), &kept_dir, &journal_id);
        return match kept {
            Ok(reader) if range_of(&reader)?.is_some() => Ok(kept_dir),
            Ok(_) => Err(NotKept::NotAll { journal_id }),
            Err(_) => Err(NotKept::Gone { journal_id, dir: in_dir }),
        };
    };
    super::keep::keep(&reader, &range, &dir)?;
    Ok(kept_dir)
}
