//! Proves that a trial file still says what was sealed.
//!
//! Checks: the digest of every raw group against what the file holds now; blocks against gaps (a jump of the indices that
//! no gap row explains, and a gap row that no jump shows, are both findings); counts against blocks; clock maps that run
//! forward; time axes that move on. A digest within the file proves nothing against somebody who rewrote both.

use std::collections::BTreeMap;
use std::path::Path;

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
    /// What is wrong, in sentences; empty for a sound file.
    pub findings: Vec<String>,
}

/// Verifies the file.
///
/// # Errors
/// Only if it cannot be opened as a trial at all; parts that cannot be read are findings.
pub fn verify(path: &Path) -> Result<Verified, TrialError> {
    let trial = TrialFile::open(path)?;
    let mut verified = Verified {
        trial_id: trial.header().trial_id.clone(),
        raw_sha256: trial.sealed_raw_digest()?,
        n_blocks: 0,
        n_samples: 0,
        n_missing: 0,
        findings: Vec::new(),
    };
    for check in [digests, devices, axes, results] {
        if let Err(error) = check(&trial, &mut verified) {
            verified.findings.push(error.to_string());
        }
    }
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
    for text in trial.texts_with_digests()? {
        if text.sealed != crate::trial::text_sha256(&text.text.text) {
            verified.findings.push(format!("the text {} is not the one sealed", text.text.name));
        }
    }
    Ok(())
}
