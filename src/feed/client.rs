//! A client of the feed: display, `mark`, scripts in Rust.

use std::io::{self, BufRead, BufReader, Write};
use std::os::unix::net::UnixStream;
use std::path::{Path, PathBuf};
use std::time::Duration;

use thiserror::Error;

use super::message::{Command, FEED_VERSION, Hello, Message};

/// Longest line a client takes.
const LINE_LEN_MAX: usize = 1 << 20;
const HELLO_WITHIN: Duration = Duration::from_secs(5);

/// Why the feed cannot be followed.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum ClientError {
    #[error("feed {path}: nobody answers ({source}); is the daemon running, and is this its socket?")]
    NoDaemon { path: PathBuf, source: io::Error },
    #[error("feed {path}: no greeting within {HELLO_WITHIN:?}; is this a tautrail daemon?")]
    NoHello { path: PathBuf },
    #[error(
        "feed {path}: the daemon speaks version {found}, this program {FEED_VERSION}; use the same release for both"
    )]
    OtherVersion { path: PathBuf, found: u32 },
    #[error("feed {path}: the daemon refused: {reason}")]
    Refused { path: PathBuf, reason: String },
    #[error("feed: a line of {len} bytes, at most {LINE_LEN_MAX} are taken")]
    LineTooLong { len: usize },
    #[error("feed: no message: {source}")]
    NoMessage { source: serde_json::Error },
    #[error("feed: the daemon hung up")]
    HungUp,
    #[error("feed: {source}")]
    Io {
        #[from]
        source: io::Error,
    },
}

/// A connection to a daemon's feed.
#[derive(Debug)]
pub struct FeedClient {
    input: BufReader<UnixStream>,
    /// The beginning of a line whose end has not come yet.
    partial: Vec<u8>,
    hello: Hello,
}

impl FeedClient {
    /// Connects and takes the greeting.
    ///
    /// # Errors
    /// [`ClientError`] when nobody answers, or not as a daemon of this version does.
    pub fn connect(path: &Path) -> Result<Self, ClientError> {
        let path_buf = || path.to_owned();
        let stream = UnixStream::connect(path).map_err(|source| ClientError::NoDaemon { path: path_buf(), source })?;
        stream.set_write_timeout(Some(HELLO_WITHIN))?;
        let mut input = BufReader::new(stream);
        let mut partial = Vec::new();
        match next_message(&mut input, &mut partial, HELLO_WITHIN)? {
            Some(Message::Hello(hello)) if hello.feed_version == FEED_VERSION => Ok(Self { input, partial, hello }),
            Some(Message::Hello(hello)) => {
                Err(ClientError::OtherVersion { path: path_buf(), found: hello.feed_version })
            }
            Some(Message::Bye { reason }) => Err(ClientError::Refused { path: path_buf(), reason }),
            _ => Err(ClientError::NoHello { path: path_buf() }),
        }
    }

    /// What the daemon said of its rig.
    pub fn hello(&self) -> &Hello {
        &self.hello
    }

    /// The next message, or `None` when there was none within `patience` (at least a millisecond). Kinds of message
    /// that this version does not know are skipped.
    ///
    /// # Errors
    /// [`ClientError::HungUp`] at the end; others when the daemon does not keep to the feed's rules.
    pub fn next(&mut self, patience: Duration) -> Result<Option<Message>, ClientError> {
        next_message(&mut self.input, &mut self.partial, patience)
    }

    /// Sends a command; its reply comes among the messages.
    ///
    /// # Errors
    /// [`ClientError::Io`] when the daemon does not take it.
    pub fn send(&mut self, command: &Command) -> Result<(), ClientError> {
        let mut line = serde_json::to_vec(command).map_err(|source| ClientError::NoMessage { source })?;
        line.push(b'\n');
        Ok(self.input.get_mut().write_all(&line)?)
    }

    /// Sends a command and waits for its reply, leaving other messages aside.
    ///
    /// # Errors
    /// As [`FeedClient::send`] and [`FeedClient::next`]; no reply within `patience` is an [`ClientError::Io`].
    pub fn ask(&mut self, command: &Command, patience: Duration) -> Result<(bool, String), ClientError> {
        self.send(command)?;
        let deadline = std::time::Instant::now() + patience;
        loop {
            let left = deadline.saturating_duration_since(std::time::Instant::now());
            match self.next(left)? {
                Some(Message::Reply { id, ok, text }) if id == command.id() => return Ok((ok, text)),
                Some(Message::Bye { .. }) => return Err(ClientError::HungUp),
                _ if left.is_zero() => return Err(io::Error::from(io::ErrorKind::TimedOut).into()),
                _ => {}
            }
        }
    }
}

fn next_message(
    input: &mut BufReader<UnixStream>,
    partial: &mut Vec<u8>,
    patience: Duration,
) -> Result<Option<Message>, ClientError> {
    input.get_ref().set_read_timeout(Some(patience.max(Duration::from_millis(1))))?;
    loop {
        if !fill_line(input, partial)? {
            return Ok(None);
        }
        let line = std::mem::take(partial);
        match serde_json::from_slice::<Message>(&line) {
            Ok(message) => return Ok(Some(message)),
            Err(source) if !is_unknown_kind(&line) => return Err(ClientError::NoMessage { source }),
            Err(_) => {}
        }
    }
}

/// Reads on to the end of the line; false when the patience ran out before it.
fn fill_line(input: &mut BufReader<UnixStream>, partial: &mut Vec<u8>) -> Result<bool, ClientError> {
    loop {
        let available = match input.fill_buf() {
            Ok([]) => return Err(ClientError::HungUp),
            Ok(available) => available,
            Err(error) => {
                return match error.kind() {
                    io::ErrorKind::WouldBlock | io::ErrorKind::TimedOut => Ok(false),
                    io::ErrorKind::Interrupted => continue,
                    io::ErrorKind::ConnectionReset | io::ErrorKind::BrokenPipe => Err(ClientError::HungUp),
                    _ => Err(error.into()),
                };
            }
        };
        let end = available.iter().position(|byte| *byte == b'\n');
        let n = end.map_or(available.len(), |at| at + 1);
        partial.extend_from_slice(&available[..n]);
        input.consume(n);
        if partial.len() > LINE_LEN_MAX {
            return Err(ClientError::LineTooLong { len: partial.len() });
        }
        if end.is_some() {
            return Ok(true);
        }
    }
}

/// A later daemon may send kinds that this client does not know.
fn is_unknown_kind(line: &[u8]) -> bool {
    const KNOWN: [&str; 7] = ["hello", "snapshot", "event", "raw", "dropped", "reply", "bye"];
    let value = serde_json::from_slice::<serde_json::Value>(line).ok();
    let kind = value.as_ref().and_then(|value| value.get("type")?.as_str());
    kind.is_some_and(|kind| !KNOWN.contains(&kind))
}
