//! `tautrail seal-child DIR JOURNAL TRIAL` (hidden): what the daemon starts to seal a trial, niced, beside itself.

use std::path::PathBuf;
use std::sync::Arc;

use serde_json::json;
use tautrail::archive::{Sealed, seal_one};
use tautrail::journal::{Disk, RealDisk};

use super::screen::Screen;
use super::{Failure, Verdict};

/// Seal one trial of one journal; the daemon starts this
#[derive(Debug, clap::Args)]
pub struct Args {
    /// The archive directory
    dir: PathBuf,
    /// Id of the journal in DIR/journal
    journal: String,
    /// Id of the trial
    trial: String,
    /// Added to the process's niceness: sealing may take long and must never be in the way of acquisition
    #[arg(long, value_name = "N", default_value_t = 15, value_parser = clap::value_parser!(i32).range(0..=19))]
    niceness: i32,
    /// First record of the trial; nothing before it is looked through
    #[arg(long, value_name = "SEQ", default_value_t = 0)]
    from_seq: u64,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    // Refused, sealing goes on at ordinary priority.
    let _ = rustix::process::nice(args.niceness);
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let sealed = seal_one(&args.dir, &args.journal, &args.trial, args.from_seq, &disk)?;
    if screen.json {
        screen.value(&sealed_json(&sealed));
    } else {
        screen.line(sealed_sentence(&sealed));
    }
    Ok(Verdict::Done)
}

pub(super) fn sealed_sentence(sealed: &Sealed) -> String {
    let Sealed { path, trial_id, outcome, n_samples, n_missing, raw_sha256, journal_kept, .. } = sealed;
    let path = path.display();
    let kept = if *journal_kept {
        format!("; its journal is kept until `tautrail recover --release {trial_id}` lets it go")
    } else {
        String::new()
    };
    format!("{path}: {outcome}, {n_samples} samples, {n_missing} missing, raw sha256 {raw_sha256}{kept}")
}

pub(super) fn sealed_json(sealed: &Sealed) -> serde_json::Value {
    json!({
        "path": sealed.path, "trial_id": sealed.trial_id, "outcome": sealed.outcome, "is_new": sealed.is_new,
        "n_samples": sealed.n_samples, "n_missing": sealed.n_missing, "raw_sha256": sealed.raw_sha256,
        "journal_kept": sealed.journal_kept,
    })
}
