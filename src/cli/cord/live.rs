//! `tautrail cord read PLAN`: readings of cords beside a running daemon, force from a live cell, length typed or by the encoder.
//!
//! Each reading is on the disk before the next step is asked for: a run that breaks off is not lost.

use std::fs::OpenOptions;
use std::io::{BufRead, Write};
use std::path::{Path, PathBuf};
use std::time::{Duration, Instant};

use serde_json::json;
use tautrail::calibration::{Settled, Settling, SettlingRule, Told};
use tautrail::feed::FeedClient;
use tautrail::feed::message::{Message, Snapshot};
use tautrail::rig::CordBranch;
use tautrail::units::{self, Dimension};

use super::plan::steps;
use crate::cli::feed_place::FeedPlace;
use crate::cli::screen::Screen;
use crate::cli::{CAUTION, Failure, Verdict};

/// Take a lot's load and unload readings from the running daemon, step by step
///
/// Says which cord to load and how far, waits for Enter and until the cell's force has settled, and takes its mean. The length
/// is typed as the scale shows it, or is the draw that the shuttle's encoder shows. Holds are read at their times by themselves.
#[derive(Debug, clap::Args)]
#[command(after_help = READ_HELP)]
pub struct Args {
    /// The steps (CSV: serial,cycle,branch,do,hold_s)
    plan: PathBuf,
    /// Where the readings go (CSV, as the cord sheet names it); nothing there is overwritten
    #[arg(long, value_name = "CSV")]
    readings: PathBuf,
    /// The cell's channel, as the rig file names it
    #[arg(long, value_name = "CHANNEL")]
    cell: String,
    /// Take the draw of the shuttle's encoder for the cord's extension, instead of typed lengths
    #[arg(long)]
    encoder: bool,
    /// A force that moves by less than this between the halves of three seconds has settled
    #[arg(long, value_name = "FORCE", default_value = "0.05 N")]
    still: String,
    #[command(flatten)]
    place: FeedPlace,
}

const READ_HELP: &str = "\
Examples:
  tautrail cord read lot-7-plan.csv --readings lot-7.csv --cell line --dir trials
  tautrail cord read lot-7-plan.csv --readings lot-7.csv --cell anchor --encoder --dir trials
  then name lot-7.csv in the cord sheet and make the card: tautrail cord card lot-7-sheet.toml

The plan has a row a step; hold rows are read so many seconds after the reading before them, nobody presses a key:
  serial,cycle,branch,do,hold_s
  7-01,4,load,hang 1 kg,
  7-01,4,hold,keep the length,60
  7-01,4,unload,take 1 kg off,

Lengths are typed with their unit: 2.912 m. With --encoder the cord must be pulled by the shuttle, and come taut at the zero mark.

Exit code: 0 all steps read, 2 it could not be done; the steps that were read are kept.";

/// A reading must have stood for this long.
const SPAN_S: f64 = 3.0;
/// A reading in a hold is the mean of this long.
const HOLD_SPAN_S: f64 = 0.5;
const PATIENCE: Duration = Duration::from_secs(180);
/// Older values are none.
const FRESH_S: f64 = 0.5;

/// What was read at a step.
struct Reading {
    host_ns: i64,
    force: Settled,
    draw_m: Option<f64>,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let still_n = units::parse(&args.still, Dimension::Force).map_err(|error| format!("--still: {error}"))?;
    let path = args.plan.display();
    let text = std::fs::read_to_string(&args.plan).map_err(|error| format!("{path}: {error}"))?;
    let steps = steps(&text).map_err(|why| format!("{path}: {why}"))?;
    let to = &args.readings;
    if to.exists() {
        return Err(format!("{} is there already; readings are never overwritten", to.display()).into());
    }
    // Refused now rather than after the first load.
    drop(FeedClient::connect(&args.place.socket())?);
    let mut input = std::io::stdin().lock().lines();
    let (mut first_ns, mut last, mut length_m) = (None, Instant::now(), f64::NAN);
    for (index, step) in steps.iter().enumerate() {
        screen.line(format!("step {} of {}: {}", index + 1, steps.len(), step.instruction()));
        let ended = || format!("the input ended after {index} of {} steps; those that were read are kept", steps.len());
        let reading = if step.branch == CordBranch::Hold {
            held(args, Duration::try_from_secs_f64(step.hold_s)?.saturating_sub(last.elapsed()))?
        } else {
            input.next().transpose()?.ok_or_else(ended)?;
            settled(args, still_n)?
        };
        let Settled { counts: force_n, sd_counts: sd_n, n, span_s } = reading.force;
        screen.line(format!("  {force_n:.3} N, scatter {sd_n:.3} N, {n} values over {span_s:.1} s"));
        if step.branch != CordBranch::Hold {
            last = Instant::now();
            length_m = match reading.draw_m {
                Some(draw_m) => draw_m,
                None => typed_length(&mut input, screen)?.ok_or_else(ended)?,
            };
        }
        let time_s = (reading.host_ns - *first_ns.get_or_insert(reading.host_ns)) as f64 * 1e-9;
        let row = format!(
            "{},{},{},{time_s:.2},{force_n:.4},{length_m:.5},{}\n",
            step.serial,
            step.cycle,
            step.branch.word(),
            step.instruct.replace(',', ";")
        );
        keep(to, args.encoder, index == 0, &row).map_err(|error| format!("{}: {error}", to.display()))?;
    }
    if screen.json {
        screen.value(&json!({ "steps": steps.len(), "readings": to, "caution": CAUTION }));
    } else {
        screen.line(format!("readings written to {}", to.display()));
        screen.line(CAUTION);
    }
    Ok(Verdict::Done)
}

