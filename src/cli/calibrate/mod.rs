//! `tautrail calibrate cell|encoder|accelerometer|shunt`: from bench readings to a calibration record.

mod guided;
mod shunt;
mod told;
mod written;

use std::path::PathBuf;

use tautrail::calibration::{self, accelerometer, cell, encoder};
use tautrail::report;
use tautrail::rig::{RecordKind, RigError, Sheet};

use super::feed_place::FeedPlace;
use super::screen::Screen;
use super::{CAUTION, Failure, Verdict};

/// Calibrate a sensor from bench readings; writes a dated record that the rig file points to
///
/// The readings come from a table, or live from a running daemon with `--live`: the program says what to hang or where to
/// go, waits until the reading has settled, and takes mean, scatter and count.
#[derive(Debug, clap::Args)]
#[command(after_help = HELP)]
pub struct Args {
    #[command(subcommand)]
    what: What,
}

const HELP: &str = "\
Examples:
  tautrail calibrate cell line-sheet.toml --readings line.csv --record records/line.toml --page line.html
  tautrail calibrate cell line-sheet.toml --live --plan line-plan.csv --readings line.csv --record records/line.toml
  tautrail calibrate encoder encoder-sheet.toml --record records/encoder.toml
  tautrail calibrate accelerometer accel-sheet.toml --record records/accel.toml
  tautrail calibrate shunt records/line.toml --zero 12010 --with-shunt 812400

The sheet (TOML) says which sensor, who, when, until when, and what it was compared with; src/rig/RECORDS.md lists its
keys. Readings are CSV: run,rotation_deg,direction,load,counts,sd,n,held_s,excitation_v (direction and counts at least).

Exit code: 0 done, 1 a reading is flagged or a check failed (the record is written all the same), 2 it could not be done.

Figures in the manner of a standard are no certificate: only an accredited laboratory gives one. Tautrail is no safety
device: interlocks, local codes and licensed practice decide.";

#[derive(Debug, clap::Subcommand)]
enum What {
    /// A force cell: known loads up and down
    Cell(Work),
    /// A position encoder: marks along the rail, in both directions
    Encoder(Work),
    /// An accelerometer: turned ±1 g, and at rest on the rail
    Accelerometer(Work),
    /// Compare a cell's shunt reading with the one in its record
    Shunt(shunt::Args),
}

#[derive(Debug, clap::Args)]
#[command(after_help = CAUTION)]
struct Work {
    /// The bench sheet (TOML)
    sheet: PathBuf,
    /// The readings (CSV); with --live they are written here as they are taken
    #[arg(long, value_name = "CSV")]
    readings: Option<PathBuf>,
    /// Where to write the record (TOML); nothing there is overwritten
    #[arg(long, value_name = "TOML")]
    record: Option<PathBuf>,
    /// Where to write a page with pictures (HTML)
    #[arg(long, value_name = "HTML")]
    page: Option<PathBuf>,
    /// Take the readings from the running daemon, step by step
    #[arg(long, requires = "plan", requires = "readings")]
    live: bool,
    /// With --live: the steps (CSV without counts: run,rotation_deg,direction,load,held_s)
    #[arg(long, value_name = "CSV", requires = "live")]
    plan: Option<PathBuf>,
    #[command(flatten)]
    place: FeedPlace,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    match &args.what {
        What::Cell(work) => cell(work, screen),
        What::Encoder(work) => encoder(work, screen),
        What::Accelerometer(work) => accelerometer(work, screen),
        What::Shunt(args) => shunt::run(args, screen),
    }
}

/// A sheet with its readings, and both as one text.
struct Prepared {
    sheet: Sheet,
    text: String,
}

fn prepare(work: &Work, kind: RecordKind, screen: &Screen) -> Result<Prepared, Failure> {
    let unreadable = |path: &PathBuf, source| RigError::Unreadable { path: path.display().to_string(), source };
    let mut text = std::fs::read_to_string(&work.sheet).map_err(|source| unreadable(&work.sheet, source))?;
    let (sheet, findings) = Sheet::read(&text);
    let path = work.sheet.display().to_string();
    let Some(mut sheet) = sheet else { return Err(RigError::Refused { path, findings }.into()) };
    for finding in findings {
        screen.line(format!("{path}:{finding}"));
    }
    if sheet.kind != kind {
        return Err(format!("{path} is the sheet of a {}, not of a {}", sheet.kind.word(), kind.word()).into());
    }
    if let (true, Some(plan), Some(readings)) = (work.live, &work.plan, &work.readings) {
        guided::take(&sheet, plan, readings, &work.place.socket(), screen)?;
    }
    if let Some(readings) = &work.readings {
        let csv = std::fs::read_to_string(readings).map_err(|source| unreadable(readings, source))?;
        let read = calibration::readings_from_csv(&csv).map_err(|error| format!("{}: {error}", readings.display()))?;
        sheet.readings.extend(read);
        text.push_str("\n# The readings, as CSV:\n");
        csv.lines().for_each(|line| text.push_str(&format!("#| {line}\n")));
    }
    if sheet.readings.is_empty() {
        return Err(format!("{path} has no readings: give --readings, or [[reading]] entries in the sheet").into());
    }
    Ok(Prepared { sheet, text })
}

fn cell(work: &Work, screen: &Screen) -> Result<Verdict, Failure> {
    let Prepared { sheet, text } = prepare(work, RecordKind::Cell, screen)?;
    let calibration = cell::calibrate(&sheet)?;
    written::record(work, &calibration::cell_record(&sheet, &calibration, &text))?;
    written::page(work, &report::cell_page(&sheet, &calibration)?)?;
    told::cell(work, &sheet, &calibration, screen);
    let flagged = calibration.flagged().next().is_some();
    Ok(if flagged { Verdict::CheckFailed } else { Verdict::Done })
}

fn encoder(work: &Work, screen: &Screen) -> Result<Verdict, Failure> {
    let Prepared { sheet, text } = prepare(work, RecordKind::Encoder, screen)?;
    let calibration = encoder::calibrate(&sheet)?;
    written::record(work, &calibration::encoder_record(&sheet, &calibration, &text))?;
    written::page(work, &report::encoder_page(&sheet, &calibration)?)?;
    told::encoder(work, &sheet, &calibration, screen);
    let flagged = calibration.points.iter().any(|point| point.flagged);
    Ok(if flagged { Verdict::CheckFailed } else { Verdict::Done })
}

fn accelerometer(work: &Work, screen: &Screen) -> Result<Verdict, Failure> {
    let Prepared { sheet, text } = prepare(work, RecordKind::Accelerometer, screen)?;
    let calibration = accelerometer::calibrate(&sheet)?;
    written::record(work, &calibration::accelerometer_record(&sheet, &calibration, &text))?;
    written::page(work, &report::accelerometer_page(&sheet, &calibration))?;
    told::accelerometer(work, &sheet, &calibration, screen);
    let disagrees = calibration.at_rest.is_some_and(|rest| !rest.agrees);
    Ok(if disagrees { Verdict::CheckFailed } else { Verdict::Done })
}
