//! `tautrail report TRIAL`: a page with plots about one trial.

use std::fs;
use std::path::{Path, PathBuf};

use serde_json::json;
use tautrail::archive::Amended;
use tautrail::report::{page_of, trial_page};
use thiserror::Error;

use super::screen::Screen;
use super::{CAUTION, Failure, Verdict};

/// Write a page about a trial: tension, motion, replay, results, energy, what was received
#[derive(Debug, clap::Args)]
#[command(after_help = REPORT_HELP)]
pub struct Args {
    /// The trial file
    trial: PathBuf,
    /// Where to write the page [default: beside the trial, ending in .html]
    #[arg(long)]
    out: Option<PathBuf>,
}

const REPORT_HELP: &str = "\
Examples:
  tautrail report trials/trial-000012-7f3a9c.h5
  tautrail report --out page.html trials/trial-000012-7f3a9c.h5

The page is one HTML file that needs nothing beside itself and prints. An older page of that name is replaced; the trial
file is only read. Tautrail is no safety device: it advises and records; interlocks, exclusion zones, local codes and
licensed practice decide.";

#[derive(Debug, Error)]
enum ReportError {
    #[error("{path}: the page can't be written: {source}")]
    Unwritable { path: String, source: std::io::Error },
    #[error("{path} is the trial itself, choose another name with --out")]
    OverTrial { path: String },
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let path = write_page(&args.trial, args.out.as_deref())?;
    if screen.json {
        screen.value(&json!({ "trial": args.trial, "page": path, "caution": CAUTION }));
    } else {
        screen.line(format!("page written to {}", path.display()));
    }
    Ok(Verdict::Done)
}

/// Writes the page of a trial and returns where it is.
pub fn write_page(trial: &Path, out: Option<&Path>) -> Result<PathBuf, Failure> {
    let path = out.map_or_else(|| trial.with_extension("html"), Path::to_owned);
    let shown = path.display().to_string();
    if fs::canonicalize(&path).ok().is_some_and(|existing| fs::canonicalize(trial).is_ok_and(|trial| trial == existing))
    {
        return Err(ReportError::OverTrial { path: shown }.into());
    }
    let html = trial_page(&page_of(&Amended::open(trial)?)?)?;
    fs::write(&path, html).map_err(|source| ReportError::Unwritable { path: shown, source })?;
    Ok(path)
}
