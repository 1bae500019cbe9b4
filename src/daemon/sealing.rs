//! Has trials sealed, one after the other, each in a niced child process of this same program.
//!
//! A child that fails leaves the journal as it is; the trial is tried again later, and at the next start. Children are
//! in a process group of their own, so that Ctrl-C stops the daemon and not the sealing.

use std::collections::VecDeque;
use std::io::{self, Read};
use std::os::unix::process::CommandExt;
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::sync::Arc;
use std::time::{Duration, Instant};

use crossbeam_channel::{Receiver, RecvTimeoutError, Sender, bounded, unbounded};

use crate::archive::{settle_until, settle_whole};
use crate::journal::{Disk, RealDisk};

use super::found::Unsealed;

/// How one attempt ended.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct SealReport {
    pub trial_id: String,
    /// What the child said: what was written, or why not.
    pub result: Result<String, String>,
}

/// The thread that has trials sealed. Dropped, it does what waits and then closes its reports.
#[derive(Debug)]
pub struct Sealer {
    tasks: Sender<Task>,
}

/// What the thread does, one after the other.
#[derive(Debug)]
enum Task {
    Seal(Unsealed),
    Settle(Settle),
    RetryNow,
}

/// A journal, or all of it until an instant, needs not be read at the next start.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Settle {
    Until { journal_id: String, host_ns: i64, pinned_from_seq: Option<u64>, trial_number: u32 },
    Whole { journal_id: String, trial_number: u32 },
}

/// How the child is started; the daemon's own program in earnest.
#[derive(Debug, Clone)]
pub struct SealCommand {
    pub program: PathBuf,
    pub archive_dir: PathBuf,
    /// What failed is tried again after this long, then after ever twice as long.
    pub retry_first: Duration,
}

const RETRY_FIRST: Duration = Duration::from_secs(30);
const RETRY_LAST: Duration = Duration::from_secs(600);

impl SealCommand {
    pub fn new(program: PathBuf, archive_dir: PathBuf) -> Self {
        Self { program, archive_dir, retry_first: RETRY_FIRST }
    }
}

impl Sealer {
    pub fn spawn(command: SealCommand) -> io::Result<(Self, Receiver<SealReport>)> {
        // Trials come a few an hour; both queues hold what a start after many crashes finds.
        let (tasks, tasks_end) = unbounded();
        let (reports, reports_end) = bounded(64);
        std::thread::Builder::new().name("sealing".to_owned()).spawn(move || work(&command, &tasks_end, &reports))?;
        Ok((Self { tasks }, reports_end))
    }

    pub fn seal(&self, unsealed: Unsealed) {
        // The thread ends only after this sender is gone.
        let _ = self.tasks.send(Task::Seal(unsealed));
    }

    /// What kept sealings from working is put right: those that failed are tried again at once.
    pub fn retry_now(&self) {
        let _ = self.tasks.send(Task::RetryNow);
    }

    /// Notes what the next start need not read; done between sealings.
    pub fn settle(&self, settle: Settle) {
        let _ = self.tasks.send(Task::Settle(settle));
    }
}

fn work(command: &SealCommand, tasks: &Receiver<Task>, reports: &Sender<SealReport>) {
    let mut retries: VecDeque<(Instant, Duration, Unsealed)> = VecDeque::new();
    loop {
        let (task, pause) = match next(tasks, &mut retries, command.retry_first) {
            Next::Seal(task, pause) => (task, pause),
            Next::Settle(settle) => {
                note(&command.archive_dir, &settle);
                continue;
            }
            Next::Nothing => continue,
            Next::End => return, // what failed is left to the next start
        };
        let result = seal_in_child(command, &task);
        if result.is_err() {
            retries.push_back((Instant::now() + pause, (pause * 2).min(RETRY_LAST), task.clone()));
        }
        if reports.send(SealReport { trial_id: task.trial_id, result }).is_err() {
            return;
        }
    }
}

enum Next {
    Seal(Unsealed, Duration),
    Settle(Settle),
    Nothing,
    End,
}

fn next(tasks: &Receiver<Task>, retries: &mut VecDeque<(Instant, Duration, Unsealed)>, retry_first: Duration) -> Next {
    match tasks.recv_timeout(Duration::from_millis(200)) {
        Ok(Task::Seal(task)) => Next::Seal(task, retry_first),
        Ok(Task::Settle(settle)) => Next::Settle(settle),
        Ok(Task::RetryNow) => {
            retries.iter_mut().for_each(|(at, _, _)| *at = Instant::now());
            Next::Nothing
        }
        Err(RecvTimeoutError::Disconnected) => Next::End,
        Err(RecvTimeoutError::Timeout) => {
            let due = retries.iter().position(|(at, _, _)| *at <= Instant::now());
            match due.and_then(|idx| retries.remove(idx)) {
                Some((_, pause, task)) => Next::Seal(task, pause),
                None => Next::Nothing,
            }
        }
    }
}

