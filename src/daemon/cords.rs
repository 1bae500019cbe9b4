//! Has the archive's trials counted for each cord, in a niced child process of this same program, one count at a time.
//!
//! Reading trials takes long and is HDF5's work, so it is done neither here nor in the thread that asks. A count that fails
//! is told; nothing stands in for it.

use std::collections::BTreeMap;
use std::io;
use std::os::unix::process::CommandExt;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

use crossbeam_channel::{Receiver, Sender, TrySendError, bounded};

use crate::rig::Served;

/// What each cord has served by the archive's trials, by serial; or why it can't be told.
pub type Count = Result<BTreeMap<String, Served>, String>;

/// The thread that waits for counting children. Dropped, it ends after the count under way.
#[derive(Debug)]
pub struct CordCounter {
    asks: Sender<()>,
}

impl CordCounter {
    pub fn spawn(program: PathBuf, archive_dir: PathBuf) -> io::Result<(Self, Receiver<Count>)> {
        // One count waits behind the one under way: it will see every trial that was asked for.
        let ((asks, asked), (counts, counted)) = (bounded(1), bounded(4));
        std::thread::Builder::new().name("cords".to_owned()).spawn(move || {
            while asked.recv().is_ok() {
                if counts.send(count_in_child(&program, &archive_dir)).is_err() {
                    return;
                }
            }
        })?;
        Ok((Self { asks }, counted))
    }

    /// Asks for a count of what the archive holds by now.
    pub fn count(&self) {
        match self.asks.try_send(()) {
            // One that waits already will do; a thread that has ended said why by closing its counts.
            Ok(()) | Err(TrySendError::Full(()) | TrySendError::Disconnected(())) => {}
        }
    }
}

fn count_in_child(program: &Path, archive_dir: &Path) -> Count {
    let ran = Command::new(program)
        .arg("count-cords")
        .arg(archive_dir)
        .process_group(0)
        .stdin(Stdio::null())
        .output()
        .map_err(|error| format!("cannot run the counting process: {error}"))?;
    if !ran.status.success() {
        let complaint = String::from_utf8_lossy(&ran.stderr).trim().to_owned();
        return Err(if complaint.is_empty() {
            format!("the counting process ended with {}", ran.status)
        } else {
            complaint
        });
    }
    serde_json::from_slice(&ran.stdout).map_err(|error| format!("the counting process said something else: {error}"))
}

#[cfg(test)]
mod tests {
    use std::time::Duration;

    use super::*;

    fn counted_by(script: &str) -> Count {
        use std::os::unix::fs::PermissionsExt;
        let dir = tempfile::tempdir().unwrap();
        let program = dir.path().join("program");
        std::fs::write(&program, format!("#!/bin/sh\n{script}\n")).unwrap();
        std::fs::set_permissions(&program, std::fs::Permissions::from_mode(0o700)).unwrap();
        let (counter, counted) = CordCounter::spawn(program, "trials".into()).unwrap();
        counter.count();
        counted.recv_timeout(Duration::from_secs(30)).unwrap()
    }

    #[test]
    fn what_the_child_counted_is_handed_on_and_its_complaint_too() {
        let served = counted_by("echo '{\"7-01\":{\"cycles\":3,\"hours\":0.25}}'").unwrap();
        assert_eq!(served["7-01"], Served { cycles: 3, hours: 0.25 });
        assert_eq!(counted_by("echo trials is gone >&2; exit 2").unwrap_err(), "trials is gone");
        assert!(counted_by("exit 3").unwrap_err().contains("ended with exit status: 3"));
        assert!(counted_by("echo nonsense").unwrap_err().contains("something else"));
    }
}
