//! Trials in forms that other tools read: CSV (RFC 4180) and a Parquet dataset. What is exported is derived data: an export
//! of the same trial replaces the one before. Amendments are merged; results rest on them.

mod csv_files;
mod parquet_files;
mod table;
mod tables;

use std::io;
use std::path::{Path, PathBuf};

use thiserror::Error;

use super::again::AgainError;
use super::amendment::{Amended, AmendedError};
use super::hold::is_held;
use crate::trial::TrialError;

/// What is written.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ExportForm {
    /// `OUT/<trial>/….csv`, one folder a trial.
    Csv,
    /// `OUT/<table>/rig=…/date=…/<trial>.parquet`.
    Parquet,
}

/// Why a trial was not exported.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum ExportError {
    #[error(transparent)]
    Trial(#[from] TrialError),
    #[error(transparent)]
    Amended(#[from] AmendedError),
    #[error(transparent)]
    Again(#[from] AgainError),
    #[error("{path} can't be written: {source}", path = path.display())]
    Io { path: PathBuf, source: io::Error },
    #[error("{path} can't be written as CSV: {source}", path = path.display())]
    Csv { path: PathBuf, source: csv::Error },
    #[error("{path} can't be written as Parquet: {source}", path = path.display())]
    Parquet { path: PathBuf, source: parquet::errors::ParquetError },
}

/// Exports one trial below `out`, with its signals sample by sample if `signals`; gives the files written.
///
/// # Errors
/// [`ExportError`]. Files written before stay; each is whole.
pub fn export(trial: &Path, out: &Path, form: ExportForm, signals: bool) -> Result<Vec<PathBuf>, ExportError> {
    let amended = Amended::open(trial)?;
    let tables = tables::of_trial(&amended, is_held(trial))?;
    match form {
        ExportForm::Csv => csv_files::write(&amended, &tables, out, signals),
        ExportForm::Parquet => parquet_files::write(&amended, &tables, out, signals),
    }
}
