//! `tautrail show TRIAL`: what a trial file says of itself, as it was sealed.

use std::collections::BTreeMap;
use std::path::PathBuf;

use serde_json::{Value, json};
use tautrail::archive::VERDICT_PREFIX;
use tautrail::capture::{Gap, TimeBase};
use tautrail::trial::{DeviceRecord, EventRow, Header, RawChannel, ResultSet, TrialError, TrialFile};

use super::results_text::{instant_line, result_line, shown_time};
use super::screen::{Screen, Tone};
use super::{CAUTION, Failure, Verdict};

/// Show what a trial file holds: outcome, results with uncertainties, events, signals, losses
#[derive(Debug, clap::Args)]
#[command(after_help = SHOW_HELP)]
pub struct Args {
    /// The trial file
    trial: PathBuf,
    /// Print every event
    #[arg(long)]
    events: bool,
}

const SHOW_HELP: &str = "\
Examples:
  tautrail show trials/trial-000012-7f3a9c.h5
  tautrail show --json trials/trial-000012-7f3a9c.h5 | jq '.results[] | select(.name == \"launch_speed\")'

Numbers are as they were when the trial was sealed. Tautrail is no safety device: it advises and records; interlocks,
exclusion zones, local codes and licensed practice decide.";

struct Shown {
    header: Header,
    results: ResultSet,
    events: Vec<EventRow>,
    signals: Vec<String>,
    channels: Vec<RawChannel>,
    n_missing: u64,
    n_lost_frames: u64,
    refused: BTreeMap<String, u64>,
    raw_sha256: String,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let shown = gather(&TrialFile::open(&args.trial)?)?;
    if screen.json {
        screen.value(&as_json(args, &shown));
    } else {
        print(args, &shown, screen);
    }
    Ok(Verdict::Done)
}

fn gather(trial: &TrialFile) -> Result<Shown, TrialError> {
    let (mut channels, mut n_missing, mut n_lost_frames) = (Vec::new(), 0_u64, 0_u64);
    let (mut refused, mut events) = (BTreeMap::new(), trial.events()?);
    for device in trial.device_names()? {
        channels.extend(trial.raw_channels(&device)?);
        let content = trial.device(&device)?;
        n_missing = content.gaps.iter().fold(n_missing, |sum, gap| sum.saturating_add(gap.n_missing));
        events.extend(said_by(trial.header(), &device, &content));
        let Some(link) = content.link else { continue };
        n_lost_frames = n_lost_frames.saturating_add(link.n_lost_frames);
        link.refused.into_iter().for_each(|(reason, n)| *refused.entry(reason).or_default() += n);
    }
    events.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
    let mut signals = trial.signal_names()?;
    signals.extend(trial.derived_names()?);
    Ok(Shown {
        header: trial.header().clone(),
        results: trial.results()?,
        events,
        signals,
        channels,
        n_missing,
        n_lost_frames,
        refused,
        raw_sha256: trial.sealed_raw_digest()?,
    })
}

/// What frames of a device tell at an instant, as events: its texts, its gaps. Instruments that print readings say nothing
/// but readings.
fn said_by(header: &Header, device: &str, content: &DeviceRecord) -> Vec<EventRow> {
    let event = |host_ns: i64, kind: &str, text: String| EventRow {
        time_s: host_ns.saturating_sub(header.zero_host_ns) as f64 * 1e-9,
        kind: kind.to_owned(),
        source: device.to_owned(),
        person: String::new(),
        text,
    };
    let speaks_frames = content.descriptions.iter().any(|description| description.time_base == TimeBase::Ticks);
    let texts = content.text_lines.iter().filter(|_| speaks_frames);
    let mut said: Vec<_> = texts.map(|line| event(line.host_ns, "text", line.text.clone())).collect();
    said.extend(content.gaps.iter().map(|gap| {
        let Gap { n_missing, stream, first_missing_index, .. } = gap;
        event(
            gap.host_ns,
            "gap",
            format!("{n_missing} samples of stream {stream} missing from index {first_missing_index} on"),
        )
    }));
    said
}

