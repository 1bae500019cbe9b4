//! `tautrail trials DIR`: lists the trials of an archive: which, in which order, with which results.

use std::collections::BTreeMap;
use std::io::{self, Write};
use std::path::PathBuf;
use std::time::SystemTime;

use serde_json::{Value, json};
use tautrail::archive::{Catalogue, Catalogued, Index, Range, Selection, SortKey, TrialRow, catalogue};

use super::screen::{Screen, Tone};
use super::{Failure, Verdict};

/// List the trials of an archive directory: select, sort, as text, JSON or CSV
///
/// What was read of a file is remembered in DIR/.trials-index, which may be deleted at any time. Results are as sealed;
/// where an amendment corrected what they rest on, they are derived again.
#[derive(Debug, clap::Args)]
#[command(after_help = TRIALS_HELP)]
pub struct Args {
    /// The archive directory
    dir: PathBuf,
    /// Started on this day (UTC) or later: 2026-12-01, or a time: 2026-12-01T14:00:00Z
    #[arg(long, value_name = "DATE")]
    from: Option<String>,
    /// Started on this day (UTC) or earlier, or before a time
    #[arg(long, value_name = "DATE")]
    to: Option<String>,
    /// Of this rig
    #[arg(long, value_name = "NAME")]
    rig: Option<String>,
    /// With this outcome: launched, let-down, "hook slip", …
    #[arg(long, value_name = "WORD")]
    outcome: Option<String>,
    /// With this rig file: the beginning of its SHA-256
    #[arg(long, value_name = "HASH")]
    configuration: Option<String>,
    /// Of this series
    #[arg(long, value_name = "NAME")]
    series: Option<String>,
    /// With the cord of this serial on the rig
    #[arg(long, value_name = "SERIAL")]
    cord: Option<String>,
    /// With a result in this range, in the unit it is stored in (repeat for several): launch_speed=15..18
    #[arg(long = "result", value_name = "NAME=LOW..HIGH")]
    results: Vec<Range>,
    /// Held trials only
    #[arg(long)]
    held: bool,
    /// Sort by name, started, rig, outcome or the name of a result
    #[arg(long, value_name = "KEY", default_value = "name")]
    sort: SortKey,
    /// Greatest first
    #[arg(long)]
    reverse: bool,
    /// Print CSV (RFC 4180), all results with units in the header
    #[arg(long, conflicts_with = "json")]
    csv: bool,
    /// Read every file and write the index anew
    #[arg(long, conflicts_with = "no_index")]
    rebuild_index: bool,
    /// Read every file and leave the index alone
    #[arg(long)]
    no_index: bool,
}

const TRIALS_HELP: &str = "\
Examples:
  tautrail trials trials/
  tautrail trials trials/ --rig north-pier --from 2026-12-01 --outcome launched --sort launch_speed --reverse
  tautrail trials trials/ --cord NP-07 --result launch_speed=16.5..
  tautrail trials --csv trials/ > trials.csv
  tautrail trials --json trials/ | jq '.trials[] | select(.outcome == \"launched\") | .path'

Exit code: 0 all files open, 1 one does not, 2 the directory can't be read.

Tautrail is no safety device: it advises and records; interlocks, exclusion zones, local codes and licensed practice
decide.";

/// Progress is told from this many files on.
const MANY: usize = 200;

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let selection = selection(args)?;
    let index = match (args.rebuild_index, args.no_index) {
        (true, _) => Index::Rebuilt,
        (_, true) => Index::Unused,
        _ => Index::Used,
    };
    let progress = |n: usize, of: usize| {
        if of >= MANY && (n.is_multiple_of(MANY) || n == of) {
            screen.progress(&format!("reading trial files: {n} of {of}"), n == of);
        }
    };
    let Catalogue { mut trials, .. } = catalogue(&args.dir, index, SystemTime::now(), progress)
        .map_err(|error| format!("cannot list {}: {error}", args.dir.display()))?;
    let all_open = trials.iter().all(|trial| trial.what.is_ok());
    let n_all = trials.len();
    trials.retain(|trial| selection.keeps(trial));
    args.sort.sort(&mut trials, args.reverse);
    if screen.json {
        screen.value(&json!({ "trials": trials.iter().map(as_json).collect::<Vec<Value>>() }));
    } else if args.csv {
        print_csv(&trials)?;
    } else {
        print(&trials, n_all, &shown_result(args), screen);
    }
    Ok(if all_open { Verdict::Done } else { Verdict::CheckFailed })
}

fn selection(args: &Args) -> Result<Selection, Failure> {
    Ok(Selection {
        from: args.from.as_deref().map(Selection::instant).transpose()?,
        before: args.to.as_deref().map(Selection::after).transpose()?,
        rig: args.rig.clone(),
        outcome: args.outcome.clone(),
        configuration: args.configuration.as_ref().map(|hash| hash.to_lowercase()),
        series: args.series.clone(),
        cord: args.cord.clone(),
        results: args.results.clone(),
        held_only: args.held,
    })
}

