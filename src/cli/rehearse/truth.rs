//! The truth log of the virtual rig, as far as the rehearsal compares with it.

use std::fs::File;
use std::io::{self, BufReader};
use std::path::{Path, PathBuf};

use serde::Deserialize;
use thiserror::Error;

#[derive(Debug, Error)]
pub enum TruthError {
    #[error("truth log {path}: {source}")]
    Unreadable { path: PathBuf, source: io::Error },
    #[error("truth log {path}: {source}")]
    NotUnderstood { path: PathBuf, source: serde_json::Error },
}

#[derive(Debug, Deserialize)]
pub struct Truth {
    pub outcome: String,
    pub events: Vec<Event>,
    pub launch: Option<Launch>,
    pub peaks: Vec<Peak>,
    pub tension: Tension,
    pub devices: Vec<Device>,
}

#[derive(Debug, Deserialize)]
pub struct Event {
    pub kind: String,
    pub host_ns: i64,
}

#[derive(Debug, Deserialize)]
pub struct Launch {
    pub speed_ground_mps: f64,
    pub separation_x_m: f64,
}

#[derive(Debug, Deserialize)]
pub struct Peak {
    pub filter: String,
    pub specific_g: f64,
}

#[derive(Debug, Deserialize)]
pub struct Tension {
    pub hold_line_n: f64,
}

#[derive(Debug, Deserialize)]
pub struct Device {
    pub name: String,
    pub streams: Vec<Stream>,
}

#[derive(Debug, Deserialize)]
pub struct Stream {
    pub stream: u8,
    /// Sequence, first index, number of samples, CRC-32C; every block that left the device, in order.
    pub blocks: Vec<(u32, u64, u32, u32)>,
}

impl Truth {
    pub fn read(path: &Path) -> Result<Self, TruthError> {
        let unreadable = |source| TruthError::Unreadable { path: path.to_owned(), source };
        let file = File::open(path).map_err(unreadable)?;
        serde_json::from_reader(BufReader::new(file))
            .map_err(|source| TruthError::NotUnderstood { path: path.to_owned(), source })
    }

    pub fn event_host_ns(&self, kind: &str) -> Option<i64> {
        self.events.iter().find(|event| event.kind == kind).map(|event| event.host_ns)
    }

    pub fn specific_peak_g(&self, filter: &str) -> Option<f64> {
        self.peaks.iter().find(|peak| peak.filter == filter).map(|peak| peak.specific_g)
    }
}
