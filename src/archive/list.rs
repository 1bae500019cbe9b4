//! Lists the trials of a directory.

use std::path::{Path, PathBuf};

use crate::trial::{Header, TrialError, TrialFile};

/// One file of the list.
#[derive(Debug)]
pub struct Listing {
    pub path: PathBuf,
    pub what: Result<Summary, TrialError>,
}

/// What a list shows of a trial.
#[derive(Debug, Clone, PartialEq)]
pub struct Summary {
    pub header: Header,
    pub outcome: String,
    pub launch_speed_mps: Option<f64>,
}

/// Every trial file in `dir`, by name; files that do not open are listed with the reason.
///
/// # Errors
/// If the directory cannot be listed.
pub fn list(dir: &Path) -> std::io::Result<Vec<Listing>> {
    let mut paths = Vec::new();
    for entry in std::fs::read_dir(dir)? {
        let entry = entry?;
        let name = entry.file_name();
        let name = name.to_string_lossy();
        if name.starts_with("trial-") && name.ends_with(".h5") {
            paths.push(entry.path());
        }
    }
    paths.sort();
    Ok(paths.into_iter().map(|path| Listing { what: summary(&path), path }).collect())
}

fn summary(path: &Path) -> Result<Summary, TrialError> {
    let trial = TrialFile::open(path)?;
    let results = trial.results()?;
    let launch_speed = results.entries.iter().find(|entry| entry.name == "launch_speed");
    Ok(Summary {
        header: trial.header().clone(),
        outcome: trial.outcome().to_owned(),
        launch_speed_mps: launch_speed.map(|entry| entry.value),
    })
}
