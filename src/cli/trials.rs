//! `tautrail trials DIR`: lists the trial files of a directory.

use std::path::PathBuf;

use serde_json::{Value, json};
use tautrail::archive::{Listing, Summary, list};

use super::screen::{Screen, Tone};
use super::{Failure, Verdict};

/// List the trials of an archive directory
#[derive(Debug, clap::Args)]
#[command(after_help = TRIALS_HELP)]
pub struct Args {
    /// The archive directory
    dir: PathBuf,
}

const TRIALS_HELP: &str = "\
Examples:
  tautrail trials trials/
  tautrail trials --json trials/ | jq '.trials[] | select(.outcome == \"launched\") | .path'

Exit code: 0 all files open, 1 one does not, 2 the directory can't be read.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let listings = list(&args.dir).map_err(|error| format!("cannot list {}: {error}", args.dir.display()))?;
    if screen.json {
        screen.value(&json!({ "trials": listings.iter().map(as_json).collect::<Vec<Value>>() }));
    } else {
        print(&listings, screen);
    }
    let all_open = listings.iter().all(|listing| listing.what.is_ok());
    Ok(if all_open { Verdict::Done } else { Verdict::CheckFailed })
}

fn print(listings: &[Listing], screen: &Screen) {
    if listings.is_empty() {
        screen.line("no trial files here (`tautrail recover` seals what a journal still holds)");
        return;
    }
    let heading = format!("{:<15} {:<20} {:<12} {:<22} {:>8}  file", "trial", "started (UTC)", "rig", "outcome", "m/s");
    screen.line(screen.toned(&heading, Tone::Heading));
    for Listing { path, what } in listings {
        let name = path.file_name().unwrap_or_default().to_string_lossy();
        match what {
            Ok(Summary { header, outcome, launch_speed_mps }) => {
                let started: String = header.started.chars().take(19).collect();
                let speed = launch_speed_mps.map_or_else(|| "-".to_owned(), |speed| format!("{speed:.2}"));
                let (id, rig) = (&header.trial_id, &header.rig);
                screen.line(format!("{id:<15} {started:<20} {rig:<12} {outcome:<22} {speed:>8}  {name}"));
            }
            Err(error) => screen.line(format!("{} {error}", screen.toned("UNREADABLE", Tone::Bad))),
        }
    }
}

fn as_json(listing: &Listing) -> Value {
    match &listing.what {
        Ok(Summary { header, outcome, launch_speed_mps }) => json!({
            "path": listing.path, "trial_id": header.trial_id, "rig": header.rig, "started": header.started,
            "started_quality": header.started_quality, "outcome": outcome, "series": header.series,
            "configuration_hash": header.configuration_hash, "launch_speed_mps": launch_speed_mps,
        }),
        Err(error) => json!({ "path": listing.path, "error": error.to_string() }),
    }
}
