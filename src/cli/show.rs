//! `tautrail show TRIAL`: what a trial file says of itself, as it was sealed.

use std::collections::BTreeMap;
use std::path::PathBuf;

use serde_json::{Value, json};
use tautrail::archive::{Amended, Amendment, Origin, VERDICT_PREFIX, is_held};
use tautrail::capture::{Gap, TimeBase};
use tautrail::trial::{Condition, DeviceRecord, EventRow, Header, RawChannel, ResultSet, TrialError};

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
    /// Print the rig file, or another text that holds for the trial (corrected ones as corrected); without a name list them
    #[arg(long, value_name = "NAME", num_args = 0..=1, default_missing_value = "")]
    texts: Option<String>,
}

const SHOW_HELP: &str = "\
Examples:
  tautrail show trials/trial-000012-7f3a9c.h5
  tautrail show trials/trial-000012-7f3a9c.h5 --texts                 which texts it carries
  tautrail show trials/trial-000012-7f3a9c.h5 --texts rig.toml > rig.toml
  tautrail show --json trials/trial-000012-7f3a9c.h5 | jq '.results[] | select(.name == \"launch_speed\")'

Numbers are as they were when the trial was sealed; what was said later (`tautrail amend`) is shown with its history, and
`tautrail read` derives results with it. Tautrail is no safety device: it advises and records; interlocks,
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
    notes: Vec<(Origin, String, String)>,
    conditions: Vec<(Condition, Origin)>,
    amendments: Vec<Amendment>,
    amendment_findings: Vec<String>,
    held: bool,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let amended = Amended::open(&args.trial)?;
    if let Some(name) = &args.texts {
        return print_texts(&amended, name, screen);
    }
    let shown = gather(amended)?;
    if screen.json {
        screen.value(&as_json(args, &shown));
    } else {
        print(args, &shown, screen);
    }
    Ok(Verdict::Done)
}

/// The text of a name, or the names.
fn print_texts(amended: &Amended, name: &str, screen: &Screen) -> Result<Verdict, Failure> {
    let texts = amended.texts()?;
    let names: Vec<&str> = texts.iter().map(|text| text.name.as_str()).collect();
    match texts.iter().find(|text| text.name == name) {
        Some(text) if screen.json => screen.value(&json!({ "name": text.name, "text": text.text })),
        Some(text) => screen.text(&text.text),
        None if !name.is_empty() => {
            return Err(format!("the trial carries no text {name:?}; it carries {}", names.join(", ")).into());
        }
        None if screen.json => screen.value(&json!({ "texts": names })),
        None => names.iter().for_each(|name| screen.line(name)),
    }
    Ok(Verdict::Done)
}

fn gather(amended: Amended) -> Result<Shown, TrialError> {
    let trial = &amended.trial;
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
        notes: amended.notes()?,
        conditions: amended.conditions()?,
        held: is_held(&amended.path),
        raw_sha256: amended.raw_sha256,
        amendments: amended.chain,
        amendment_findings: amended.findings,
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
    if shown.held {
        screen.line(format!("  {}: nothing about it is deleted", screen.toned("held", Tone::Caution)));
    }
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
    print_said(shown, screen);
    if args.events {
        for EventRow { time_s, kind, source, text, .. } in &shown.events {
            screen.line(format!("  {time_s:>10.4} s  {kind:<8} {source:<14} {text}"));
        }
    } else {
        screen.line(format!("  {} events (--events prints them)", shown.events.len()));
    }
    screen.line(CAUTION);
}

/// Notes, conditions and amendments.
fn print_said(shown: &Shown, screen: &Screen) {
    screen.line(screen.toned("conditions and notes", Tone::Heading));
    for (condition, origin) in &shown.conditions {
        let Condition { name, value, unit, source } = condition;
        screen.line(format!("  {name:<26} {value} {unit}   ({origin}, {source})"));
    }
    for (origin, who, text) in &shown.notes {
        screen.line(format!("  note ({origin}, {who}): {text}"));
    }
    for finding in &shown.amendment_findings {
        screen.line(format!("  {} {finding}", screen.toned("AMENDMENTS NOT SOUND:", Tone::Bad)));
    }
    if !shown.amendments.is_empty() {
        screen.line(screen.toned("amendments, as they came", Tone::Heading));
    }
    for amendment in &shown.amendments {
        let Amendment { number, written, person, reason, .. } = amendment;
        screen.line(format!("  {number:04} {} by {person}: {reason}", shown_time(written)));
        said(amendment).iter().for_each(|sentence| screen.line(format!("       {sentence}")));
    }
}

/// What an amendment says, a line each.
fn said(amendment: &Amendment) -> Vec<String> {
    let notes = amendment.notes.iter().map(|note| format!("note: {}", note.text));
    let answers = amendment.answers.iter().map(|answer| format!("{}: {}", answer.item, answer.answer));
    let conditions = amendment.conditions.iter().map(|said| format!("{} = {} {}", said.name, said.value, said.unit));
    let record = |name: &str, sha256: &str| format!("{name} corrected, in place of the text with sha256 {sha256}");
    let records = amendment.records.iter().map(|said| record(&said.name, &said.replaces_sha256));
    notes.chain(answers).chain(conditions).chain(records).collect()
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
    let amendments: Vec<Value> = shown
        .amendments
        .iter()
        .map(|a| {
            json!({
                "number": a.number, "written": a.written, "person": a.person, "reason": a.reason, "sha256": a.sha256,
                "notes": a.notes, "answers": a.answers, "conditions": a.conditions, "records": a.records,
            })
        })
        .collect();
    let conditions: Vec<Value> = shown
        .conditions
        .iter()
        .map(|(c, origin)| {
            json!({ "name": c.name, "value": c.value, "unit": c.unit, "source": c.source, "from": origin.to_string() })
        })
        .collect();
    let notes: Vec<Value> = shown
        .notes
        .iter()
        .map(|(origin, who, text)| json!({ "from": origin.to_string(), "who": who, "text": text }))
        .collect();
    let header = &shown.header;
    json!({
        "path": args.trial, "trial_id": header.trial_id, "rig": header.rig, "started": header.started,
        "started_quality": header.started_quality, "outcome": shown.results.outcome,
        "outcome_evidence": shown.results.outcome_evidence, "findings": shown.results.findings, "results": results,
        "instants": instants, "absent": absent, "events": events, "signals": shown.signals, "channels": channels,
        "n_missing": shown.n_missing, "n_lost_frames": shown.n_lost_frames, "refused": shown.refused, "raw_sha256": shown.raw_sha256,
        "configuration_hash": header.configuration_hash, "conditions": conditions, "notes": notes,
        "amendments": amendments, "amendment_findings": shown.amendment_findings, "held": shown.held, "caution": CAUTION,
    })
}
