//! Proves that a trial file still says what was sealed.
//!
//! Checks: the digest of every raw group against what the file holds now; blocks against gaps (a jump of the indices that
//! no gap row explains, and a gap row that no jump shows, are both findings); counts against blocks; clocks, clock maps
//! and ticks that run forward; time axes that move on; signals and results against those derived again from the counts; the
//! chain of amendments. A digest within the file proves nothing against somebody who rewrote both.

use std::collections::BTreeMap;
use std::path::Path;

use super::amendment::Amended;
use super::reproduce::reproduce;
use crate::capture::Gap;
use crate::trial::{BlockRow, TrialError, TrialFile, whole_raw_digest};

/// What verifying found.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Verified {
    pub trial_id: String,
    /// SHA-256 over all raw groups, as sealed: compare it with the one kept elsewhere.
    pub raw_sha256: String,
    pub n_blocks: usize,
    pub n_samples: u64,
    pub n_missing: u64,
    pub n_amendments: usize,
    /// SHA-256 of the last amendment, which stands for the whole chain; empty without amendments.
    pub last_amendment_sha256: String,
    /// Signals and results were derived again and compared.
    pub derived_again: bool,
    /// What is wrong, in sentences; empty for a sound file.
    pub findings: Vec<String>,
    /// What a person should know and is not wrong.
    pub remarks: Vec<String>,
}

/// How much is checked.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Depth {
    #[default]
    Everything,
    /// Nothing is derived again.
    Stored,
}

/// Verifies the file.
///
/// # Errors
/// Only if it cannot be opened as a trial at all; parts that cannot be read are findings.
pub fn verify(path: &Path, depth: Depth) -> Result<Verified, TrialError> {
    let amended = Amended::open(path)?;
    let trial = &amended.trial;
    let mut verified = Verified {
        trial_id: trial.header().trial_id.clone(),
        raw_sha256: amended.raw_sha256.clone(),
        n_blocks: 0,
        n_samples: 0,
        n_missing: 0,
        n_amendments: amended.chain.len(),
        last_amendment_sha256: amended.chain.last().map_or_else(String::new, |last| last.sha256.clone()),
        derived_again: false,
        findings: Vec::new(),
        remarks: Vec::new(),
    };
    let derived = if depth == Depth::Everything { derived_again } else { |_: &_, _: &mut _| Ok(()) };
    for check in [digests, devices, host_clocks, axes, results, derived] {
        if let Err(error) = check(trial, &mut verified) {
            verified.findings.push(error.to_string());
        }
    }
    verified.findings.extend(amended.findings);
    Ok(verified)
}

fn digests(trial: &TrialFile, verified: &mut Verified) -> Result<(), TrialError> {
    let digests = trial.raw_digests()?;
    for digest in &digests {
        if digest.sealed != digest.found {
            let (device, sealed, found) = (&digest.device, &digest.sealed, &digest.found);
            verified.findings.push(format!("raw data of {device} changed: sealed as {sealed}, now {found}"));
        }
    }
    if whole_raw_digest(&digests) != verified.raw_sha256 {
        verified.findings.push("the digest over all devices is not that of its parts".to_owned());
    }
    Ok(())
}

fn devices(trial: &TrialFile, verified: &mut Verified) -> Result<(), TrialError> {
    for device in trial.device_names()? {
        let (blocks, record) = (trial.blocks(&device)?, trial.device(&device)?);
        verified.n_blocks += blocks.len();
        verified.n_samples += blocks.iter().map(|block| u64::from(block.n_samples)).sum::<u64>();
        verified.n_missing = record.gaps.iter().fold(verified.n_missing, |sum, gap| sum.saturating_add(gap.n_missing));
        gaps_against_blocks(&device, &blocks, &record.gaps, &mut verified.findings);
        counts_against_blocks(trial, &device, &blocks, &mut verified.findings)?;
        ticks(&device, &blocks, &mut verified.findings);
        clocks(trial, &device, &mut verified.findings)?;
    }
    Ok(())
}

