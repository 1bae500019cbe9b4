//! `tautrail hold TRIAL`: while it is set, nothing about a trial is deleted.

use std::path::{Path, PathBuf};
use std::sync::Arc;

use jiff::Timestamp;
use serde_json::json;
use tautrail::archive::{Hold, holds, keep_for_hold, set_hold};
use tautrail::journal::{Disk, RealDisk};

use super::screen::{Screen, Tone};
use super::{Failure, Verdict};

/// Hold a trial after an incident: nothing about it is deleted until the hold is lifted
///
/// The journal that the trial was sealed from is kept with it, as far as it is still there. A hold is a file beside the trial;
/// who set and lifted it, when and why stays. It binds this program only: nobody is kept from deleting files by hand.
#[derive(Debug, clap::Args)]
#[command(after_help = HOLD_HELP)]
pub struct Args {
    /// The trial file; it need not be readable
    trial: PathBuf,
    /// Lift the hold
    #[arg(long, requires = "person")]
    lift: bool,
    /// Who sets or lifts it; without it the holds so far are listed
    #[arg(long, value_name = "NAME", requires = "reason")]
    person: Option<String>,
    /// Why
    #[arg(long, value_name = "TEXT", requires = "person")]
    reason: Option<String>,
}

const HOLD_HELP: &str = "\
Examples:
  tautrail hold trials/trial-000012-7f3a9c.h5 --person \"A. Recorder\" --reason \"cord parted, under inquiry\"
  tautrail hold trials/trial-000012-7f3a9c.h5                   who held it and why
  tautrail hold --lift TRIAL --person \"A. Recorder\" --reason \"inquiry closed\"
  tautrail bundle TRIAL --out incident.tar                      everything about it in one archive

Exit code: 0 done, 1 the trial is held but its journal is not all there any more, 2 could not.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let (Some(person), Some(reason)) = (&args.person, &args.reason) else {
        return list(&args.trial, screen);
    };
    let file = set_hold(&args.trial, !args.lift, person, reason, Timestamp::now())?;
    if args.lift {
        if screen.json {
            screen.value(&json!({ "trial": args.trial, "held": false, "file": file }));
        } else {
            screen.line(format!("the hold on {} is lifted", args.trial.display()));
        }
        return Ok(Verdict::Done);
    }
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let kept = keep_for_hold(&args.trial, &disk);
    let (sentence, all) = match &kept {
        Ok(dir) => (format!("its journal is kept in {}", dir.display()), true),
        Err(error) => (format!("its journal is not kept: {error}"), false),
    };
    if screen.json {
        let journal = kept.ok();
        screen.value(&json!({ "trial": args.trial, "held": true, "file": file, "journal": journal, "note": sentence }));
    } else {
        screen.line(format!("{} is {}; {sentence}", args.trial.display(), screen.toned("held", Tone::Caution)));
    }
    Ok(if all { Verdict::Done } else { Verdict::CheckFailed })
}

fn list(trial: &Path, screen: &Screen) -> Result<Verdict, Failure> {
    if !trial.is_file() {
        return Err(format!("there is no trial file {}", trial.display()).into());
    }
    let all = holds(trial)?;
    let held = tautrail::archive::is_held(trial);
    if screen.json {
        let files: Vec<_> =
            all.iter().map(|hold| hold.as_ref().map_or_else(|e| json!({ "error": e }), as_json)).collect();
        screen.value(&json!({ "trial": trial, "held": held, "holds": files }));
        return Ok(Verdict::Done);
    }
    screen.line(format!("{} is {}", trial.display(), if held { "held" } else { "not held" }));
    for hold in &all {
        match hold {
            Ok(Hold { set, written, person, reason, .. }) => {
                let deed = if *set { "set" } else { "lifted" };
                screen.line(format!("  {deed} {written} by {person}: {reason}"));
            }
            Err(error) => screen.line(format!("  counts as set, can't be read: {error}")),
        }
    }
    Ok(Verdict::Done)
}

fn as_json(hold: &Hold) -> serde_json::Value {
    json!({ "set": hold.set, "written": hold.written, "person": hold.person, "reason": hold.reason })
}
