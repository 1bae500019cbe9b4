//! `tautrail read TRIAL`: the results of a trial, derived again from its signals.

use std::path::PathBuf;

use serde_json::json;
use tautrail::reading::{Decision, Reading, ResultRow};
use tautrail::units::shown_unit;

use super::measured::{BesideArgs, Measured, open};
use super::results_text::{instant_line, result_line};
use super::screen::{Screen, Tone};
use super::{CAUTION, Failure, Verdict};

/// Read a trial: release, launch speed, peak g, tensions, energy, each with its uncertainty
///
/// Everything is derived again from the trial's signals and the rig file it carries, with its amendments; where an amendment
/// corrected a record, the signals too, from the counts. No file is changed.
#[derive(Debug, clap::Args)]
#[command(after_help = READ_HELP)]
pub struct Args {
    /// The trial file
    trial: PathBuf,
    /// Use this rig file in place of the one the trial carries (masses, limits, plan; calibrations stay as sealed)
    #[arg(long)]
    rig: Option<PathBuf>,
    #[command(flatten)]
    beside: BesideArgs,
    /// Show what each uncertainty is made of, and how each number was obtained
    #[arg(long)]
    budget: bool,
}

const READ_HELP: &str = "\
Examples:
  tautrail read trials/trial-000012-7f3a9c.h5
  tautrail read --budget trials/trial-000012-7f3a9c.h5          where each uncertainty comes from
  tautrail read --camera film.csv --frame-rate 240 trials/trial-000012-7f3a9c.h5   240 frames a second: 4.17 ms a frame
  tautrail read --json trials/trial-000012-7f3a9c.h5 | jq '.results[] | select(.name == \"launch_speed\")'

Intervals hold the value in 95 % of trials. A result that can't be had is listed as absent with the reason.
Exit code: 0 read, 2 the trial can't be read.

Tautrail is no safety device: it advises and records; interlocks, exclusion zones, local codes and licensed practice
decide.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let measured = open(&args.trial, args.rig.as_ref())?;
    let beside = args.beside.beside(measured.edges.clone())?;
    let reading = measured.reading(&beside);
    if screen.json {
        let mut value = serde_json::to_value(&reading)?;
        if let Some(object) = value.as_object_mut() {
            object.remove("motion");
            object.insert("path".to_owned(), json!(args.trial));
            object.insert("trial_id".to_owned(), json!(measured.header.trial_id));
            object.insert("rig".to_owned(), json!(measured.rig.name));
            object.insert("amended".to_owned(), json!(measured.amended));
            object.insert("caution".to_owned(), json!(CAUTION));
        }
        screen.value(&value);
    } else {
        print(args, &measured, &reading, screen);
    }
    Ok(Verdict::Done)
}

fn print(args: &Args, measured: &Measured, reading: &Reading, screen: &Screen) {
    let title = format!("trial {} on rig {}: {}", measured.header.trial_id, measured.rig.name, reading.outcome.word());
    screen.line(screen.toned(&title, Tone::Heading));
    for sentence in &reading.outcome_evidence {
        screen.line(format!("  {sentence}"));
    }
    for finding in &reading.findings {
        screen.line(format!("  {} {finding}", screen.toned("look at:", Tone::Caution)));
    }
    for sentence in &measured.amended {
        screen.line(format!("  {sentence}"));
    }
    screen.line(screen.toned("instants", Tone::Heading));
    for instant in &reading.instants {
        screen.line(instant_line(&instant.name, instant.time_s, instant.standard_uncertainty_s));
    }
    screen.line(screen.toned("results, with 95 % interval (and what most of it comes from)", Tone::Heading));
    for row in &reading.results {
        let interval = (row.low, row.high);
        let line = result_line(&row.name, row.value, row.standard_uncertainty, interval, &row.unit);
        screen.line(line + &dominant(row));
        if args.budget {
            print_budget(row, screen);
        }
    }
    for absent in &reading.absent {
        screen.line(format!("  {:<26} absent: {}", absent.name, absent.reason));
    }
    print_verdicts(&reading.verdicts, screen);
    if let Some(motion) = &reading.motion {
        screen.line(format!("motion from {}", motion.sensors));
    }
    screen.line(CAUTION);
}

/// What the uncertainty mostly comes from.
fn dominant(row: &ResultRow) -> String {
    row.dominant().map_or_else(String::new, |(source, part)| format!("   ({:.0} %: {source})", 100.0 * part))
}

fn print_verdicts(verdicts: &[tautrail::reading::Verdict], screen: &Screen) {
    screen.line(screen.toned("verdicts, for advice and record only", Tone::Heading));
    for verdict in verdicts {
        let tone = match verdict.decision {
            Decision::Met => Tone::Good,
            Decision::Missed => Tone::Bad,
            Decision::NotDecidable => Tone::Caution,
        };
        let word = screen.toned(&format!("{:<13}", verdict.decision.word()), tone);
        screen.line(format!("  {word} {}: {}", verdict.asked, verdict.why));
    }
}

fn print_budget(row: &ResultRow, screen: &Screen) {
    screen.line(format!("      {}", row.method));
    let square: f64 = row.standard_uncertainty.powi(2);
    for term in &row.budget {
        let share = if square > 0.0 { 100.0 * term.standard_uncertainty.powi(2) / square } else { 0.0 };
        screen.line(format!(
            "      {share:>3.0} %  {:.2e} {}  {}",
            term.standard_uncertainty,
            shown_unit(&row.unit),
            term.source
        ));
    }
}
