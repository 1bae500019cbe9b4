//! A trial file's signals and the rig file it carries: what reading and replay start from.

use std::path::{Path, PathBuf};

use tautrail::calibration::Signal;
use tautrail::rig::{self, Rig, RigError};
use tautrail::trial::{Header, TrialError, TrialFile};
use thiserror::Error;

#[derive(Debug, Error)]
pub enum MeasuredError {
    #[error("{}", once(path, source))]
    Trial { path: String, source: TrialError },
    #[error("{path}: carries no rig file; name one with --rig")]
    NoRig { path: String },
    #[error("{path}: the rig file it carries can't be used; name one with --rig")]
    Rig { path: String, source: RigError },
    #[error("{}", once(path, source))]
    OtherRig { path: String, source: RigError },
}

/// The error with the path before it, where it does not name the path itself.
fn once(path: &str, source: &impl std::error::Error) -> String {
    let said = source.to_string();
    if said.contains(path) { said } else { format!("{path}: {said}") }
}

#[derive(Debug)]
pub struct Measured {
    pub header: Header,
    pub signals: Vec<Signal>,
    pub rig: Rig,
}

/// Opens a trial; `rig_path` takes the place of the rig file that the trial carries.
pub fn open(trial_path: &Path, rig_path: Option<&PathBuf>) -> Result<Measured, MeasuredError> {
    let path = || trial_path.display().to_string();
    let failed = |source| MeasuredError::Trial { path: path(), source };
    let trial = TrialFile::open(trial_path).map_err(failed)?;
    let rig = match rig_path {
        Some(other) => {
            rig::load(other).map_err(|source| MeasuredError::OtherRig { path: other.display().to_string(), source })?
        }
        None => {
            let texts = trial.texts().map_err(failed)?;
            let carried = texts.iter().find(|text| text.name == "rig.toml");
            let text = carried.ok_or_else(|| MeasuredError::NoRig { path: path() })?;
            rig::parse(&text.text).map_err(|source| MeasuredError::Rig { path: path(), source })?
        }
    };
    let signals = trial.signals().map_err(failed)?;
    Ok(Measured { header: trial.header().clone(), signals, rig })
}
