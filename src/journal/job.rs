//! What is done on the disk beside the thread that appends: syncs on one thread, chores (next segments, removals) on
//! another, so that a slow removal never holds up a sync.

use std::io;
use std::path::PathBuf;
use std::sync::Arc;

use super::disk::{AppendFile, Disk};

/// One piece of slow work. Plain data: a thread runs it, or a sweep does so in virtual time.
#[derive(Debug)]
pub enum Job {
    /// Make what was appended to a segment durable, its name first where that is new.
    Sync { file: Arc<dyn AppendFile>, new_in: Option<PathBuf>, n_bytes: usize },
    /// Give back what a finished segment reserved and did not use.
    Trim { file: Arc<dyn AppendFile> },
    /// Make the next segment ahead, with room reserved.
    Prepare { number: u32, path: PathBuf, reserve_bytes: u64 },
    /// Remove segments that nothing needs any more.
    Remove { paths: Vec<PathBuf> },
    /// Ask how much room there is.
    AskRoom { dir: PathBuf },
}

/// How it ended.
#[derive(Debug)]
pub enum Outcome {
    Synced {
        n_bytes: usize,
    },
    SyncFailed {
        error: io::Error,
    },
    Trimmed,
    Prepared {
        number: u32,
        path: PathBuf,
        file: Arc<dyn AppendFile>,
        reserved: Reserved,
    },
    PrepareFailed {
        path: PathBuf,
        error: io::Error,
    },
    Removed {
        failed: Vec<(PathBuf, io::Error)>,
    },
    /// `None`: the disk did not say.
    Room {
        free_bytes: Option<u64>,
    },
}

/// Whether room was set aside.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Reserved {
    Yes,
    /// This file system cannot.
    NotHere,
}

impl Job {
    /// It makes data durable: never to wait behind anything else.
    pub fn is_sync(&self) -> bool {
        matches!(self, Self::Sync { .. })
    }

    /// Does the work; blocks as long as the disk takes.
    pub fn run(self, disk: &dyn Disk) -> Outcome {
        match self {
            Self::Sync { file, new_in, n_bytes } => {
                match new_in.map_or(Ok(()), |dir| disk.sync_dir(&dir)).and_then(|()| file.sync()) {
                    Ok(()) => Outcome::Synced { n_bytes },
                    Err(error) => Outcome::SyncFailed { error },
                }
            }
            Self::Trim { file } => {
                // Only gives back room: what stays reserved is counted against the budget.
                let _ = file.trim();
                Outcome::Trimmed
            }
            Self::Prepare { number, path, reserve_bytes } => match make(disk, &path, reserve_bytes) {
                Ok((file, reserved)) => Outcome::Prepared { number, path, file, reserved },
                Err(error) => Outcome::PrepareFailed { path, error },
            },
            Self::AskRoom { dir } => Outcome::Room { free_bytes: disk.free_bytes(&dir).ok() },
            Self::Remove { paths } => Outcome::Removed {
                failed: paths
                    .into_iter()
                    .filter_map(|path| disk.remove(&path).err().map(|error| (path, error)))
                    .collect(),
            },
        }
    }
}

/// Creates a segment file with room for `reserve_bytes`; leaves nothing behind when there is no room.
pub(super) fn make(
    disk: &dyn Disk,
    path: &std::path::Path,
    reserve_bytes: u64,
) -> io::Result<(Arc<dyn AppendFile>, Reserved)> {
    let file = disk.create_new(path)?;
    match file.reserve(reserve_bytes) {
        Ok(()) => Ok((file, Reserved::Yes)),
        Err(error) if error.kind() == io::ErrorKind::Unsupported => Ok((file, Reserved::NotHere)),
        Err(error) => {
            drop(file);
            // Still there, it is an empty file, which readers leave out.
            let _ = disk.remove(path);
            Err(error)
        }
    }
}