fn print(args: &Args, shown: &Shown, screen: &Screen) {
    let Header { trial_id, rig, started, started_quality, .. } = &shown.header;
    screen.line(screen.toned(&format!("trial {trial_id} on rig {rig}: {}", shown.results.outcome), Tone::Heading));
    screen.line(format!("  started {} (wall clock {started_quality})", shown_time(started)));
    shown.results.outcome_evidence.iter().for_each(|sentence| screen.line(format!("  {sentence}")));
    for finding in &shown.results.findings {
        screen.line(format!("  {} {finding}", screen.toned("look at:", Tone::Caution)));
    }
    print_results(&shown.results, screen);
    for channel in &shown.channels {
        let RawChannel { device, name, layout, n_counts, .. } = channel;
        let layout = if *layout == 0 { String::new() } else { format!(" (changed description {layout})") };
        screen.line(format!("  raw {device}/{name}: {n_counts} counts{layout}"));
    }
    let refused: Vec<String> = shown.refused.iter().map(|(reason, n)| format!("{n} {reason}")).collect();
    let refused = if refused.is_empty() { "0".to_owned() } else { refused.join(", ") };
    screen.line(format!(
        "  missing samples: {}, lost frames: {}, refused: {refused}",
        shown.n_missing, shown.n_lost_frames
    ));
    screen.line(format!("  signals: {}", shown.signals.join(", ")));
    screen.line(format!("  raw sha256 {}", shown.raw_sha256));
    if args.events {
        for EventRow { time_s, kind, source, text, .. } in &shown.events {
            screen.line(format!("  {time_s:>10.4} s  {kind:<8} {source:<14} {text}"));
        }
    } else {
        screen.line(format!("  {} events (--events prints them)", shown.events.len()));
    }
    screen.line(CAUTION);
}

fn print_results(results: &ResultSet, screen: &Screen) {
    let (verdicts, entries): (Vec<_>, Vec<_>) =
        results.entries.iter().partition(|entry| entry.name.starts_with(VERDICT_PREFIX));
    screen.line(screen.toned("results, with 95 % interval", Tone::Heading));
    for entry in entries {
        let interval = (entry.low, entry.high);
        screen.line(result_line(&entry.name, entry.value, entry.standard_uncertainty, interval, &entry.unit));
    }
    for absent in &results.absent {
        screen.line(format!("  {:<26} absent: {}", absent.name, absent.reason));
    }
    screen.line(screen.toned("instants", Tone::Heading));
    for instant in &results.instants {
        screen.line(instant_line(&instant.name, instant.time_s, instant.standard_uncertainty_s));
    }
    screen.line(screen.toned("verdicts, for advice and record only", Tone::Heading));
    for verdict in verdicts {
        screen.line(format!("  {}", verdict.method));
    }
    screen.line(screen.toned("what was received", Tone::Heading));
}

fn as_json(args: &Args, shown: &Shown) -> Value {
    let results: Vec<Value> = shown
        .results
        .entries
        .iter()
        .map(|entry| {
            json!({
                "name": entry.name, "value": entry.value, "unit": entry.unit, "low": entry.low, "high": entry.high,
                "standard_uncertainty": entry.standard_uncertainty, "method": entry.method, "budget": entry.budget,
            })
        })
        .collect();
    let instants: Vec<Value> = shown
        .results
        .instants
        .iter()
        .map(|i| json!({ "name": i.name, "time_s": i.time_s, "standard_uncertainty_s": i.standard_uncertainty_s }))
        .collect();
    let absent: Vec<Value> =
        shown.results.absent.iter().map(|a| json!({ "name": a.name, "reason": a.reason })).collect();
    let events: Vec<Value> = shown
        .events
        .iter()
        .map(|e| json!({ "time_s": e.time_s, "kind": e.kind, "source": e.source, "person": e.person, "text": e.text }))
        .collect();
    let channels: Vec<Value> = shown
        .channels
        .iter()
        .map(|c| json!({ "device": c.device, "channel": c.name, "layout": c.layout, "n_counts": c.n_counts }))
        .collect();
    let header = &shown.header;
    json!({
        "path": args.trial, "trial_id": header.trial_id, "rig": header.rig, "started": header.started,
        "started_quality": header.started_quality, "outcome": shown.results.outcome,
        "outcome_evidence": shown.results.outcome_evidence, "findings": shown.results.findings, "results": results,
        "instants": instants, "absent": absent, "events": events, "signals": shown.signals, "channels": channels,
        "n_missing": shown.n_missing, "n_lost_frames": shown.n_lost_frames, "refused": shown.refused, "raw_sha256": shown.raw_sha256,
        "configuration_hash": header.configuration_hash, "caution": CAUTION,
    })
}
