//! `tautrail open`: opens a trial by hand, also late, through the feed.

use tautrail::feed::message::Command;

use super::ask::ask;
use super::feed_place::{FeedPlace, login_name};
use super::screen::Screen;
use super::{Failure, Verdict};

/// Open a trial by hand in the running daemon, also after the fact
///
/// Trials open by themselves when tension rises. By hand one is opened before that, or late: with --back it reaches back
/// into what is recorded already. It closes by itself once the cords were loaded and are slack again, or by `tautrail close`.
#[derive(Debug, clap::Args)]
#[command(after_help = OPEN_HELP)]
pub struct Args {
    /// How far it reaches back, in seconds, 60 at most; 2 if not given
    #[arg(long, value_name = "S")]
    back: Option<f64>,
    /// Who opens it
    #[arg(long, value_name = "NAME", default_value_t = login_name())]
    person: String,
    #[command(flatten)]
    place: FeedPlace,
}

const OPEN_HELP: &str = "\
Examples:
  tautrail open --dir trials               from now on, and the two seconds before
  tautrail open --dir trials --back 30     what happened half a minute ago is in it

Exit code: 0 opened, 1 the daemon refused it, 2 nobody answered.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let command = Command::Open { id: 1, person: args.person.clone(), back_s: args.back };
    ask(&args.place, &command, "opened", screen)
}
