//! The shunt check: the same resistor must still give the same reading.

use std::path::PathBuf;

use serde_json::json;
use tautrail::rig::{CalibrationRecord, RigError};

use crate::cli::screen::{Screen, Tone};
use crate::cli::{CAUTION, Failure, Verdict};

/// Compare a cell's shunt reading with the one in its record
#[derive(Debug, clap::Args)]
#[command(after_help = CAUTION)]
pub(super) struct Args {
    /// The cell's calibration record
    record: PathBuf,
    /// Counts without load, shunt off
    #[arg(long, value_name = "COUNTS", allow_negative_numbers = true)]
    zero: f64,
    /// Counts without load, shunt on
    #[arg(long, value_name = "COUNTS", allow_negative_numbers = true)]
    with_shunt: f64,
}

/// Relative change that the resistor and its switch are taken to make by themselves (from memory of common practice).
const ALLOWED_RELATIVE: f64 = 0.001;

pub(super) fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let path = args.record.display().to_string();
    let text =
        std::fs::read_to_string(&args.record).map_err(|source| RigError::Unreadable { path: path.clone(), source })?;
    let (record, findings) = CalibrationRecord::read(&path, &text);
    let Some(record) = record else { return Err(RigError::Refused { path, findings }.into()) };
    let shunt = record.shunt.ok_or_else(|| format!("{path} holds no shunt reading: give shunt_counts in the sheet"))?;
    let found = args.with_shunt - args.zero;
    if !found.is_finite() {
        return Err("the readings must be numbers".into());
    }
    let change = found - shunt.deflection_counts;
    let allowed = 2.0 * shunt.uncertainty_counts.hypot(0.5 * ALLOWED_RELATIVE * shunt.deflection_counts);
    let relative = change / shunt.deflection_counts;
    let agrees = change.abs() <= allowed;
    if screen.json {
        screen.value(&json!({
            "agrees": agrees, "found_counts": found, "recorded_counts": shunt.deflection_counts,
            "relative_change": relative, "allowed_counts": allowed,
        }));
    } else {
        let word = if agrees { screen.toned("agrees", Tone::Good) } else { screen.toned("DISAGREES", Tone::Bad) };
        screen.line(format!(
            "{word}: the shunt reads {found:.1} counts over zero, {:.1} at the calibration of {} ({:+.3} %, {allowed:.1} counts are allowed)",
            shunt.deflection_counts,
            record.date,
            100.0 * relative
        ));
        if !agrees {
            screen.line("  look at cell, cable and excitation; calibrate anew before the values are used");
        }
    }
    Ok(if agrees { Verdict::Done } else { Verdict::CheckFailed })
}