/// Every jump of a stream's indices needs its gap row.
fn gaps_against_blocks(device: &str, blocks: &[BlockRow], gaps: &[Gap], findings: &mut Vec<String>) {
    let mut unexplained: BTreeMap<(u32, u8, u64), u64> = BTreeMap::new();
    for gap in gaps {
        unexplained.insert((gap.boot_id, gap.stream, gap.first_missing_index), gap.n_missing);
    }
    let mut next_index: BTreeMap<(u32, u8), u64> = BTreeMap::new();
    for block in blocks {
        let stream = (block.boot_id, block.stream);
        let next = next_index.get(&stream).copied();
        if let Some(expected) = next.filter(|expected| *expected != block.first_index) {
            let explained = unexplained.remove(&(block.boot_id, block.stream, expected));
            let n_missing = block.first_index.checked_sub(expected);
            if n_missing.is_none() || explained != n_missing {
                let at = block.first_index;
                findings
                    .push(format!("{device}: stream {} jumps from index {expected} to {at} without a gap", stream.1));
            }
        } else if next.is_none() {
            // The gap before a stream's first block begins in what was recorded before the trial.
            unexplained.retain(|(boot_id, of, first), n| {
                (*boot_id, *of) != stream || first.saturating_add(*n) != block.first_index
            });
        }
        next_index.insert(stream, block.first_index.saturating_add(u64::from(block.n_samples)));
    }
    for ((_, stream, first), n) in unexplained {
        findings
            .push(format!("{device}: a gap of {n} samples at index {first} of stream {stream} is in no block's way"));
    }
}

fn counts_against_blocks(
    trial: &TrialFile,
    device: &str,
    blocks: &[BlockRow],
    findings: &mut Vec<String>,
) -> Result<(), TrialError> {
    for channel in trial.raw_channels(device)? {
        let of_channel = |block: &&BlockRow| (block.stream, block.layout) == (channel.stream, channel.layout);
        let expected: u64 = blocks.iter().filter(of_channel).map(|block| u64::from(block.n_samples)).sum();
        if channel.n_counts as u64 != expected {
            let (name, found) = (&channel.name, channel.n_counts);
            findings.push(format!("{device}: channel {name} has {found} counts, its blocks {expected}"));
        }
    }
    Ok(())
}

fn clocks(trial: &TrialFile, device: &str, findings: &mut Vec<String>) -> Result<(), TrialError> {
    let (map, _) = trial.clock(device)?;
    let runs = |period: f64| period.is_finite() && period > 0.0;
    if let Some(piece) = map.iter().find(|piece| !runs(piece.ns_per_tick) || piece.last_tick < piece.first_tick) {
        let (first, last) = (piece.first_tick, piece.last_tick);
        findings.push(format!("{device}: the clock map from tick {first} to {last} does not run forward"));
    }
    Ok(())
}

/// A device's ticks count up; one sentence a device.
fn ticks(device: &str, blocks: &[BlockRow], findings: &mut Vec<String>) {
    let mut last: BTreeMap<(u32, u8), u64> = BTreeMap::new();
    for (index, block) in blocks.iter().enumerate() {
        let before = last.insert((block.boot_id, block.stream), block.first_tick);
        if before.is_some_and(|before| before >= block.first_tick) {
            let stream = block.stream;
            findings.push(format!("{device}: the ticks of stream {stream} do not move on at block {index}"));
            return;
        }
    }
}

/// The host's clocks that nobody sets run forward; the wall clock may be set.
fn host_clocks(trial: &TrialFile, verified: &mut Verified) -> Result<(), TrialError> {
    let rows = trial.host_clocks()?;
    let backward = |clock: fn(&crate::trial::HostClocksRow) -> i64| {
        rows.windows(2).position(|pair| clock(&pair[1]) < clock(&pair[0])).map(|at| at + 1)
    };
    let clocks = [
        ("monotonic", backward(|row| row.monotonic_ns)),
        ("monotonic_raw", backward(|row| row.monotonic_raw_ns)),
        ("boottime", backward(|row| row.boottime_ns)),
    ];
    for (name, at) in clocks.iter().filter_map(|(name, at)| Some((name, (*at)?))) {
        verified.findings.push(format!("the host's clock {name} runs backward at reading {at}"));
    }
    Ok(())
}

fn derived_again(trial: &TrialFile, verified: &mut Verified) -> Result<(), TrialError> {
    let reproduced = reproduce(trial)?;
    verified.derived_again = reproduced.derived_again;
    verified.findings.extend(reproduced.findings);
    verified.remarks.extend(reproduced.remarks);
    Ok(())
}

fn axes(trial: &TrialFile, _verified: &mut Verified) -> Result<(), TrialError> {
    trial.prove_signals()
}

fn results(trial: &TrialFile, verified: &mut Verified) -> Result<(), TrialError> {
    let results = trial.results()?;
    if results.outcome != trial.outcome() {
        let (root, found) = (trial.outcome(), results.outcome);
        verified.findings.push(format!("the outcome is {root:?} at the root and {found:?} among the results"));
    }
    trial.events()?;
    trial.notes()?;
    trial.conditions()?;
    for name in trial.derived_names()? {
        trial.derived(&name)?;
    }
    for text in trial.texts_with_digests()? {
        if text.sealed != crate::trial::text_sha256(&text.text.text) {
            verified.findings.push(format!("the text {} is not the one sealed", text.text.name));
        }
    }
    Ok(())
}
