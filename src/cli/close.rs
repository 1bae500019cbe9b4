//! `tautrail close`: closes the trial under way by hand, through the feed; never over loaded cords.

use tautrail::feed::message::Command;

use super::ask::ask;
use super::feed_place::{FeedPlace, login_name};
use super::screen::Screen;
use super::{CAUTION, Failure, Verdict};

/// Close the trial under way in the running daemon, which then seals it
///
/// Refused while the cords are loaded, or while their tension is unknown: let them down first.
#[derive(Debug, clap::Args)]
#[command(after_help = format!("{CLOSE_HELP}\n\n{CAUTION}"))]
pub struct Args {
    /// Who closes it
    #[arg(long, value_name = "NAME", default_value_t = login_name())]
    person: String,
    #[command(flatten)]
    place: FeedPlace,
}

const CLOSE_HELP: &str = "\
Examples:
  tautrail close --dir trials
  tautrail close --dir trials --person 'duty recorder'

Exit code: 0 closed, 1 the daemon refused it, 2 nobody answered.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let command = Command::Close { id: 1, person: args.person.clone() };
    ask(&args.place, &command, "closed", screen)
}
