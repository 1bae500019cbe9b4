//! Guided readings beside a running daemon: says what to do, waits for Enter and until the reading settles, writes it down.
//!
//! Each reading is on the disk before the next step is asked for: a run that breaks off is not lost.

use std::fs::OpenOptions;
use std::io::{BufRead, Write};
use std::path::Path;
use std::time::{Duration, Instant};

use tautrail::calibration::{self, Settled, Settling, SettlingRule, Told};
use tautrail::feed::FeedClient;
use tautrail::feed::message::{Command, Message};
use tautrail::rig::{RecordKind, Sheet, SheetReading};

use super::Failure;
use crate::cli::screen::Screen;

/// A reading must have stood for this long.
const SPAN_S: f64 = 3.0;
/// Halves of the span may differ by this share of the channel's range.
const STILL_SHARE: f64 = 2e-6;
const PATIENCE: Duration = Duration::from_secs(120);
/// The feed tells counts for ten seconds after it was asked.
const ASK_AGAIN: Duration = Duration::from_secs(4);

pub(super) fn take(sheet: &Sheet, plan: &Path, to: &Path, socket: &Path, screen: &Screen) -> Result<(), Failure> {
    let steps = steps(plan)?;
    // Refused now rather than after the first load.
    drop(FeedClient::connect(socket)?);
    if to.exists() {
        return Err(format!("{} is there already; readings are never overwritten", to.display()).into());
    }
    let mut lines = std::io::stdin().lock().lines();
    let rule =
        SettlingRule { span_s: SPAN_S, still_counts: STILL_SHARE * (sheet.counts_range.1 - sheet.counts_range.0) };
    let mut taken: Vec<SheetReading> = Vec::new();
    for (index, step) in steps.iter().enumerate() {
        screen.line(format!("step {} of {}: {}; then Enter", index + 1, steps.len(), instruction(sheet.kind, step)));
        if lines.next().transpose()?.is_none() {
            return Err(format!(
                "the input ended after {index} of {} steps; {} holds those that were read",
                steps.len(),
                to.display()
            )
            .into());
        }
        if let Some(held_s) = step.held_s.filter(|_| step.direction == "creep") {
            screen.line(format!("  held for {held_s:.0} s"));
            std::thread::sleep(Duration::try_from_secs_f64(held_s)?);
        }
        let settled = settle(socket, sheet, rule, screen)?;
        screen.line(format!(
            "  {:.1} counts, scatter {:.1}, {} samples over {:.0} s",
            settled.counts, settled.sd_counts, settled.n, settled.span_s
        ));
        taken.push(SheetReading {
            counts: settled.counts,
            sd_counts: Some(settled.sd_counts),
            n: Some(settled.n as f64),
            ..step.clone()
        });
        keep(to, &taken).map_err(|error| format!("{}: {error}", to.display()))?;
    }
    Ok(())
}

/// Puts the newest reading on the disk; the first makes the file, so that a run without one leaves nothing behind.
fn keep(to: &Path, taken: &[SheetReading]) -> std::io::Result<()> {
    let csv = calibration::readings_to_csv(taken);
    let mut options = OpenOptions::new();
    let (options, new) = match taken.len() {
        1 => (options.write(true).create_new(true), csv.clone()),
        _ => (options.append(true), format!("{}\n", csv.lines().last().unwrap_or_default())),
    };
    let mut file = options.open(to)?;
    file.write_all(new.as_bytes())?;
    file.sync_data()
}

/// The steps of a plan: a table whose counts are still to come.
fn steps(plan: &Path) -> Result<Vec<SheetReading>, Failure> {
    let path = plan.display();
    let text = std::fs::read_to_string(plan).map_err(|error| format!("{path}: {error}"))?;
    let mut header_seen = false;
    let mut with_counts = String::new();
    for line in text.lines() {
        let said = line.trim();
        let more = match said {
            "" => "",
            said if said.starts_with('#') => "",
            _ if header_seen => ",0",
            _ => {
                header_seen = true;
                ",counts"
            }
        };
        with_counts.push_str(&format!("{said}{more}\n"));
    }
    let steps = calibration::readings_from_csv(&with_counts).map_err(|error| format!("{path}: {error}"))?;
    if steps.is_empty() {
        return Err(format!("{path} has no steps").into());
    }
    Ok(steps)
}

fn instruction(kind: RecordKind, step: &SheetReading) -> String {
    let SheetReading { run, direction, load, rotation_deg, .. } = step;
    match kind {
        RecordKind::Cell => {
            let turned = rotation_deg.map_or_else(String::new, |deg| format!(", cell turned to {deg:.0} deg"));
            let what = if load == "0" { "take everything off".to_owned() } else { format!("hang {load}") };
            format!("run {run}{turned}, {direction}: {what}")
        }
        RecordKind::Encoder => format!("bring the shuttle to the mark at {load}, moving {direction}"),
        RecordKind::Accelerometer if direction == "rest" => "shuttle at rest on the rail".to_owned(),
        RecordKind::Accelerometer => format!("accelerometer's axis {direction}"),
    }
}

/// A connection of its own for each reading: nothing told before the step counts, and a person may take their time.
fn settle(socket: &Path, sheet: &Sheet, rule: SettlingRule, screen: &Screen) -> Result<Settled, Failure> {
    let mut client = FeedClient::connect(socket)?;
    let mut settling = Settling::new(rule);
    let started = Instant::now();
    let mut asked: Option<Instant> = None;
    while started.elapsed() < PATIENCE {
        if asked.is_none_or(|asked| asked.elapsed() > ASK_AGAIN) {
            let command = Command::Raw { id: 1, person: sheet.person.clone(), channel: sheet.channel.clone() };
            client.send(&command)?;
            asked = Some(Instant::now());
        }
        match client.next(Duration::from_millis(200))? {
            Some(Message::Raw(raw)) if raw.channel == sheet.channel => {
                if raw.min <= sheet.counts_range.0 || raw.max >= sheet.counts_range.1 {
                    return Err(format!(
                        "{} is saturated, {} to {} counts: take less load",
                        raw.channel, raw.min, raw.max
                    )
                    .into());
                }
                let told = Told { host_ns: raw.host_ns, n: raw.n, mean: raw.mean, sd: raw.sd };
                if let Some(settled) = settling.take(told) {
                    return Ok(settled);
                }
            }
            Some(Message::Reply { ok: false, text, .. }) => return Err(text.into()),
            Some(Message::Bye { reason }) => return Err(format!("the daemon stops: {reason}").into()),
            _ => {}
        }
    }
    screen.line("  it does not settle: a swinging load, a loose cable, a cell that creeps?");
    Err(format!("{} did not settle within {} s", sheet.channel, PATIENCE.as_secs()).into())
}
