//! One command to the running daemon through the feed, and its answer.

use std::time::Duration;

use serde_json::json;
use tautrail::feed::FeedClient;
use tautrail::feed::message::Command;

use super::feed_place::FeedPlace;
use super::screen::{Screen, Tone};
use super::{Failure, Verdict};

const PATIENCE: Duration = Duration::from_secs(5);

/// Sends `command` and prints the answer, `done` before it where the daemon did as asked.
pub fn ask(place: &FeedPlace, command: &Command, done: &str, screen: &Screen) -> Result<Verdict, Failure> {
    let mut client = FeedClient::connect(&place.socket())?;
    let (ok, text) = client.ask(command, PATIENCE)?;
    if screen.json {
        screen.value(&json!({ "ok": ok, "text": text }));
    } else {
        let word = if ok { screen.toned(done, Tone::Good) } else { screen.toned("refused", Tone::Bad) };
        screen.line(format!("{word}: {text}"));
    }
    Ok(if ok { Verdict::Done } else { Verdict::CheckFailed })
}
