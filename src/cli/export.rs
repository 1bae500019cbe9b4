//! `tautrail export`: trials as CSV or as a Parquet dataset.

use std::path::PathBuf;

use clap::ValueEnum;
use serde_json::json;
use tautrail::archive::{ExportForm, export, trial_files};

use super::screen::{Screen, Tone, with_causes};
use super::{Failure, Verdict};

/// Export trials for spreadsheets (CSV) or for any SQL engine (Parquet)
///
/// Results, instants, events and conditions with amendments merged; with --signals every sample of every signal. An export
/// of a trial replaces an earlier one in the same place; the trial files are only read.
#[derive(Debug, clap::Args)]
#[command(after_help = EXPORT_HELP)]
pub struct Args {
    /// Trial files, or archive directories for all their trials
    #[arg(required = true)]
    trials: Vec<PathBuf>,
    /// The directory to write into
    #[arg(long, value_name = "DIR")]
    out: PathBuf,
    /// csv: a folder a trial; parquet: one dataset partitioned by rig and date
    #[arg(long = "to", value_enum, default_value_t = Form::Parquet)]
    form: Form,
    /// Every sample of every signal too
    #[arg(long)]
    signals: bool,
}

#[derive(Debug, Clone, Copy, ValueEnum)]
enum Form {
    Csv,
    Parquet,
}

const EXPORT_HELP: &str = "\
Examples:
  tautrail export trials/ --out fleet
  tautrail export --to csv --signals trials/trial-000012-7f3a9c.h5 --out tables

Then, with any engine that reads Parquet:
  SELECT rig, date, avg(value) FROM read_parquet('fleet/results/*/*/*.parquet', hive_partitioning = true)
  WHERE name = 'launch_speed' GROUP BY rig, date;

Tables: trials, results, instants, events, conditions, and signals where asked for. CSV is RFC 4180 with units in the header.

Exit code: 0 all exported, 1 a trial was not, 2 could not run.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let mut trials = Vec::new();
    for path in &args.trials {
        if path.is_dir() {
            trials.extend(trial_files(path).map_err(|error| format!("cannot list {}: {error}", path.display()))?);
        } else {
            trials.push(path.clone());
        }
    }
    let form = match args.form {
        Form::Csv => ExportForm::Csv,
        Form::Parquet => ExportForm::Parquet,
    };
    let (mut files, mut failed) = (Vec::new(), Vec::new());
    for (n, trial) in trials.iter().enumerate() {
        screen.progress(&format!("exporting trial {} of {}", n + 1, trials.len()), n + 1 == trials.len());
        match export(trial, &args.out, form, args.signals) {
            Ok(written) => files.extend(written),
            Err(error) => failed.push((trial, with_causes(&error))),
        }
    }
    if screen.json {
        let failed: Vec<_> = failed.iter().map(|(trial, error)| json!({ "path": trial, "error": error })).collect();
        screen.value(&json!({ "files": files, "failed": failed }));
    } else {
        for (trial, error) in &failed {
            screen.line(format!("{} {}: {error}", screen.toned("NOT EXPORTED", Tone::Bad), trial.display()));
        }
        let (n, n_all) = (trials.len() - failed.len(), trials.len());
        screen.line(format!("{n} of {n_all} trials exported, {} files in {}", files.len(), args.out.display()));
    }
    Ok(if failed.is_empty() { Verdict::Done } else { Verdict::CheckFailed })
}