fn keep(to: &Path, by_encoder: bool, is_first: bool, row: &str) -> std::io::Result<()> {
    let mut options = OpenOptions::new();
    let mut file =
        if is_first { options.write(true).create_new(true).open(to)? } else { options.append(true).open(to)? };
    if is_first {
        let length = if by_encoder { "extension" } else { "length" };
        writeln!(file, "serial,cycle,branch,time [s],force [N],{length} [m],note")?;
    }
    file.write_all(row.as_bytes())?;
    file.sync_data()
}

/// Asks until a length is typed; none where the input ends.
fn typed_length(
    input: &mut impl Iterator<Item = std::io::Result<String>>,
    screen: &Screen,
) -> Result<Option<f64>, Failure> {
    loop {
        screen.line("  length between the marks? (with its unit: 2.912 m)");
        let Some(line) = input.next().transpose()? else { return Ok(None) };
        match units::parse(line.trim(), Dimension::Length) {
            Ok(length_m) if length_m > 0.0 => return Ok(Some(length_m)),
            Ok(_) => screen.line("  a cord is longer than nothing"),
            Err(error) => screen.line(format!("  {error}")),
        }
    }
}

/// Waits until the force stands. A connection of its own: nothing told before the step counts.
fn settled(args: &Args, still_n: f64) -> Result<Reading, Failure> {
    let mut settling = Settling::new(SettlingRule { span_s: SPAN_S, still_counts: still_n });
    let mut draws = Vec::new();
    let found = watched(args, PATIENCE, |snapshot, force_n| {
        draws.extend(snapshot.draw_m.map(|draw_m| (snapshot.host_ns, draw_m)));
        settling.take(Told { host_ns: snapshot.host_ns, n: 1, mean: force_n, sd: None })
    })?;
    let Some((host_ns, force)) = found else {
        return Err(format!(
            "{} did not settle within {} s: is it silent, does the load swing, does the cord still creep (--still)?",
            args.cell,
            PATIENCE.as_secs()
        )
        .into());
    };
    Ok(Reading { host_ns, force, draw_m: draw_of(args, &draws, host_ns)? })
}

/// The mean draw over the time of a reading.
fn draw_of(args: &Args, draws: &[(i64, f64)], host_ns: i64) -> Result<Option<f64>, Failure> {
    if !args.encoder {
        return Ok(None);
    }
    let from_ns = host_ns - (SPAN_S * 1e9) as i64;
    let draws: Vec<f64> = draws.iter().filter(|(at_ns, _)| *at_ns >= from_ns).map(|(_, draw_m)| *draw_m).collect();
    if draws.is_empty() {
        return Err("the shuttle's encoder is silent: check it, or type lengths (without --encoder)".into());
    }
    Ok(Some(draws.iter().sum::<f64>() / draws.len() as f64))
}

/// Waits, then takes the mean of half a second.
fn held(args: &Args, wait: Duration) -> Result<Reading, Failure> {
    std::thread::sleep(wait);
    let mut values: Vec<f64> = Vec::new();
    let mut first_ns = None;
    let found = watched(args, PATIENCE, |snapshot, force_n| {
        values.push(force_n);
        let span_s = (snapshot.host_ns - *first_ns.get_or_insert(snapshot.host_ns)) as f64 * 1e-9;
        (span_s >= HOLD_SPAN_S).then(|| {
            let (n, counts) = (values.len() as f64, values.iter().sum::<f64>() / values.len() as f64);
            let squares: f64 = values.iter().map(|value| (value - counts).powi(2)).sum();
            Settled { counts, sd_counts: (squares / (n - 1.0).max(1.0)).sqrt(), n: values.len() as u64, span_s }
        })
    })?;
    let silent = || format!("{} is silent: check sensor, device and cable", args.cell);
    let (host_ns, force) = found.ok_or_else(silent)?;
    Ok(Reading { host_ns: host_ns - (0.5e9 * force.span_s) as i64, force, draw_m: None })
}

/// Hands every snapshot with a fresh force of the cell on, until that gives something, with the time of the last.
fn watched(
    args: &Args,
    patience: Duration,
    mut take: impl FnMut(&Snapshot, f64) -> Option<Settled>,
) -> Result<Option<(i64, Settled)>, Failure> {
    let mut client = FeedClient::connect(&args.place.socket())?;
    let started = Instant::now();
    while started.elapsed() < patience {
        match client.next(Duration::from_millis(200))? {
            Some(Message::Snapshot(snapshot)) => {
                let names = || snapshot.channels.iter().map(|one| one.name.as_str()).collect::<Vec<_>>().join(", ");
                let Some(cell) = snapshot.channels.iter().find(|one| one.name == args.cell) else {
                    return Err(
                        format!("there is no calibrated channel {:?}, there are: {}", args.cell, names()).into()
                    );
                };
                if cell.unit != "N" {
                    return Err(format!("{} is no tension cell, it reads in {}", args.cell, cell.unit).into());
                }
                let fresh = cell.age_s.is_some_and(|age_s| age_s < FRESH_S);
                if let Some(settled) = cell.value.filter(|_| fresh).and_then(|force_n| take(&snapshot, force_n)) {
                    return Ok(Some((snapshot.host_ns, settled)));
                }
            }
            Some(Message::Bye { reason }) => return Err(format!("the daemon stops: {reason}").into()),
            _ => {}
        }
    }
    Ok(None)
}
