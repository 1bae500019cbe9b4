//! `tautrail watch`: the live display, or a line a second.

use std::io;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};
use tautrail::feed::FeedClient;
use tautrail::watch::{self, Choices, ForceUnit, ShownUnits, SpeedUnit, Theme};

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
  tautrail watch --big --force kgf --speed km/h   for the winch, read from a distance

Keys: q quit, a acknowledge the alarms, u units, b big numbers, h help. No key starts or stops machinery.

Alarms and events stay in SI whatever the units, as they stand in the records. A number older than 0.2 s is marked ~, one older than 1 s is replaced by a word. NO_COLOR is honoured.

The display advises and records only. It is no safety device: interlocks, exclusion zones, local codes and licensed
practice decide.";

pub fn run(args: &Args, _screen: &Screen) -> Result<Verdict, Failure> {
    if args.plain {
        follow_plain(args)?;
    } else {
        let theme = Theme { colour: wants_colour(), ascii: args.ascii || !is_utf8_locale() };
        let units = ShownUnits { force: args.force, speed: args.speed };
        let (socket, person) = (args.place.socket(), args.person.clone());
        let choices = Choices { socket, person, theme, units, big: args.big };
        watch::follow(&choices)?;
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
