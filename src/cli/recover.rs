//! `tautrail recover DIR`: seals what a crash left.

use std::path::PathBuf;
use std::sync::Arc;

use serde_json::{Value, json};
use tautrail::archive::{Fate, Recovered, recover};
use tautrail::journal::{Disk, RealDisk};

use super::screen::{Screen, Tone};
use super::seal_child::{sealed_json, sealed_sentence};
use super::{Failure, Verdict};

/// Seal every trial that a crash left in the journals of an archive directory
///
/// Beside a running daemon the trial under way is left alone. A trial whose end is missing gets the outcome "truncated".
/// Journals are only read.
#[derive(Debug, clap::Args)]
#[command(after_help = RECOVER_HELP)]
pub struct Args {
    /// The archive directory: trial files in it, journals in DIR/journal
    dir: PathBuf,
}

const RECOVER_HELP: &str = "\
Examples:
  tautrail recover trials/          after a crash, a power cut or a full disk
  tautrail recover --json trials/   for programs

Exit code: 0 all sealed, 1 a trial could not be sealed (its journal is kept), 2 could not run.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let recovered = recover(&args.dir, &disk, &mut |range| {
        if !screen.json {
            screen.line(format!("sealing trial {} …", range.trial_id));
        }
    })?;
    if screen.json {
        screen.value(&json!({ "trials": recovered.iter().map(as_json).collect::<Vec<Value>>() }));
    } else {
        recovered.iter().for_each(|one| screen.line(sentence(one, screen)));
        if recovered.is_empty() {
            screen.line(format!("no journal in {} holds a trial", args.dir.display()));
        }
    }
    let failed = recovered.iter().any(|one| matches!(one.fate, Fate::Failed(_)));
    Ok(if failed { Verdict::CheckFailed } else { Verdict::Done })
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

fn as_json(one: &Recovered) -> Value {
    let (fate, more) = match &one.fate {
        Fate::Sealed(sealed) => ("sealed", sealed_json(sealed)),
        Fate::AlreadySealed(path) => ("already_sealed", json!({ "path": path })),
        Fate::Live => ("live", Value::Null),
        Fate::Failed(error) => ("failed", json!({ "error": error.to_string() })),
    };
    json!({ "trial_id": one.trial_id, "journal_id": one.journal_id, "fate": fate, "detail": more })
}
