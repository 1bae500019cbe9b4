//! The rehearsal's processes: the virtual rig behind its ptys, the real daemon, the display on request.
//!
//! Each is this very binary, started as a crew would start it. None outlives the rehearsal.

use std::ffi::OsStr;
use std::io;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, ExitStatus, Stdio};
use std::thread;
use std::time::{Duration, Instant};

use rustix::process::{Pid, Signal, kill_process};
use thiserror::Error;

const POLL: Duration = Duration::from_millis(50);

#[derive(Debug, Error)]
pub enum TroupeError {
    #[error("can't start the {who}: {source}")]
    Start { who: &'static str, source: io::Error },
    #[error("the {who} ended too early ({status}); its log {} ends with: {last_words}", log.display())]
    EndedEarly { who: &'static str, status: ExitStatus, log: PathBuf, last_words: String },
    #[error("the {who} did not end within {} s; its log is {}", patience.as_secs(), log.display())]
    DidNotEnd { who: &'static str, patience: Duration, log: PathBuf },
    #[error("the {who} ended with {status}; its log is {}", log.display())]
    Failed { who: &'static str, status: ExitStatus, log: PathBuf },
    #[error("waiting for the {who}: {source}")]
    Wait { who: &'static str, source: io::Error },
}

/// A process of the rehearsal; killed if it is dropped while it still runs.
#[derive(Debug)]
pub struct Player {
    who: &'static str,
    child: Child,
    log: PathBuf,
}

impl Player {
    /// Starts this binary with `args`, its output in `log`.
    pub fn start<S: AsRef<OsStr>>(who: &'static str, args: &[S], log: PathBuf) -> Result<Self, TroupeError> {
        let failed = |source| TroupeError::Start { who, source };
        let file = std::fs::File::create(&log).map_err(failed)?;
        let twin = file.try_clone().map_err(failed)?;
        Self::spawn(who, args, log, file.into(), twin.into())
    }

    /// Starts this binary with `args` on the terminal of the rehearsal.
    pub fn start_on_terminal<S: AsRef<OsStr>>(who: &'static str, args: &[S]) -> Result<Self, TroupeError> {
        Self::spawn(who, args, PathBuf::from("the terminal"), Stdio::inherit(), Stdio::inherit())
    }

    fn spawn<S: AsRef<OsStr>>(
        who: &'static str,
        args: &[S],
        log: PathBuf,
        out: Stdio,
        err: Stdio,
    ) -> Result<Self, TroupeError> {
        let start = |source| TroupeError::Start { who, source };
        let program = std::env::current_exe().map_err(start)?;
        let child = Command::new(program).args(args).stdout(out).stderr(err).spawn().map_err(start)?;
        Ok(Self { who, child, log })
    }

    /// An error when the process is gone already.
    pub fn must_run(&mut self) -> Result<(), TroupeError> {
        match self.status()? {
            None => Ok(()),
            Some(status) => {
                let (log, last_words) = (self.log.clone(), last_words(&self.log));
                Err(TroupeError::EndedEarly { who: self.who, status, log, last_words })
            }
        }
    }

    /// `None` while it runs.
    pub fn status(&mut self) -> Result<Option<ExitStatus>, TroupeError> {
        self.child.try_wait().map_err(|source| TroupeError::Wait { who: self.who, source })
    }

    /// Asks it to end, as an operator or the service manager would.
    pub fn ask_to_end(&self) {
        if let Some(pid) = i32::try_from(self.child.id()).ok().and_then(Pid::from_raw) {
            // One that is gone already needs no asking.
            let _ = kill_process(pid, Signal::TERM);
        }
    }

    /// Waits for a good end.
    pub fn end(mut self, patience: Duration) -> Result<(), TroupeError> {
        let deadline = Instant::now() + patience;
        while Instant::now() < deadline {
            match self.status()? {
                Some(status) if status.success() => return Ok(()),
                Some(status) => return Err(TroupeError::Failed { who: self.who, status, log: self.log.clone() }),
                None => thread::sleep(POLL),
            }
        }
        Err(TroupeError::DidNotEnd { who: self.who, patience, log: self.log.clone() })
    }
}

impl Drop for Player {
    fn drop(&mut self) {
        if matches!(self.child.try_wait(), Ok(None)) {
            let _ = self.child.kill();
            let _ = self.child.wait();
        }
    }
}

/// The last line of a log; empty where there is none.
fn last_words(log: &Path) -> String {
    let text = std::fs::read_to_string(log).unwrap_or_default();
    text.lines().rev().find(|line| !line.trim().is_empty()).unwrap_or_default().to_owned()
}

/// Polls until `ready`; false when the patience ran out.
pub fn wait_until<E>(patience: Duration, mut ready: impl FnMut() -> Result<bool, E>) -> Result<bool, E> {
    let deadline = Instant::now() + patience;
    loop {
        if ready()? {
            return Ok(true);
        }
        if Instant::now() >= deadline {
            return Ok(false);
        }
        thread::sleep(POLL);
    }
}
