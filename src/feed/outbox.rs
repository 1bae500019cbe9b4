//! What waits for one client, bounded: when it is full the oldest snapshot goes, then the oldest line, and is counted.

use std::collections::VecDeque;
use std::sync::{Arc, Condvar, Mutex, MutexGuard, PoisonError};
use std::time::Duration;

use super::message::{Command, Message};

/// About 8 s of snapshots.
pub const N_LINES_MAX: usize = 256;

/// One message as it goes over the wire, newline included; shared by all clients.
#[derive(Debug, Clone)]
pub struct Line {
    pub text: Arc<str>,
    /// A newer one replaces it.
    pub is_snapshot: bool,
}

impl Line {
    /// `None` only if the message holds what JSON cannot (it never does; not finite numbers become null).
    pub fn of(message: &Message) -> Option<Self> {
        let mut text = serde_json::to_string(message).ok()?;
        text.push('\n');
        Some(Self { text: text.into(), is_snapshot: matches!(message, Message::Snapshot(_)) })
    }
}

#[derive(Debug, Default)]
struct State {
    lines: VecDeque<Line>,
    n_dropped: u64,
    closed: bool,
}

/// The queue between publishers and one client's writer.
#[derive(Debug, Default)]
pub struct Outbox {
    state: Mutex<State>,
    filled: Condvar,
}

/// What the writer does next.
#[derive(Debug)]
pub enum Next {
    /// Tell the client how many were left out, when that is not zero, then write the line.
    Write { n_dropped: u64, line: Line },
    /// Closed and empty.
    End,
}

impl Outbox {
    fn lock(&self) -> MutexGuard<'_, State> {
        // A panic while holding the lock leaves a queue that is whole: every change to it is one call.
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// Never waits for the client.
    pub fn push(&self, line: Line) {
        let mut state = self.lock();
        if state.closed {
            return;
        }
        if state.lines.len() >= N_LINES_MAX {
            let oldest_snapshot = state.lines.iter().position(|waiting| waiting.is_snapshot);
            state.lines.remove(oldest_snapshot.unwrap_or(0));
            state.n_dropped += 1;
        }
        state.lines.push_back(line);
        self.filled.notify_one();
    }

    /// Waits for something to write.
    pub fn next(&self) -> Next {
        let mut state = self.lock();
        loop {
            if let Some(line) = state.lines.pop_front() {
                return Next::Write { n_dropped: std::mem::take(&mut state.n_dropped), line };
            }
            if state.closed {
                return Next::End;
            }
            state = self.filled.wait(state).unwrap_or_else(PoisonError::into_inner);
        }
    }

    /// No more lines are taken; those waiting are still handed out.
    pub fn close(&self) {
        self.lock().closed = true;
        self.filled.notify_all();
    }

    /// No more lines are taken and those waiting are thrown away.
    pub fn abandon(&self) {
        let mut state = self.lock();
        state.closed = true;
        state.lines.clear();
        self.filled.notify_all();
    }

    pub fn is_closed(&self) -> bool {
        self.lock().closed
    }

    /// Waits until the writer has taken everything, at most `patience`.
    pub fn wait_empty(&self, patience: Duration) {
        let deadline = std::time::Instant::now() + patience;
        while !self.lock().lines.is_empty() && std::time::Instant::now() < deadline {
            std::thread::sleep(Duration::from_millis(5));
        }
    }
}

/// A command from a client, and the way to answer it.
#[derive(Debug)]
pub struct Request {
    pub command: Command,
    pub replier: Replier,
}

/// Answers one command, once. Dropped unused, it tells the client that nobody answered.
#[derive(Debug)]
pub struct Replier {
    id: u64,
    outbox: Option<Arc<Outbox>>,
}

impl Replier {
    pub(super) fn new(id: u64, outbox: Arc<Outbox>) -> Self {
        Self { id, outbox: Some(outbox) }
    }

    pub fn answer(mut self, ok: bool, text: impl Into<String>) {
        self.send(ok, text.into());
    }

    fn send(&mut self, ok: bool, text: String) {
        let Some(outbox) = self.outbox.take() else { return };
        if let Some(line) = Line::of(&Message::Reply { id: self.id, ok, text }) {
            outbox.push(line);
        }
    }
}

impl Drop for Replier {
    fn drop(&mut self) {
        self.send(false, String::from("the daemon did not answer this command"));
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn line(text: &str, is_snapshot: bool) -> Line {
        Line { text: text.into(), is_snapshot }
    }

    #[test]
    fn a_full_outbox_gives_up_snapshots_before_events_and_counts_them() {
        let outbox = Outbox::default();
        outbox.push(line("event", false));
        for n in 0..N_LINES_MAX + 9 {
            outbox.push(line(&format!("snapshot {n}"), true));
        }
        let Next::Write { n_dropped, line } = outbox.next() else { panic!("nothing to write") };
        assert_eq!((n_dropped, &*line.text), (10, "event"));
        let Next::Write { n_dropped, line } = outbox.next() else { panic!("nothing to write") };
        assert_eq!((n_dropped, &*line.text), (0, "snapshot 10"));
    }

    #[test]
    fn an_outbox_full_of_events_gives_up_the_oldest() {
        let outbox = Outbox::default();
        for n in 0..=N_LINES_MAX {
            outbox.push(line(&n.to_string(), false));
        }
        let Next::Write { n_dropped, line } = outbox.next() else { panic!("nothing to write") };
        assert_eq!((n_dropped, &*line.text), (1, "1"));
    }

    #[test]
    fn a_command_nobody_answers_is_answered_as_such() {
        let outbox = Arc::new(Outbox::default());
        drop(Replier::new(7, outbox.clone()));
        let Next::Write { line, .. } = outbox.next() else { panic!("nothing to write") };
        let reply: Message = serde_json::from_str(&line.text).unwrap();
        assert!(matches!(reply, Message::Reply { id: 7, ok: false, .. }));
    }
}
