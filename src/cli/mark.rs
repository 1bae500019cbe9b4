//! `tautrail mark`: a note into the journal and the open trial, through the feed.

use std::time::Duration;

use serde_json::json;
use tautrail::feed::FeedClient;
use tautrail::feed::message::Command;

use super::feed_place::{FeedPlace, login_name};
use super::screen::{Screen, Tone};
use super::{Failure, Verdict};

const PATIENCE: Duration = Duration::from_secs(5);

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
    let mut client = FeedClient::connect(&args.place.socket())?;
    let command = Command::Mark { id: 1, person: args.person.clone(), text: args.text.join(" ") };
    let (ok, text) = client.ask(&command, PATIENCE)?;
    if screen.json {
        screen.value(&json!({ "ok": ok, "text": text }));
    } else {
        let word = if ok { screen.toned("noted", Tone::Good) } else { screen.toned("refused", Tone::Bad) };
        screen.line(format!("{word}: {text}"));
    }
    Ok(if ok { Verdict::Done } else { Verdict::CheckFailed })
}
