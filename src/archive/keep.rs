//! Journals that are kept for a person: the segments a trial needs, as hard links in a directory of the trial's own, so
//! that they stay whatever the recorder lets go of, and cost nothing while it still has them.
//!
//! Kept is the journal of every trial that did not end as a launch or a let-down, and of every trial whose segments say
//! that they are to be kept (the recorder wrote it there, so whoever seals knows), from before its file is published until a person lets it go. Reads and links only: no byte of a journal
//! is written.

use std::fs::{self, File};
use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use crate::journal::{Disk, JournalReader, ReadError, SegmentInfo, TrialRange, journals};
use crate::reading::Outcome;

use super::error::SealError;
use super::recover::journal_dir;
use super::seal::trial_path;

/// A journal that waits for a person.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Kept {
    pub trial_id: String,
    pub dir: PathBuf,
    /// Of the files in it that can be looked at.
    pub n_bytes: u64,
}

/// Why a kept journal was not let go.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum ReleaseError {
    #[error("no journal of a trial {trial_id} is kept in {dir}; `tautrail recover` lists those that are", dir = dir.display())]
    NotKept { trial_id: String, dir: PathBuf },
    #[error("trial {trial_id} has no file in {dir}: its kept journal is all there is of it; seal it first with `tautrail recover`", dir = dir.display())]
    NotSealed { trial_id: String, dir: PathBuf },
    #[error("{path} is held, so nothing about it is deleted; `tautrail hold --lift` lifts the hold", path = path.display())]
    Held { path: PathBuf },
    #[error(transparent)]
    TrialId(SealError),
    #[error("cannot let go of {path}: {source}", path = path.display())]
    Io { path: PathBuf, source: io::Error },
}

/// Whether the journal of a trial that ended in this way is kept.
pub(super) fn is_kept(reader: &JournalReader, range: &TrialRange, outcome: &str) -> bool {
    let ordinary = [Outcome::Launched, Outcome::LetDown].iter().any(|known| known.word() == outcome);
    !ordinary || segments_of(reader.segments(), range).iter().any(|segment| segment.open.keep)
}

fn kept_dir(dir: &Path) -> PathBuf {
    journal_dir(dir).join("kept")
}

/// Links the segments that the range needs. Doing it again changes nothing.
pub(super) fn keep(reader: &JournalReader, range: &TrialRange, dir: &Path) -> Result<(), SealError> {
    trial_path(dir, &range.trial_id)?; // refuses an id that could lead elsewhere
    let kept = kept_dir(dir).join(&range.trial_id);
    let at = |doing, path: &Path| {
        let path = path.to_owned();
        move |source| SealError::Io { doing, path, source }
    };
    fs::create_dir_all(&kept).map_err(at("make", &kept))?;
    for segment in needed(reader.segments(), range) {
        let Some(name) = segment.path.file_name() else { continue };
        link_or_copy(&segment.path, &kept.join(name)).map_err(at("keep", &segment.path))?;
    }
    for path in [kept.as_path(), &kept_dir(dir), &journal_dir(dir)] {
        File::open(path).and_then(|dir| dir.sync_all()).map_err(at("sync", path))?;
    }
    Ok(())
}

/// From one segment before the range's start, for the decoders' lead-in, to its end.
pub(super) fn needed<'s>(segments: &'s [SegmentInfo], range: &TrialRange) -> &'s [SegmentInfo] {
    let (first, end) = ends(segments, range);
    &segments[first.saturating_sub(1)..end]
}

/// Those in which records of the range stand.
fn segments_of<'s>(segments: &'s [SegmentInfo], range: &TrialRange) -> &'s [SegmentInfo] {
    let (first, end) = ends(segments, range);
    &segments[first..end]
}

fn ends(segments: &[SegmentInfo], range: &TrialRange) -> (usize, usize) {
    let first = segments.iter().rposition(|segment| segment.open.first_seq <= range.first_seq).unwrap_or(0);
    let end = segments.partition_point(|segment| segment.open.first_seq <= range.last_seq);
    (first.min(end), end)
}

