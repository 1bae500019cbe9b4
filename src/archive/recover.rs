//! Seals what a crash left: every trial of every journal that has no trial file yet.
//!
//! Beside a running daemon (which holds the directory's lock) the trial under way is left alone. Without one, the lock
//! is held while recovering, so that no daemon starts in between. A journal that cannot be read holds up no other.

use std::path::{Path, PathBuf};
use std::sync::Arc;

use crate::journal::{ArchiveLock, Disk, JournalReader, LockError, ReadError, TrialRange, journals};
use crate::trial::TrialFile;

use super::error::SealError;
use super::keep::readers;
use super::publish::clear_up;
use super::seal::{Sealed, seal, trial_path};

/// What was found, and what became of it.
#[derive(Debug, Default)]
pub struct Recovery {
    pub trials: Vec<Recovered>,
    /// Journals that could not be read, each with its path. They are left as they are and hold up no other.
    pub unreadable: Vec<ReadError>,
}

/// What became of one trial.
#[derive(Debug)]
pub struct Recovered {
    pub journal_id: String,
    pub trial_id: String,
    pub fate: Fate,
}

#[derive(Debug)]
pub enum Fate {
    Sealed(Sealed),
    /// A trial file of this very range is there.
    AlreadySealed(PathBuf),
    /// A running daemon is recording it.
    Live,
    /// The journal is kept; try again when what the error says is put right.
    Failed(SealError),
}

/// Why nothing could be recovered at all.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum RecoverError {
    #[error("there is no directory {dir}; give the archive directory that a daemon recorded into", dir = dir.display())]
    NoDirectory { dir: PathBuf },
    #[error(transparent)]
    Journal(#[from] ReadError),
    #[error(transparent)]
    Lock(LockError),
}

/// Where the journals of an archive directory are.
pub fn journal_dir(dir: &Path) -> PathBuf {
    dir.join("journal")
}

/// Seals every trial in `dir` that is not sealed yet, from the journals and from those kept for a person; `progress` hears of
/// each before it is begun.
///
/// # Errors
/// A directory that is not there or cannot be listed, a lock that cannot be taken. A journal that cannot be read is told in
/// [`Recovery::unreadable`], a trial that fails is a [`Fate`]; the others go on.
pub fn recover(
    dir: &Path,
    disk: &Arc<dyn Disk>,
    progress: &mut dyn FnMut(&TrialRange),
) -> Result<Recovery, RecoverError> {
    if !dir.is_dir() {
        return Err(RecoverError::NoDirectory { dir: dir.to_owned() });
    }
    let lock = match ArchiveLock::take(dir, &format!("recover, process {}", std::process::id())) {
        Ok(lock) => Some(lock),
        Err(LockError::Held { .. }) => None,
        Err(error) => return Err(RecoverError::Lock(error)),
    };
    clear_up(&**disk, dir).map_err(|source| ReadError::Io { path: dir.to_owned(), source })?;
    let mut recovery = Recovery::default();
    let ids = journals(&**disk, &journal_dir(dir))?;
    for journal_id in &ids {
        let may_be_live = lock.is_none() && ids.last() == Some(journal_id);
        let read = JournalReader::open(Arc::clone(disk), &journal_dir(dir), journal_id);
        match read.and_then(|reader| Ok((reader.trials()?, reader))) {
            Ok((ranges, reader)) => {
                for range in ranges {
                    let live = may_be_live && range.closed.is_none();
                    let fate = if live { Fate::Live } else { seal_if_needed(&reader, &range, dir, disk, progress) };
                    recovery.take(range, fate);
                }
            }
            Err(ReadError::NeverBegun { .. }) => {}
            Err(error) => recovery.unreadable.push(error),
        }
    }
    recovery.take_kept(dir, disk, progress);
    drop(lock);
    Ok(recovery)
}

impl Recovery {
    fn take(&mut self, range: TrialRange, fate: Fate) {
        self.trials.push(Recovered { journal_id: range.journal_id, trial_id: range.trial_id, fate });
    }

    /// Trials whose journal is there only because it was kept.
    fn take_kept(&mut self, dir: &Path, disk: &Arc<dyn Disk>, progress: &mut dyn FnMut(&TrialRange)) {
        let (readers, unreadable) = readers(dir, disk);
        self.unreadable.extend(unreadable);
        for (trial_id, reader) in readers {
            if self.trials.iter().any(|known| known.trial_id == trial_id) {
                continue;
            }
            match reader.trials() {
                Ok(ranges) => {
                    for range in ranges.into_iter().filter(|range| range.trial_id == trial_id) {
                        let fate = seal_if_needed(&reader, &range, dir, disk, progress);
                        self.take(range, fate);
                    }
                }
                Err(error) => self.unreadable.push(error),
            }
        }
    }
}

fn seal_if_needed(
    reader: &JournalReader,
    range: &TrialRange,
    dir: &Path,
    disk: &Arc<dyn Disk>,
    progress: &mut dyn FnMut(&TrialRange),
) -> Fate {
    match sealed_file(range, dir) {
        Ok(Some(path)) => return Fate::AlreadySealed(path),
        Ok(None) => {}
        Err(error) => return Fate::Failed(error),
    }
    progress(range);
    match seal(reader, range, dir, disk) {
        Ok(sealed) => Fate::Sealed(sealed),
        Err(error) => Fate::Failed(error),
    }
}

/// The trial file of exactly this range, if there is one that opens.
///
/// # Errors
/// [`SealError::TrialId`].
pub fn sealed_file(range: &TrialRange, dir: &Path) -> Result<Option<PathBuf>, SealError> {
    let first = trial_path(dir, &range.trial_id)?;
    let later = (2_u32..).map(|k| first.with_file_name(format!("trial-{}-{k}.h5", range.trial_id)));
    for path in std::iter::once(first.clone()).chain(later) {
        if !path.exists() {
            return Ok(None);
        }
        let is_of_range = TrialFile::open(&path).is_ok_and(|trial| {
            let header = trial.header();
            (&header.journal_id, header.first_seq, header.last_seq)
                == (&range.journal_id, range.first_seq, range.last_seq)
        });
        if is_of_range {
            return Ok(Some(path));
        }
    }
    Ok(None)
}

/// Seals one trial of one journal: what the daemon's child process does. The trial's records are looked for from
/// `from_seq` on; 0 looks everywhere.
///
/// # Errors
/// [`SealError`].
pub fn seal_one(
    dir: &Path,
    journal_id: &str,
    trial_id: &str,
    from_seq: u64,
    disk: &Arc<dyn Disk>,
) -> Result<Sealed, SealError> {
    let reader = JournalReader::open(Arc::clone(disk), &journal_dir(dir), journal_id)?;
    let from = reader.segments().iter().rfind(|segment| segment.open.first_seq <= from_seq);
    let ranges = reader.survey_from(from.map_or(0, |segment| segment.number))?.trials;
    let range = ranges.iter().find(|range| range.trial_id == trial_id);
    let range = range
        .ok_or_else(|| SealError::NoSuchTrial { journal_id: journal_id.to_owned(), trial_id: trial_id.to_owned() })?;
    seal(&reader, range, dir, disk)
}
