//! `tautrail read TRIAL`: the results of a trial, derived again from its signals.

use std::path::PathBuf;

use serde_json::json;
use tautrail::reading::{Reading, ResultRow, read};

use super::measured::{Measured, open};
use super::screen::{Screen, Tone};
use super::{CAUTION, Failure, Verdict};

/// Read a trial: release, launch speed, peak g, tensions, energy, each with its uncertainty
///
/// Everything is derived again from the trial's signals and the rig file it carries; the trial file is not changed.
#[derive(Debug, clap::Args)]
#[command(after_help = READ_HELP)]
pub struct Args {
    /// The trial file
    trial: PathBuf,
    /// Use this rig file in place of the one the trial carries (masses, limits, plan; calibrations stay as sealed)
    #[arg(long)]
    rig: Option<PathBuf>,
    /// Show what each uncertainty is made of, and how each number was obtained
    #[arg(long)]
    budget: bool,
}

const READ_HELP: &str = "\
Examples:
  tautrail read trials/trial-000012-7f3a9c.h5
  tautrail read --budget trials/trial-000012-7f3a9c.h5          where each uncertainty comes from
  tautrail read --json trials/trial-000012-7f3a9c.h5 | jq '.results[] | select(.name == \"launch_speed\")'

Intervals hold the value in 95 % of trials. A result that can't be had is listed as absent with the reason.
Exit code: 0 read, 2 the trial can't be read.

Tautrail is no safety device: it advises and records; interlocks, exclusion zones, local codes and licensed practice
decide.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let measured = open(&args.trial, args.rig.as_ref())?;
    let reading = read(&measured.signals, &measured.rig);
    if screen.json {
        let mut value = serde_json::to_value(&reading)?;
        if let Some(object) = value.as_object_mut() {
            object.remove("motion");
            object.insert("path".to_owned(), json!(args.trial));
            object.insert("trial_id".to_owned(), json!(measured.header.trial_id));
            object.insert("rig".to_owned(), json!(measured.rig.name));
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
    screen.line(screen.toned("instants", Tone::Heading));
    for instant in &reading.instants {
        let u_ms = 1e3 * instant.standard_uncertainty_s;
        screen.line(format!("  {:<24} {:>11.5} s    u = {u_ms:.3} ms", instant.name, instant.time_s));
    }
    screen.line(screen.toned("results, with 95 % interval", Tone::Heading));
    for row in &reading.results {
        screen.line(result_line(row));
        if args.budget {
            print_budget(row, screen);
        }
    }
    for absent in &reading.absent {
        screen.line(format!("  {:<24} absent: {}", absent.name, absent.reason));
    }
    if let Some(motion) = &reading.motion {
        screen.line(format!("motion from {}", motion.sensors));
    }
    screen.line(CAUTION);
}

/// Value and half-width with as many digits as the uncertainty deserves: two of its own.
fn result_line(row: &ResultRow) -> String {
    let decimals = decimals(row.standard_uncertainty);
    let half_width = 0.5 * (row.high - row.low);
    let unit = if row.unit == "1" { "" } else { row.unit.as_str() };
    format!("  {:<24} {:>11.decimals$} ± {half_width:.decimals$} {unit}", row.name, row.value)
}

fn decimals(standard_uncertainty: f64) -> usize {
    if standard_uncertainty > 0.0 { (1.0 - standard_uncertainty.log10().floor()).clamp(0.0, 9.0) as usize } else { 4 }
}

fn print_budget(row: &ResultRow, screen: &Screen) {
    screen.line(format!("      {}", row.method));
    let square: f64 = row.standard_uncertainty.powi(2);
    for term in &row.budget {
        let share = if square > 0.0 { 100.0 * term.standard_uncertainty.powi(2) / square } else { 0.0 };
        screen.line(format!("      {share:>3.0} %  {:.2e} {}  {}", term.standard_uncertainty, row.unit, term.source));
    }
}

#[cfg(test)]
mod tests {
    use super::decimals;

    #[test]
    fn a_value_is_shown_to_two_digits_of_its_uncertainty() {
        for (u, wanted) in [(0.0123, 3), (0.99, 2), (1.0, 1), (12.0, 0), (0.000_04, 6), (0.0, 4)] {
            assert_eq!(decimals(u), wanted, "{u}");
        }
    }
}