fn link_or_copy(from: &Path, to: &Path) -> io::Result<()> {
    match fs::hard_link(from, to) {
        Ok(()) => Ok(()),
        Err(error) if error.kind() == io::ErrorKind::AlreadyExists => Ok(()),
        // Some file systems know no hard links.
        Err(_) => {
            // Under another name until it is whole: what stands under its own counts as kept.
            let part = to.with_extension("part");
            fs::copy(from, &part)?;
            File::open(&part)?.sync_all()?;
            fs::rename(&part, to)
        }
    }
}

/// The journals kept in the archive `dir`, oldest trial first.
///
/// # Errors
/// The disk's; no journal directory is no error.
pub fn kept(dir: &Path) -> io::Result<Vec<Kept>> {
    let listed = match fs::read_dir(kept_dir(dir)) {
        Ok(listed) => listed,
        Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(Vec::new()),
        Err(error) => return Err(error),
    };
    let mut kept = Vec::new();
    for entry in listed {
        let entry = entry?;
        // Whatever else somebody left there is not a trial's.
        if entry.file_type()?.is_dir() {
            let trial_id = entry.file_name().to_string_lossy().into_owned();
            kept.push(Kept { trial_id, n_bytes: bytes_in(&entry.path()), dir: entry.path() });
        }
    }
    kept.sort_by(|a, b| a.trial_id.cmp(&b.trial_id));
    Ok(kept)
}

fn bytes_in(dir: &Path) -> u64 {
    let files = fs::read_dir(dir).into_iter().flatten();
    files.filter_map(|file| Some(file.ok()?.metadata().ok()?.len())).sum()
}

/// Lets go of a trial's kept journal: what of it the recorder does not have any more is gone for good. Gives its bytes.
///
/// # Errors
/// [`ReleaseError`]; a trial without a file is refused.
pub fn release(dir: &Path, trial_id: &str) -> Result<u64, ReleaseError> {
    let file = trial_path(dir, trial_id).map_err(ReleaseError::TrialId)?;
    let io = |source| ReleaseError::Io { path: kept_dir(dir), source };
    if let Some(path) = super::hold::held_of(dir, trial_id).map_err(io)?.into_iter().next() {
        return Err(ReleaseError::Held { path });
    }
    let found = kept(dir).map_err(io)?.into_iter().find(|kept| kept.trial_id == trial_id);
    let (trial_id, dir) = (trial_id.to_owned(), dir.to_owned());
    let Some(found) = found else { return Err(ReleaseError::NotKept { trial_id, dir }) };
    if !file.exists() {
        return Err(ReleaseError::NotSealed { trial_id, dir });
    }
    fs::remove_dir_all(&found.dir).map_err(|source| ReleaseError::Io { path: found.dir.clone(), source })?;
    Ok(found.n_bytes)
}

/// The kept journals as readers, each with the id of its trial; beside them why others do not open.
pub(super) fn readers(dir: &Path, disk: &Arc<dyn Disk>) -> (Vec<(String, JournalReader)>, Vec<ReadError>) {
    let (mut readers, mut unreadable) = (Vec::new(), Vec::new());
    let listed = kept(dir).unwrap_or_else(|source| {
        unreadable.push(ReadError::Io { path: kept_dir(dir), source });
        Vec::new()
    });
    for kept in listed {
        match reader_of(&kept, disk) {
            Ok(reader) => readers.extend(reader.map(|reader| (kept.trial_id, reader))),
            Err(error) => unreadable.push(error),
        }
    }
    (readers, unreadable)
}

/// `None`: killed before it kept anything, or emptied by hand.
fn reader_of(kept: &Kept, disk: &Arc<dyn Disk>) -> Result<Option<JournalReader>, ReadError> {
    let ids = journals(&**disk, &kept.dir)?;
    ids.first().map(|id| JournalReader::open(Arc::clone(disk), &kept.dir, id)).transpose()
}
