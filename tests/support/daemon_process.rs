//! The real daemon as a child process, and what it tells.

use std::io::{BufRead, BufReader};
use std::process::{Child, Command, Stdio};
use std::sync::mpsc::{Receiver, channel};
use std::time::{Duration, Instant};

use serde::Deserialize;

/// Longer than anything waited for here, also on a busy machine.
pub const PATIENCE: Duration = Duration::from_secs(60);

/// One line of the daemon's `--json` output.
#[derive(Debug, Clone, Deserialize)]
pub struct Told {
    pub host_ns: i64,
    pub kind: String,
    pub text: String,
}

/// A running daemon. Dropped, it is killed.
pub struct Daemon {
    pub child: Child,
    lines: Receiver<Told>,
}

impl Daemon {
    pub fn start(command: &mut Command) -> Self {
        let mut child = command.stdout(Stdio::piped()).stderr(Stdio::inherit()).spawn().expect("the daemon starts");
        let stdout = BufReader::new(child.stdout.take().expect("its output"));
        let (told, lines) = channel();
        std::thread::spawn(move || {
            for line in stdout.lines().map_while(Result::ok) {
                let parsed = serde_json::from_str(&line).unwrap_or_else(|error| panic!("{error} in {line}"));
                if told.send(parsed).is_err() {
                    return;
                }
            }
        });
        Self { child, lines }
    }

    /// Waits for an event of this kind whose text holds `part`.
    #[track_caller]
    pub fn wait_for(&self, kind: &str, part: &str) -> Told {
        let deadline = Instant::now() + PATIENCE;
        let mut heard = Vec::new();
        loop {
            match self.lines.recv_timeout(deadline.saturating_duration_since(Instant::now())) {
                Ok(told) if told.kind == kind && told.text.contains(part) => return told,
                Ok(told) => heard.push(told),
                Err(_) => panic!("no {kind} event with {part:?}; heard {heard:#?}"),
            }
        }
    }

    pub fn signal(&self, signal: i32) {
        let pid = i32::try_from(self.child.id()).expect("a process id");
        // SAFETY: sends a signal to a child that was not waited for yet, so its id is still its own.
        assert_eq!(unsafe { libc::kill(pid, signal) }, 0);
    }

    /// SIGTERM, and the exit code; what it said meanwhile can still be waited for.
    pub fn stop(&mut self) -> Option<i32> {
        self.signal(libc::SIGTERM);
        self.child.wait().expect("the daemon ends").code()
    }
}

impl Drop for Daemon {
    fn drop(&mut self) {
        // Ended already, most likely.
        let _ = self.child.kill();
        let _ = self.child.wait();
    }
}
