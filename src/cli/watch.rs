//! `tautrail watch`: the live display, or a line a second.

use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};
use tautrail::feed::FeedClient;
use tautrail::live::{Debrief, LaunchSeen, Recorded};
use tautrail::trial::{EventRow, TrialFile};
use tautrail::watch::{self, Choices, ForceUnit, ShownUnits, Source, SpeedUnit, Theme, TrialPlayer};

use super::feed_place::{FeedPlace, login_name};
use super::screen::Screen;
use super::{Failure, Verdict};

/// Show a running daemon's launcher live: cords, tension against plan and limit, what a release now would give
#[derive(Debug, clap::Args)]
#[command(after_help = WATCH_HELP)]
pub struct Args {
    #[command(flatten)]
    place: FeedPlace,
    /// Print a line a second instead of drawing: for slow lines, logs and pipes
    #[arg(long)]
    plain: bool,
    /// Signs of plain ASCII only (the default where the locale is not UTF-8)
    #[arg(long)]
    ascii: bool,
    /// Play a recorded trial in place of a daemon's feed, for a debrief
    #[arg(long, value_name = "TRIAL", conflicts_with = "plain")]
    replay: Option<PathBuf>,
    /// Pace of --replay: 2 is twice as fast
    #[arg(long, value_name = "TIMES", default_value_t = 1.0, requires = "replay", value_parser = pace)]
    pace: f64,
    /// Unit of forces: N, kN, kgf or lbf
    #[arg(long, value_name = "UNIT", default_value = "N", value_parser = force_unit)]
    force: ForceUnit,
    /// Unit of speeds: m/s, km/h or kt
    #[arg(long, value_name = "UNIT", default_value = "m/s", value_parser = speed_unit)]
    speed: SpeedUnit,
    /// Begin with big numbers, to be read from a distance
    #[arg(long)]
    big: bool,
    /// Who acknowledges alarms at this display
    #[arg(long, value_name = "NAME", default_value_t = login_name())]
    person: String,
}

const WATCH_HELP: &str = "\
Examples:
  tautrail watch                                  the daemon that serves the usual place
  tautrail watch --replay trials/trial-000012-7f3a9c.h5 --pace 4
  tautrail watch --big --force kgf --speed km/h   for the winch, read from a distance

Keys: q quit, a acknowledge the alarms, u units, b big numbers, h help. No key starts or stops machinery.
With --replay also: space stop and go on, left and right arrow 5 s, + and - pace, 0 to the start.

Alarms and events stay in SI whatever the units, as they stand in the records. A number older than 0.2 s is marked ~, one older than 1 s is replaced by a word. NO_COLOR is honoured.

The display advises and records only. It is no safety device: interlocks, exclusion zones, local codes and licensed
practice decide.";

pub fn run(args: &Args, _screen: &Screen) -> Result<Verdict, Failure> {
    if args.plain {
        follow_plain(args)?;
    } else {
        let theme = Theme { colour: wants_colour(), ascii: args.ascii || !is_utf8_locale() };
        let units = ShownUnits { force: args.force, speed: args.speed };
        let choices = Choices { person: args.person.clone(), theme, units, big: args.big };
        let source = match &args.replay {
            Some(trial) => Source::Trial(Box::new(TrialPlayer::new(debrief(trial)?, args.pace))),
            None => Source::Daemon(args.place.socket()),
        };
        watch::follow(source, &choices)?;
    }
    Ok(Verdict::Done)
}

fn follow_plain(args: &Args) -> Result<(), Failure> {
    let stop = Arc::new(AtomicBool::new(false));
    for signal in [SIGTERM, SIGHUP, SIGINT] {
        signal_hook::flag::register(signal, stop.clone())?;
    }
    let mut client = FeedClient::connect(&args.place.socket())?;
    Ok(watch::follow_plain(&mut client, &mut io::stdout().lock(), &|| stop.load(Ordering::Relaxed))?)
}

/// A trial's signals, its events, and what its reading gave.
fn debrief(path: &Path) -> Result<Debrief, Failure> {
    let measured = super::measured::open(path, None)?;
    let trial = TrialFile::open(path)?;
    let recorded = |row: EventRow| Recorded {
        time_s: row.time_s,
        kind: row.kind,
        source: row.source,
        person: (!row.person.is_empty()).then_some(row.person),
        text: row.text,
    };
    let events = trial.events()?.into_iter().map(recorded).collect();
    let results = trial.results()?;
    let result = |name: &str| results.entries.iter().find(|entry| entry.name == name).map(|entry| entry.value);
    let launched = result("launch_speed").zip(result("peak_g_cfc60_specific"));
    let launched = launched.map(|(launch_speed_mps, peak_g)| LaunchSeen { launch_speed_mps, peak_g });
    Ok(Debrief::new(measured.rig, measured.header.trial_id, measured.signals, events, launched))
}

fn pace(text: &str) -> Result<f64, String> {
    let pace: f64 = text.parse().map_err(|_| "the pace is a number, such as 0.5 or 4".to_owned())?;
    if (0.0625..=64.0).contains(&pace) { Ok(pace) } else { Err("the pace lies between 0.0625 and 64".to_owned()) }
}

fn force_unit(text: &str) -> Result<ForceUnit, String> {
    let found = ForceUnit::ALL.into_iter().find(|unit| unit.symbol() == text);
    found.ok_or_else(|| match text {
        "kg" => "\"kg\" is a mass, not a force; write \"kgf\"".to_owned(),
        _ => "forces are shown in N, kN, kgf or lbf".to_owned(),
    })
}

fn speed_unit(text: &str) -> Result<SpeedUnit, String> {
    let found = SpeedUnit::ALL.into_iter().find(|unit| unit.symbol() == text);
    found.ok_or_else(|| match text {
        "kn" => "\"kn\" reads like kilonewton; write \"kt\" for knots".to_owned(),
        _ => "speeds are shown in m/s, km/h or kt".to_owned(),
    })
}

fn wants_colour() -> bool {
    std::env::var_os("NO_COLOR").is_none_or(|value| value.is_empty())
}

/// As setlocale(3) chooses: LC_ALL, then LC_CTYPE, then LANG.
fn is_utf8_locale() -> bool {
    let set = ["LC_ALL", "LC_CTYPE", "LANG"].iter().find_map(|name| {
        let value = std::env::var(name).ok()?;
        (!value.is_empty()).then_some(value)
    });
    set.is_some_and(|value| {
        let value = value.to_lowercase();
        value.contains("utf-8") || value.contains("utf8")
    })
}
