//! `tautrail mark`: a note into the journal and the open trial, through the feed.

use tautrail::feed::message::Command;

use super::ask::ask;
use super::feed_place::{FeedPlace, login_name};
use super::screen::Screen;
use super::{Failure, Verdict};

/// Write a note into the running daemon's journal, and into the trial while one is open
///
/// Exit code: 0 noted, 1 the daemon refused it, 2 nobody answered.
#[derive(Debug, clap::Args)]
pub struct Args {
    /// What to note
    #[arg(required = true)]
    text: Vec<String>,
    /// Who notes it
    #[arg(long, value_name = "NAME", default_value_t = login_name())]
    person: String,
    #[command(flatten)]
    place: FeedPlace,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let command = Command::Mark { id: 1, person: args.person.clone(), text: args.text.join(" ") };
    ask(&args.place, &command, "noted", screen)
}
