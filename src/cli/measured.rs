//! A trial file's signals and the rig file it carries: what reading and replay start from.

use std::path::{Path, PathBuf};

use tautrail::archive::{Amended, AmendedError};
use tautrail::calibration::{self, Signal};
use tautrail::reading::{Beside, Camera, EdgeSeen, Reading, Recorder, TableError, read_beside};
use tautrail::rig::{self, Rig, RigError};
use tautrail::trial::{Header, TrialError};
use thiserror::Error;

#[derive(Debug, Error)]
pub enum MeasuredError {
    #[error("{}", once(path, source))]
    Trial { path: String, source: TrialError },
    #[error("{path}: {source}; --rig names another rig file")]
    Amended { path: String, source: AmendedError },
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
    /// Edges of digital inputs that the trial holds.
    pub edges: Vec<EdgeSeen>,
    /// What amendments changed of the rig file and conditions, and what is wrong with them.
    pub amended: Vec<String>,
    /// SHA-256 of all raw data as sealed.
    pub raw_sha256: String,
}

impl Measured {
    /// Results, phases, outcome, and what is to be said of the calibrations behind them.
    pub fn reading(&self, beside: &Beside) -> Reading {
        let mut reading = read_beside(&self.signals, beside, &self.rig);
        reading.findings.extend(calibration::said_of(&self.rig, self.header.day(), &self.signals));
        reading
    }
}

/// Tables that were recorded beside the rig and are read with the trial.
#[derive(Debug, Default, clap::Args)]
pub struct BesideArgs {
    /// Compare with a payload recorder's speeds: CSV with columns time_s, speed_mps and optionally u_speed_mps
    #[arg(long, value_name = "CSV")]
    recorder: Option<PathBuf>,
    /// Compare with a high-speed camera: CSV with frame or time_s, and x_m or x_mm of a mark along the rail
    #[arg(long, value_name = "CSV")]
    camera: Option<PathBuf>,
    /// Frames a second of the camera
    #[arg(long, value_name = "HZ", requires = "camera")]
    frame_rate: Option<f64>,
    /// Frame in which the shuttle starts; without it the film is laid over the measured speeds
    #[arg(long, value_name = "FRAME", requires = "camera")]
    release_frame: Option<f64>,
}

impl BesideArgs {
    /// Reads the tables that were named; the trial's own edges come along.
    pub fn beside(&self, edges: Vec<EdgeSeen>) -> Result<Beside, BesideError> {
        if let Some(rate_hz) = self.frame_rate.filter(|rate_hz| !(1.0..=1e6).contains(rate_hz)) {
            return Err(BesideError::FrameRate { rate_hz });
        }
        let recorder = self.recorder.as_deref().map(|path| parsed(path, Recorder::parse)).transpose()?;
        let film = |text: &str| Camera::parse(text, self.frame_rate, self.release_frame);
        let camera = self.camera.as_deref().map(|path| parsed(path, film)).transpose()?;
        Ok(Beside { edges, recorder, camera })
    }
}

#[derive(Debug, Error)]
pub enum BesideError {
    #[error("{path}: the table can't be read: {source}")]
    Unreadable { path: String, source: std::io::Error },
    #[error("{path}: {source}")]
    Table { path: String, source: TableError },
    #[error("--frame-rate {rate_hz} is outside 1 to 1000000 frames a second")]
    FrameRate { rate_hz: f64 },
}

/// A table larger than this is no table that a person exported.
const TABLE_BYTES_MAX: u64 = 64 << 20;

fn parsed<T>(path: &Path, parse: impl Fn(&str) -> Result<T, TableError>) -> Result<T, BesideError> {
    let shown = || path.display().to_string();
    let unreadable = |source| BesideError::Unreadable { path: shown(), source };
    if std::fs::metadata(path).map_err(unreadable)?.len() > TABLE_BYTES_MAX {
        return Err(BesideError::Table { path: shown(), source: TableError::TooLong });
    }
    let text = std::fs::read_to_string(path).map_err(unreadable)?;
    parse(&text).map_err(|source| BesideError::Table { path: shown(), source })
}

/// Opens a trial with its amendments; `rig_path` takes the place of the rig file that holds for it.
pub fn open(trial_path: &Path, rig_path: Option<&PathBuf>) -> Result<Measured, MeasuredError> {
    let path = || trial_path.display().to_string();
    let failed = |source| MeasuredError::Trial { path: path(), source };
    let amended_failed = |source| MeasuredError::Amended { path: path(), source };
    let amended = Amended::open(trial_path).map_err(failed)?;
    let (rig, signals, changes) = match rig_path {
        Some(other) => {
            let rig = rig::load(other)
                .map_err(|source| MeasuredError::OtherRig { path: other.display().to_string(), source })?;
            (rig, amended.trial.signals().map_err(failed)?, Vec::new())
        }
        None => {
            let rig = amended.rig().map_err(amended_failed)?;
            let signals = amended.signals(&rig).map_err(amended_failed)?;
            (rig.rig, signals, rig.changes)
        }
    };
    let edges = tautrail::archive::edges_of(&amended.trial).map_err(failed)?;
    let changes = changes.into_iter().map(|change| format!("amended: {change}"));
    let wrong = amended.findings.iter().map(|finding| format!("the amendments are not sound: {finding}"));
    let amended_words = changes.chain(wrong).collect();
    let raw_sha256 = amended.raw_sha256.clone();
    Ok(Measured { header: amended.trial.header().clone(), signals, rig, edges, raw_sha256, amended: amended_words })
}
