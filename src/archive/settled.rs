//! How far a journal is done with: every trial opened before a segment has its file. A start then reads on from there, so
//! that it takes no longer the more finished segments are kept.
//!
//! A small JSON text beside the segments. It only saves time: missing or damaged, everything is read.

use std::fs;
use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use serde::{Deserialize, Serialize};

use crate::journal::{Disk, JournalReader, ReadError};

use super::recover::journal_dir;

/// What a start need not read.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
pub struct Settled {
    /// Number of the first segment in which a trial without a file may have been opened; `None`: there is none.
    pub from_segment: Option<u32>,
    /// Greatest running number of a trial so far.
    pub trial_number: u32,
}

#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum SettleError {
    #[error(transparent)]
    Read(#[from] ReadError),
    #[error("cannot write {path}: {source}", path = path.display())]
    Io { path: PathBuf, source: io::Error },
}

fn place(dir: &Path, journal_id: &str) -> PathBuf {
    journal_dir(dir).join(format!("{journal_id}.settled"))
}

/// How far the journal is known to be done with, if anything is known.
pub fn settled(dir: &Path, journal_id: &str) -> Option<Settled> {
    serde_json::from_slice(&fs::read(place(dir, journal_id)).ok()?).ok()
}

/// Notes that every trial opened before `until_host_ns` has its file but those whose records begin at
/// `pinned_from_seq` or later.
///
/// # Errors
/// [`SettleError`]; then the next start reads more.
pub fn settle_until(
    dir: &Path,
    journal_id: &str,
    disk: &Arc<dyn Disk>,
    until_host_ns: i64,
    pinned_from_seq: Option<u64>,
    trial_number: u32,
) -> Result<(), SettleError> {
    let reader = JournalReader::open(Arc::clone(disk), &journal_dir(dir), journal_id)?;
    let is_before = |segment: &&crate::journal::SegmentInfo| {
        segment.opened_host_ns <= until_host_ns && pinned_from_seq.is_none_or(|seq| segment.open.first_seq <= seq)
    };
    let from_segment = reader.segments().iter().rfind(is_before).map(|segment| segment.number);
    match from_segment {
        None => Ok(()),
        from_segment => write(dir, journal_id, Settled { from_segment, trial_number }),
    }
}

/// Notes that every trial of a journal that has ended has its file.
///
/// # Errors
/// [`SettleError::Io`]; then the next start reads it again.
pub fn settle_whole(dir: &Path, journal_id: &str, trial_number: u32) -> Result<(), SettleError> {
    write(dir, journal_id, Settled { from_segment: None, trial_number })
}

fn write(dir: &Path, journal_id: &str, settled: Settled) -> Result<(), SettleError> {
    let path = place(dir, journal_id);
    let io = |source| SettleError::Io { path: path.clone(), source };
    let text = serde_json::to_vec(&settled).map_err(|error| io(error.into()))?;
    let part = path.with_extension("settled.part");
    fs::write(&part, text).map_err(io)?;
    fs::rename(&part, &path).map_err(io)
}

/// Removes the notes of journals that are not there any more.
pub fn forget_settled(dir: &Path, journal_ids: &[String]) -> io::Result<()> {
    let listed = match fs::read_dir(journal_dir(dir)) {
        Ok(listed) => listed,
        Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(()),
        Err(error) => return Err(error),
    };
    for entry in listed {
        let entry = entry?;
        let name = entry.file_name().to_string_lossy().into_owned();
        if name.strip_suffix(".settled").is_some_and(|id| !journal_ids.iter().any(|known| known == id)) {
            fs::remove_file(entry.path())?;
        }
    }
    Ok(())
}
