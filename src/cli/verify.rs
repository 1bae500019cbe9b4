//! `tautrail verify TRIAL…`: proves that trial files still say what was sealed.

use std::path::{Path, PathBuf};

use serde_json::{Value, json};
use tautrail::archive::{Depth, Verified, verify};
use tautrail::trial::TrialError;

use super::screen::{Screen, Tone};
use super::{Failure, Verdict};

/// Check that trial files still say what was sealed
///
/// Recomputes the digest of all raw data, compares gaps with the blocks' indices and counts with blocks, checks that clocks,
/// ticks and time axes run forward, derives signals and results again from the counts and compares them, and follows the
/// chain of amendments. The files are only read.
#[derive(Debug, clap::Args)]
#[command(after_help = VERIFY_HELP)]
pub struct Args {
    /// Trial files
    #[arg(required = true)]
    trials: Vec<PathBuf>,
    /// Check what is stored only: derive nothing again
    #[arg(long)]
    stored_only: bool,
}

const VERIFY_HELP: &str = "\
Examples:
  tautrail verify trials/trial-000012-7f3a9c.h5
  tautrail verify trials/*.h5
  tautrail verify --stored-only trials/*.h5     quicker: signals and results are not derived again

A digest inside a file proves nothing against somebody who rewrote both: compare the printed one with the report's. The
same goes for amendments cut off the end: the digest of the last one stands for the whole chain.

Exit code: 0 all sound, 1 something is wrong or unreadable.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let depth = if args.stored_only { Depth::Stored } else { Depth::Everything };
    let all: Vec<(&PathBuf, Result<Verified, TrialError>)> =
        args.trials.iter().map(|path| (path, verify(path, depth))).collect();
    if screen.json {
        let trials: Vec<Value> = all.iter().map(|(path, verified)| as_json(path, verified)).collect();
        screen.value(&json!({ "trials": trials }));
    } else {
        all.iter().for_each(|(path, verified)| print(path, verified, screen));
    }
    let sound = all.iter().all(|(_, verified)| verified.as_ref().is_ok_and(|v| v.findings.is_empty()));
    Ok(if sound { Verdict::Done } else { Verdict::CheckFailed })
}

fn print(path: &Path, verified: &Result<Verified, TrialError>, screen: &Screen) {
    match verified {
        Ok(verified) => {
            let Verified { raw_sha256, n_blocks, n_samples, n_missing, findings, .. } = verified;
            let (word, tone) = if findings.is_empty() { ("sound", Tone::Good) } else { ("NOT SOUND", Tone::Bad) };
            let word = screen.toned(word, tone);
            screen.line(format!(
                "{}: {word}, {n_blocks} blocks, {n_samples} samples, {n_missing} missing, raw sha256 {raw_sha256}",
                path.display()
            ));
            if verified.n_amendments > 0 {
                let (n, last) = (verified.n_amendments, &verified.last_amendment_sha256);
                screen.line(format!("  {n} amendments, the last with sha256 {last}"));
            }
            verified.remarks.iter().for_each(|remark| screen.line(format!("  {remark}")));
            findings.iter().for_each(|finding| screen.line(format!("  {finding}")));
        }
        Err(error) => screen.line(format!("{}: {}", screen.toned("UNREADABLE", Tone::Bad), error)),
    }
}

fn as_json(path: &Path, verified: &Result<Verified, TrialError>) -> Value {
    match verified {
        Ok(v) => json!({
            "path": path, "sound": v.findings.is_empty(), "trial_id": v.trial_id, "raw_sha256": v.raw_sha256,
            "n_blocks": v.n_blocks, "n_samples": v.n_samples, "n_missing": v.n_missing, "findings": v.findings,
            "n_amendments": v.n_amendments, "last_amendment_sha256": v.last_amendment_sha256,
            "derived_again": v.derived_again, "remarks": v.remarks,
        }),
        Err(error) => json!({ "path": path, "sound": false, "error": error.to_string() }),
    }
}