/// The result whose column is shown: the one asked for, else the launch speed.
fn shown_result(args: &Args) -> String {
    match (&args.sort, args.results.first()) {
        (SortKey::Result(name), _) => name.clone(),
        (_, Some(range)) => range.result.clone(),
        _ => "launch_speed".to_owned(),
    }
}

fn print(trials: &[Catalogued], n_all: usize, result: &str, screen: &Screen) {
    if n_all == 0 {
        screen.line("no trial files here (`tautrail recover` seals what a journal still holds)");
        return;
    }
    if trials.is_empty() {
        screen.line(format!("none of the {n_all} trials here is as asked"));
        return;
    }
    let unit = trials.iter().find_map(|trial| {
        let row = trial.what.as_ref().ok()?;
        row.results.iter().find(|value| value.name == result).map(|value| value.unit.clone())
    });
    let of_result = format!("{result} [{}]", unit.as_deref().unwrap_or("no trial has it"));
    let width = of_result.chars().count().max(8);
    let heading =
        format!("{:<15} {:<20} {:<12} {:<22} {of_result:>width$}  file", "trial", "started (UTC)", "rig", "outcome");
    screen.line(screen.toned(&heading, Tone::Heading));
    for trial in trials {
        let name = trial.path.file_name().unwrap_or_default().to_string_lossy();
        match &trial.what {
            Ok(row) => {
                let started: String = row.started.chars().take(19).collect();
                let value = row.result(result).map_or_else(|| "-".to_owned(), |value| format!("{value:.2}"));
                let TrialRow { trial_id: id, rig, outcome, .. } = row;
                let more = remarks(trial, row);
                screen.line(format!("{id:<15} {started:<20} {rig:<12} {outcome:<22} {value:>width$}  {name}{more}"));
            }
            Err(error) => screen.line(format!("{} {error}", screen.toned("UNREADABLE", Tone::Bad))),
        }
    }
    if trials.len() != n_all {
        screen.line(format!("{} of {n_all} trials", trials.len()));
    }
}

/// Held, amended, or something wrong with the amendments, in words.
fn remarks(trial: &Catalogued, row: &TrialRow) -> String {
    let mut words = Vec::new();
    if trial.held {
        words.push("held".to_owned());
    }
    match row.n_amendments {
        0 => {}
        1 => words.push("1 amendment".to_owned()),
        n => words.push(format!("{n} amendments")),
    }
    if !row.findings.is_empty() {
        words.push("AMENDMENTS NOT SOUND".to_owned());
    }
    if words.is_empty() { String::new() } else { format!("  ({})", words.join(", ")) }
}

fn print_csv(trials: &[Catalogued]) -> Result<(), Failure> {
    let mut units: BTreeMap<&str, &str> = BTreeMap::new();
    let rows = || trials.iter().filter_map(|trial| Some((trial, trial.what.as_ref().ok()?)));
    for result in rows().flat_map(|(_, row)| &row.results) {
        units.insert(&result.name, &result.unit);
    }
    let mut to = csv::WriterBuilder::new().terminator(csv::Terminator::CRLF).from_writer(Vec::new());
    let fixed = ["file", "trial", "started", "started_quality", "rig", "outcome", "series", "configuration", "cords"];
    let mut head: Vec<String> = fixed.iter().map(|name| (*name).to_owned()).collect();
    head.extend(["raw_sha256", "amendments", "held"].map(str::to_owned));
    head.extend(units.iter().map(|(name, unit)| format!("{name} [{unit}]")));
    to.write_record(&head)?;
    for (trial, row) in rows() {
        let file = trial.path.file_name().unwrap_or_default().to_string_lossy().into_owned();
        let mut record = vec![file, row.trial_id.clone(), row.started.clone(), row.started_quality.clone()];
        record.extend([row.rig.clone(), row.outcome.clone(), row.series.clone(), row.configuration_hash.clone()]);
        record.extend([row.cords.join(" "), row.raw_sha256.clone(), row.n_amendments.to_string()]);
        record.push(trial.held.to_string());
        record.extend(units.keys().map(|name| row.result(name).map_or_else(String::new, |value| value.to_string())));
        to.write_record(&record)?;
    }
    // A reader that closed its end early (`head`) is no failure.
    let _ = io::stdout().lock().write_all(&to.into_inner()?);
    Ok(())
}

fn as_json(trial: &Catalogued) -> Value {
    match &trial.what {
        Ok(row) => json!({
            "path": trial.path, "trial_id": row.trial_id, "rig": row.rig, "started": row.started,
            "started_quality": row.started_quality, "outcome": row.outcome, "series": row.series,
            "configuration_hash": row.configuration_hash, "raw_sha256": row.raw_sha256, "cords": row.cords,
            "launch_speed_mps": row.result("launch_speed"), "results": row.results, "held": trial.held,
            "n_amendments": row.n_amendments, "changes": row.changes, "findings": row.findings,
        }),
        Err(error) => json!({ "path": trial.path, "error": error, "held": trial.held }),
    }
}
