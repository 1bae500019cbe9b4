//! `tautrail watch`: the live display, or a line a second.

use std::io;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};

use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};
use tautrail::feed::FeedClient;
use tautrail::watch::{self, Choices, Theme};

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
    /// Who acknowledges alarms at this display
    #[arg(long, value_name = "NAME", default_value_t = login_name())]
    person: String,
}

const WATCH_HELP: &str = "\
Keys: q quit, a acknowledge the alarms, h help. No key starts or stops machinery.

A number older than 0.2 s is marked ~, one older than 1 s is replaced by a word. NO_COLOR is honoured.

The display advises and records only. It is no safety device: interlocks, exclusion zones, local codes and licensed
practice decide.";

pub fn run(args: &Args, _screen: &Screen) -> Result<Verdict, Failure> {
    if args.plain {
        follow_plain(args)?;
    } else {
        let theme = Theme { colour: wants_colour(), ascii: args.ascii || !is_utf8_locale() };
        let choices = Choices { socket: args.place.socket(), person: args.person.clone(), theme };
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
