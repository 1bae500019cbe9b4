//! What can go wrong with a trial file, said with the object and the numbers.

use std::path::PathBuf;

/// Errors of writing and reading trial files.
#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum TrialError {
    #[error("{path}: {source}", path = path.display())]
    Io { path: PathBuf, source: std::io::Error },
    #[error("{path} is no readable HDF5 file ({source}): it may be cut short or damaged; seal it again from its journal, or fetch a copy", path = path.display())]
    NotHdf5 { path: PathBuf, source: hdf5::Error },
    #[error("{path} is damaged: {what}; seal it again from its journal, or fetch a copy", path = path.display())]
    Damaged { path: PathBuf, what: String },
    #[error("{path} is no trial file: it is not HDF5 at all", path = path.display())]
    OtherKind { path: PathBuf },
    #[error("{path} is an HDF5 file, but no trial of this program: {what}", path = path.display())]
    NotATrial { path: PathBuf, what: String },
    #[error(
        "{path} has trial format {found}, this program reads up to {supported}: use a newer program", path = path.display()
    )]
    TooNew { path: PathBuf, found: u32, supported: u32 },
    #[error("while {doing} {object}: {source}")]
    Hdf5 { doing: &'static str, object: String, source: hdf5::Error },
    #[error("{object} is missing from the trial file")]
    Missing { object: String },
    #[error("{object} holds {found}, expected {expected}")]
    WrongType { object: String, found: String, expected: &'static str },
    #[error(
        "{object} claims {declared_bytes} bytes, but its {stored_bytes} stored bytes cannot hold so many: the file is damaged"
    )]
    TooLarge { object: String, declared_bytes: u64, stored_bytes: u64 },
    #[error(
        "{object} has {n_found} members, more than the {n_max} that are read: the file is damaged or no trial of this program"
    )]
    TooMany { object: String, n_found: usize, n_max: usize },
    #[error("{object} leads out of the file or is stored in a way that trial files never use ({what}): refused")]
    Foreign { object: String, what: &'static str },
    #[error("{object} has {found} entries, its neighbours have {expected}")]
    Uneven { object: String, found: usize, expected: usize },
    #[error("{object} has no value {word:?}")]
    UnknownWord { object: String, word: String },
    #[error("{object}: time does not move on at sample {sample}")]
    TimeStands { object: String, sample: usize },
    #[error("{object} does not exist, the trial holds {n_known} of its kind")]
    NoSuch { object: String, n_known: usize },
    #[error("{object}: block of {n_samples} samples carries {n_channels} channels with {found} counts")]
    BlockShape { object: String, n_samples: u32, n_channels: usize, found: usize },
}

/// Names the object and the deed beside an error of the library.
pub(super) trait Doing<T> {
    fn doing(self, doing: &'static str, object: impl Into<String>) -> Result<T, TrialError>;
}

impl<T> Doing<T> for hdf5::Result<T> {
    fn doing(self, doing: &'static str, object: impl Into<String>) -> Result<T, TrialError> {
        self.map_err(|source| TrialError::Hdf5 { doing, object: object.into(), source })
    }
}
