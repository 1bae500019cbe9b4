//! `tautrail recover DIR`: seals what a crash left, and lets go of journals kept for a person.

use std::path::{Path, PathBuf};
use std::sync::Arc;

use serde_json::{Value, json};
use tautrail::archive::{Fate, Kept, Recovered, kept, recover, release};
use tautrail::journal::{Disk, ReadError, RealDisk};

use super::screen::{Screen, Tone};
use super::seal_child::{sealed_json, sealed_sentence};
use super::{Failure, Verdict};

/// Seal every trial that a crash left in the journals of an archive directory
///
/// Beside a running daemon the trial under way is left alone. A trial whose end is missing gets the outcome "truncated".
/// Journals are only read; one that cannot be read is named and holds up no other. Those of trials that were neither a launch
/// nor a let-down, and those of a daemon run with --keep-journal, stay until you let them go.
#[derive(Debug, clap::Args)]
#[command(after_help = RECOVER_HELP)]
pub struct Args {
    /// The archive directory: trial files in it, journals in DIR/journal
    dir: PathBuf,
    /// Let go of the journal kept of this trial, for good; its sealed file stays
    #[arg(long, value_name = "TRIAL")]
    release: Option<String>,
}

const RECOVER_HELP: &str = "\
Examples:
  tautrail recover trials/          after a crash, a power cut or a full disk
  tautrail recover --json trials/   for programs
  tautrail recover trials/ --release 000012-7f3a9c    looked at and understood: its journal may go

Exit code: 0 all sealed, 1 a trial could not be sealed (its journal is kept) or a journal not be read, 2 could not run.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    if let Some(trial_id) = &args.release {
        return let_go(&args.dir, trial_id, screen);
    }
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let recovery = recover(&args.dir, &disk, &mut |range| {
        if !screen.json {
            screen.line(format!("sealing trial {} …", range.trial_id));
        }
    })?;
    let kept = kept(&args.dir)?;
    if screen.json {
        let kept: Vec<Value> = kept.iter().map(kept_json).collect();
        let trials: Vec<Value> = recovery.trials.iter().map(as_json).collect();
        let unreadable: Vec<Value> = recovery.unreadable.iter().map(unreadable_json).collect();
        screen.value(&json!({ "kept_journals": kept, "trials": trials, "unreadable": unreadable }));
    } else {
        recovery.trials.iter().for_each(|one| screen.line(sentence(one, screen)));
        recovery.unreadable.iter().for_each(|error| screen.line(unreadable_sentence(error, screen)));
        if recovery.trials.is_empty() && recovery.unreadable.is_empty() {
            screen.line(format!("no journal in {} holds a trial", args.dir.display()));
        }
        kept.iter().for_each(|kept| screen.line(kept_sentence(kept)));
    }
    let failed = recovery.trials.iter().any(|one| matches!(one.fate, Fate::Failed(_)));
    let failed = failed || !recovery.unreadable.is_empty();
    Ok(if failed { Verdict::CheckFailed } else { Verdict::Done })
}

fn let_go(dir: &Path, trial_id: &str, screen: &Screen) -> Result<Verdict, Failure> {
    let n_bytes = release(dir, trial_id)?;
    if screen.json {
        screen.value(&json!({ "released": trial_id, "bytes": n_bytes }));
    } else {
        screen.line(format!("let go of the journal of trial {trial_id}, {:.1} MiB", mib(n_bytes)));
    }
    Ok(Verdict::Done)
}

fn mib(n_bytes: u64) -> f64 {
    n_bytes as f64 / f64::from(1 << 20)
}

fn kept_sentence(kept: &Kept) -> String {
    let Kept { trial_id, n_bytes, .. } = kept;
    format!("the journal of trial {trial_id} is kept, {:.1} MiB, until --release {trial_id}", mib(*n_bytes))
}

fn kept_json(kept: &Kept) -> Value {
    json!({ "trial_id": kept.trial_id, "bytes": kept.n_bytes, "path": kept.dir })
}

fn sentence(one: &Recovered, screen: &Screen) -> String {
    let id = &one.trial_id;
    match &one.fate {
        Fate::Sealed(sealed) => format!("{} {}", screen.toned("sealed", Tone::Good), sealed_sentence(sealed)),
        Fate::AlreadySealed(path) => format!("trial {id} is sealed already: {}", path.display()),
        Fate::Live => format!("trial {id} is {}: a daemon is recording it", screen.toned("live", Tone::Caution)),
        Fate::Failed(error) => {
            format!("trial {id} {}: {error}; its journal is kept", screen.toned("NOT SEALED", Tone::Bad))
        }
    }
}

fn unreadable_sentence(error: &ReadError, screen: &Screen) -> String {
    let word = screen.toned("NOT READ", Tone::Bad);
    format!(
        "{word}: {error}; it is left as it is. Where the disk is at fault, copy the file to a sound one and run this again"
    )
}

fn unreadable_json(error: &ReadError) -> Value {
    json!({ "path": error.path(), "error": error.to_string() })
}

fn as_json(one: &Recovered) -> Value {
    let (fate, more) = match &one.fate {
        Fate::Sealed(sealed) => ("sealed", sealed_json(sealed)),
        Fate::AlreadySealed(path) => ("already_sealed", json!({ "path": path })),
        Fate::Live => ("live", Value::Null),
        Fate::Failed(error) => ("failed", json!({ "error": error.to_string() })),
    };
    json!({ "trial_id": one.trial_id, "journal_id": one.journal_id, "fate": fate, "detail": more })
}
