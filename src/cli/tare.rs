//! `tautrail tare CHANNEL`: sets a cell's zero through the feed, while the cords are slack.

use std::time::Duration;

use serde_json::json;
use tautrail::feed::FeedClient;
use tautrail::feed::message::Command;

use super::feed_place::{FeedPlace, login_name};
use super::screen::{Screen, Tone};
use super::{CAUTION, Failure, Verdict};

const PATIENCE: Duration = Duration::from_secs(5);

/// Set a tension cell's zero to what it reads now, while the cords are slack
///
/// Apart from calibration: the scale stays the record's. Refused unless the cords are known to be slack and the reading
/// has settled, while a trial is open, and where the zero would leave its calibration by more than the slack threshold.
/// Old and new zero and the person are recorded, and every trial carries what holds in it. A tare holds until the daemon
/// stops. Accelerometers are never tared.
///
/// Exit code: 0 tared, 1 the daemon refused it, 2 nobody answered.
#[derive(Debug, clap::Args)]
#[command(after_help = format!("Example:\n  tautrail tare line --dir trials --person \"duty recorder\"\n\n{CAUTION}"))]
pub struct Args {
    /// The cell's channel, as the rig file names it
    channel: String,
    /// Who tares it
    #[arg(long, value_name = "NAME", default_value_t = login_name())]
    person: String,
    #[command(flatten)]
    place: FeedPlace,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let mut client = FeedClient::connect(&args.place.socket())?;
    let command = Command::Tare { id: 1, person: args.person.clone(), channel: args.channel.clone() };
    let (ok, text) = client.ask(&command, PATIENCE)?;
    if screen.json {
        screen.value(&json!({ "ok": ok, "text": text }));
    } else {
        let word = if ok { screen.toned("tared", Tone::Good) } else { screen.toned("refused", Tone::Bad) };
        screen.line(format!("{word}: {text}"));
    }
    Ok(if ok { Verdict::Done } else { Verdict::CheckFailed })
}
