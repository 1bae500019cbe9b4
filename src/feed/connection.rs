//! One client: a thread that writes its outbox and one that reads its commands.
//!
//! A client that takes nothing for [`WRITE_TIMEOUT`] is cut. Input lines have a limit; a client that keeps sending what
//! is no command is cut too. Neither ever makes a publisher or another client wait.

use std::io::{self, BufRead, BufReader, Read, Write};
use std::net::Shutdown;
use std::os::unix::net::UnixStream;
use std::sync::Arc;
use std::time::{Duration, Instant};

use crossbeam_channel::{Sender, TrySendError};

use super::message::{Command, Message};
use super::outbox::{Line, Next, Outbox, Replier, Request};

pub const WRITE_TIMEOUT: Duration = Duration::from_secs(2);
/// Longest command line, newline included.
pub const LINE_LEN_MAX: u64 = 4096;
/// A client may be wrong this often.
const N_BAD_LINES_MAX: u32 = 20;

/// Writes the outbox until it is closed and empty, or the client takes no more; then hangs up.
pub fn write_out(stream: &UnixStream, outbox: &Outbox) {
    while let Next::Write { n_dropped, line } = outbox.next() {
        let told = if n_dropped == 0 { Ok(()) } else { write_dropped(stream, n_dropped) };
        if told.and_then(|()| write_line(stream, line.text.as_bytes())).is_err() {
            break;
        }
    }
    outbox.abandon();
    // The reader may be waiting for input; a failure means that the client is gone already.
    let _ = stream.shutdown(Shutdown::Both);
}

fn write_dropped(stream: &UnixStream, n: u64) -> io::Result<()> {
    match Line::of(&Message::Dropped { n }) {
        Some(line) => write_line(stream, line.text.as_bytes()),
        None => Ok(()),
    }
}

/// Writes the whole line or fails within the timeout, however little the client takes at a time.
fn write_line(mut stream: &UnixStream, mut bytes: &[u8]) -> io::Result<()> {
    let deadline = Instant::now() + WRITE_TIMEOUT;
    while !bytes.is_empty() {
        let left = deadline.saturating_duration_since(Instant::now());
        if left.is_zero() {
            return Err(io::ErrorKind::TimedOut.into());
        }
        stream.set_write_timeout(Some(left))?;
        match stream.write(bytes) {
            Ok(0) => return Err(io::ErrorKind::WriteZero.into()),
            Ok(n) => bytes = &bytes[n..],
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(())
}

/// Reads commands until the client sends no more or is cut, and hands them to the daemon. A client that has only closed
/// its own sending side goes on receiving; one that is gone is noticed by the writer.
pub fn read_in(stream: &UnixStream, outbox: &Arc<Outbox>, requests: &Sender<Request>) {
    let mut input = BufReader::new(stream);
    let mut n_bad = 0;
    while n_bad < N_BAD_LINES_MAX && !outbox.is_closed() {
        let mut line = Vec::new();
        match input.by_ref().take(LINE_LEN_MAX).read_until(b'\n', &mut line) {
            Ok(0) => return,
            Err(_) => break,
            Ok(_) if line.last() != Some(&b'\n') => {
                // Cut off by the limit or by the client's end; what follows cannot be understood.
                reply(outbox, 0, format!("no command: a line has at most {LINE_LEN_MAX} bytes and ends in a newline"));
                break;
            }
            Ok(_) => n_bad += u32::from(!take_line(&line, outbox, requests)),
        }
    }
    outbox.close();
}

fn take_line(line: &[u8], outbox: &Arc<Outbox>, requests: &Sender<Request>) -> bool {
    let command = match serde_json::from_slice::<Command>(line) {
        Ok(command) => command,
        Err(error) => {
            let id = serde_json::from_slice::<serde_json::Value>(line).ok();
            let id = id.and_then(|value| value.get("id")?.as_u64()).unwrap_or(0);
            reply(outbox, id, format!("no command: {error}"));
            return false;
        }
    };
    let replier = Replier::new(command.id(), outbox.clone());
    match requests.try_send(Request { command, replier }) {
        Ok(()) => {}
        Err(TrySendError::Full(request)) => request.replier.answer(false, "too many commands are waiting: try again"),
        Err(TrySendError::Disconnected(request)) => request.replier.answer(false, "the daemon stops"),
    }
    true
}

fn reply(outbox: &Outbox, id: u64, text: String) {
    if let Some(line) = Line::of(&Message::Reply { id, ok: false, text }) {
        outbox.push(line);
    }
}
