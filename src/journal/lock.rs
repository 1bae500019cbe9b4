//! One daemon an archive directory: a lock file that the kernel releases when its holder dies.

use std::fs::{File, OpenOptions};
use std::io::{self, Read, Seek, Write};
use std::path::{Path, PathBuf};

use rustix::fs::FlockOperation;

/// Holds the directory until dropped, or until the process ends in whatever way.
#[derive(Debug)]
pub struct ArchiveLock {
    _file: File,
}

#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum LockError {
    #[error("{dir} is held by another tautrail process ({holder}); stop that one or give another directory")]
    Held { dir: PathBuf, holder: String },
    #[error("cannot write in {dir}: {source}; give a directory that this user may write")]
    NotWritable { dir: PathBuf, source: io::Error },
}

impl ArchiveLock {
    /// Takes the lock and leaves `holder` (one line: who, since when) for whoever comes second.
    ///
    /// # Errors
    /// [`LockError::Held`] with the other's line; [`LockError::NotWritable`] when the lock file cannot be made.
    pub fn take(dir: &Path, holder: &str) -> Result<Self, LockError> {
        let unwritable = |source| LockError::NotWritable { dir: dir.to_owned(), source };
        let path = dir.join("daemon.lock");
        let mut file = OpenOptions::new()
            .read(true)
            .write(true)
            .create(true)
            .truncate(false) // the text in it is the holder's
            .open(&path)
            .map_err(unwritable)?;
        match rustix::fs::flock(&file, FlockOperation::NonBlockingLockExclusive) {
            Ok(()) => {}
            Err(rustix::io::Errno::WOULDBLOCK) => {
                let mut holder = String::new();
                // The text is a courtesy: unreadable, the lock is held all the same.
                let _ = file.take(200).read_to_string(&mut holder);
                let holder = holder.lines().next().unwrap_or("which did not say who it is").to_owned();
                return Err(LockError::Held { dir: dir.to_owned(), holder });
            }
            Err(error) => return Err(unwritable(error.into())),
        }
        file.set_len(0).map_err(unwritable)?;
        file.rewind().map_err(unwritable)?;
        writeln!(file, "{holder}").map_err(unwritable)?;
        Ok(Self { _file: file })
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_second_is_told_who_holds_the_directory() {
        let dir = tempfile::tempdir().unwrap();
        let first = ArchiveLock::take(dir.path(), "process 12, rig north-pier").unwrap();
        let error = ArchiveLock::take(dir.path(), "process 13").unwrap_err();
        assert!(error.to_string().contains("process 12, rig north-pier"), "{error}");
        drop(first);
        ArchiveLock::take(dir.path(), "process 13").unwrap();
    }

    #[test]
    fn a_directory_that_is_not_there_is_named() {
        let dir = tempfile::tempdir().unwrap();
        let error = ArchiveLock::take(&dir.path().join("none"), "x").unwrap_err();
        assert!(error.to_string().contains("none"), "{error}");
    }
}