fn note(dir: &Path, settle: &Settle) {
    let noted = match settle {
        Settle::Until { journal_id, host_ns, pinned_from_seq, trial_number } => {
            let disk: Arc<dyn Disk> = Arc::new(RealDisk);
            settle_until(dir, journal_id, &disk, *host_ns, *pinned_from_seq, *trial_number)
        }
        Settle::Whole { journal_id, trial_number } => settle_whole(dir, journal_id, *trial_number),
    };
    if let Err(error) = noted {
        tracing::warn!("the next start reads more of the journal than it need: {error}");
    }
}

fn seal_in_child(command: &SealCommand, task: &Unsealed) -> Result<String, String> {
    let cannot = |error: io::Error| format!("cannot run the sealing process: {error}");
    let mut child = start(command, task).map_err(cannot)?;
    // Both pipes are short: the child says one sentence in all.
    let said = text_of(child.stdout.take());
    let complained = text_of(child.stderr.take());
    let status = child.wait().map_err(cannot)?;
    if status.success() {
        Ok(said)
    } else if complained.is_empty() {
        Err(format!("the sealing process ended with {status}"))
    } else {
        Err(complained)
    }
}

fn start(command: &SealCommand, task: &Unsealed) -> io::Result<Child> {
    let arg = |path: &Path| path.as_os_str().to_owned();
    Command::new(&command.program)
        .arg("seal-child")
        .args(["--from-seq", &task.first_seq.to_string()])
        .args([arg(&command.archive_dir), task.journal_id.clone().into(), task.trial_id.clone().into()])
        .process_group(0)
        .stdin(Stdio::null())
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
}

fn text_of(pipe: Option<impl Read>) -> String {
    const MOST: u64 = 1 << 16;
    let mut text = Vec::new();
    if let Some(pipe) = pipe {
        // What cannot be read is not said.
        let _ = pipe.take(MOST).read_to_end(&mut text);
    }
    String::from_utf8_lossy(&text).trim().to_owned()
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::os::unix::fs::PermissionsExt;

    /// A program that does `first` when run for the first time, then says that it sealed.
    fn program(dir: &Path, first: &str) -> PathBuf {
        let (path, mark) = (dir.join("program"), dir.join("was-run"));
        let mark = mark.display();
        std::fs::write(
            &path,
            format!("#!/bin/sh\nif [ ! -e {mark} ]; then touch {mark}; {first}; fi\necho sealed $6\n"),
        )
        .unwrap();
        std::fs::set_permissions(&path, std::fs::Permissions::from_mode(0o755)).unwrap();
        path
    }

    fn attempts(first: &str) -> Vec<Result<String, String>> {
        let dir = tempfile::tempdir().unwrap();
        let program = program(dir.path(), first);
        let command =
            SealCommand { retry_first: Duration::from_millis(1), ..SealCommand::new(program, "trials".into()) };
        let (sealer, reports) = Sealer::spawn(command).unwrap();
        let trial_id = "000001-7f3a9c".to_owned();
        sealer.seal(Unsealed { journal_id: "000001-abc123".to_owned(), trial_id, first_seq: 1, n_bytes: 0 });
        (0..2).map(|_| reports.recv_timeout(Duration::from_secs(30)).unwrap().result).collect()
    }

    #[test]
    fn a_child_that_fails_is_reported_with_its_sentence_and_tried_again() {
        let [failed, sealed] = &attempts("echo 'no room here' >&2; exit 2")[..] else { panic!("two attempts") };
        assert_eq!(failed.as_ref().unwrap_err(), "no room here");
        assert_eq!(sealed.as_ref().unwrap(), "sealed 000001-7f3a9c");
    }

    #[test]
    fn a_child_that_is_killed_is_reported_with_its_signal_and_tried_again() {
        let [failed, sealed] = &attempts("kill -9 $$")[..] else { panic!("two attempts") };
        assert!(failed.as_ref().unwrap_err().contains("signal: 9"), "{failed:?}");
        assert!(sealed.is_ok(), "{sealed:?}");
    }
}
