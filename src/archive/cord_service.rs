//! What each cord has done, counted from the trials of an archive.
//!
//! Nothing is written down beside the trials, so nothing can be counted twice or lost: a trial counts once by its journal
//! and trial id, however often it was sealed again or copied. A trial in which the tension stood above slack is one cycle of
//! every cord that its rig file lists, a let-down as well as a launch; the hours are the time above slack.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};

use thiserror::Error;

use super::list::{Listing, list};
use crate::calibration::Signal;
use crate::rig::{Rig, RigError, Served, parse};
use crate::trial::{TrialError, TrialFile};

/// Longest distance of two samples that still counts as loaded between them, s.
const LONGEST_GAP_S: f64 = 1.0;

#[derive(Debug, Error)]
#[non_exhaustive]
pub enum ServiceError {
    #[error("{path}: can't be listed: {source}")]
    Unlisted { path: String, source: std::io::Error },
}

/// Why a trial was not counted.
#[derive(Debug)]
pub struct NotCounted {
    pub path: PathBuf,
    pub why: String,
}

/// Service by serial.
#[derive(Debug, Default)]
pub struct CordService {
    pub by_serial: BTreeMap<String, Served>,
    /// Trials that counted.
    pub n_trials: usize,
    /// Files of a trial that was counted already: sealed again, or copied.
    pub n_again: usize,
    /// Trials whose rig file lists no cords.
    pub n_without_cords: usize,
    pub not_counted: Vec<NotCounted>,
}

/// Counts the trials of a directory; `told` hears of each file as it is read.
///
/// # Errors
/// The directory can't be listed. A trial that can't be read is among [`CordService::not_counted`].
pub fn cord_service(dir: &Path, mut told: impl FnMut(usize, usize)) -> Result<CordService, ServiceError> {
    let shown = || dir.display().to_string();
    let listings = list(dir).map_err(|source| ServiceError::Unlisted { path: shown(), source })?;
    let mut service = CordService::default();
    let mut seen: BTreeSet<(String, String)> = BTreeSet::new();
    for (index, Listing { path, what }) in listings.iter().enumerate() {
        told(index + 1, listings.len());
        let counted = match what {
            Ok(summary) if !seen.insert((summary.header.journal_id.clone(), summary.header.trial_id.clone())) => {
                service.n_again += 1;
                continue;
            }
            Ok(_) => of_trial(path),
            Err(error) => Err(error.to_string()),
        };
        match counted {
            Ok((serials, _)) if serials.is_empty() => service.n_without_cords += 1,
            Ok((serials, loaded_s)) => {
                service.n_trials += 1;
                for serial in serials {
                    let served = service.by_serial.entry(serial).or_default();
                    served.cycles += u32::from(loaded_s > 0.0);
                    served.hours += loaded_s / 3600.0;
                }
            }
            Err(why) => service.not_counted.push(NotCounted { path: path.clone(), why }),
        }
    }
    Ok(service)
}

/// The cords of a trial and how long they were loaded, s.
fn of_trial(path: &Path) -> Result<(Vec<String>, f64), String> {
    let rig = rig_of(path)?;
    let serials: Vec<String> = rig.details.cord_items.iter().map(|cord| cord.serial.clone()).collect();
    if serials.is_empty() {
        return Ok((serials, 0.0));
    }
    let told = |error: TrialError| error.to_string();
    let trial = TrialFile::open(path).map_err(told)?;
    let there = trial.signal_names().map_err(told)?;
    let tensions: Vec<_> = rig
        .channels
        .iter()
        .filter(|channel| channel.role.is_tension() && there.contains(&channel.name))
        .map(|channel| trial.signal(&channel.name).map_err(told))
        .collect::<Result<_, _>>()?;
    if tensions.is_empty() {
        return Err("has no tension signal: whether its cords were loaded is not known".into());
    }
    let loaded_s = tensions.iter().map(|signal| loaded_s(signal, rig.plan.slack_tension_n)).fold(0.0, f64::max);
    Ok((serials, loaded_s))
}

fn rig_of(path: &Path) -> Result<Rig, String> {
    let texts = TrialFile::open(path).and_then(|trial| trial.texts()).map_err(|error| error.to_string())?;
    let carried = texts.into_iter().find(|text| text.name == "rig.toml").ok_or("carries no rig file")?;
    parse(&carried.text).map_err(|error: RigError| error.to_string())
}

/// Time above a tension. Single samples are no load: both ends of a step must stand above.
fn loaded_s(signal: &Signal, above_n: f64) -> f64 {
    let pairs = signal.time_s.windows(2).zip(signal.value.windows(2));
    let loaded = pairs.filter(|(_, value)| value[0] > above_n && value[1] > above_n);
    loaded.map(|(time, _)| time[1] - time[0]).filter(|step| *step < LONGEST_GAP_S).sum()
}
