//! What can keep a trial from being sealed, and what was done about it.

use std::path::PathBuf;

use crate::journal::ReadError;
use crate::trial::TrialError;

/// Errors of sealing. The journal is kept whatever happened, and nothing half-made stays behind.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum SealError {
    #[error(transparent)]
    Journal(#[from] ReadError),
    #[error(transparent)]
    Trial(#[from] TrialError),
    #[error("cannot {doing} {path}: {source}", path = path.display())]
    Io { doing: &'static str, path: PathBuf, source: std::io::Error },
    #[error(
        "{dir} has {free_bytes} bytes free, sealing may need {needed_bytes}: make room and run `tautrail recover`; the journal is kept",
        dir = dir.display()
    )]
    NoRoom { dir: PathBuf, needed_bytes: u64, free_bytes: u64 },
    #[error("trial id {trial_id:?} cannot be part of a file name: only letters, digits and hyphens can")]
    TrialId { trial_id: String },
    #[error("journal {journal_id} holds no trial {trial_id}")]
    NoSuchTrial { journal_id: String, trial_id: String },
    #[error("journal {journal_id} has no readable record in {first_seq} to {last_seq}: there is nothing to seal")]
    NothingThere { journal_id: String, first_seq: u64, last_seq: u64 },
    #[error("{path} was read back and {what}: it is deleted, the journal is kept; the disk or its memory may be failing", path = path.display())]
    NotVerified { path: PathBuf, what: String },
    #[error("{path} is there already and is not what this journal gives: move it away if it is not wanted", path = path.display())]
    Differs { path: PathBuf },
}
