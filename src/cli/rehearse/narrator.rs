//! Tells a person what the daemon reports while the rehearsal runs.

use std::path::Path;
use std::time::{Duration, Instant};

use tautrail::feed::message::{Event, Message};
use tautrail::feed::{ClientError, FeedClient};

use crate::cli::screen::Screen;

/// Follows the feed and prints each event once; silent for JSON and beside the display.
#[derive(Debug)]
pub struct Narrator {
    client: FeedClient,
    screen: Screen,
    silent: bool,
    first_host_ns: Option<i64>,
}

impl Narrator {
    pub fn join(socket: &Path, screen: Screen, silent: bool) -> Result<Self, ClientError> {
        Ok(Self { client: FeedClient::connect(socket)?, screen, silent, first_host_ns: None })
    }

    /// Prints what arrives during `span`.
    pub fn listen(&mut self, span: Duration) -> Result<(), ClientError> {
        let end = Instant::now() + span;
        loop {
            let left = end.saturating_duration_since(Instant::now());
            if left.is_zero() {
                return Ok(());
            }
            match self.client.next(left)? {
                Some(Message::Snapshot(snapshot)) => {
                    self.first_host_ns.get_or_insert(snapshot.host_ns);
                }
                Some(Message::Event(event)) if !self.silent => self.tell(&event),
                _ => {}
            }
        }
    }

    fn tell(&mut self, event: &Event) {
        let since_s = (event.host_ns - *self.first_host_ns.get_or_insert(event.host_ns)) as f64 * 1e-9;
        self.screen.line(format!("  {since_s:5.1} s  {:8} {}", event.kind, event.text));
    }
}
