//! Why a daemon does not run.

use std::io;
use std::path::PathBuf;

use crate::feed::FeedError;
use crate::journal::{LockError, ReadError, RecorderPanicked, StartError};
use crate::link::{LinksError, PortError};

#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum DaemonError {
    #[error("cannot make or write the archive directory {dir}: {source}; give a directory that this user may write")]
    Directory { dir: PathBuf, source: io::Error },
    #[error(transparent)]
    Lock(#[from] LockError),
    #[error("device {device}: {source}; to wait for it, start with --wait-for-ports")]
    Port { device: String, source: PortError },
    #[error(transparent)]
    Read(#[from] ReadError),
    #[error(transparent)]
    Journal(#[from] StartError),
    #[error(transparent)]
    Feed(#[from] FeedError),
    #[error(transparent)]
    Links(#[from] LinksError),
    #[error(transparent)]
    Recorder(#[from] RecorderPanicked),
    #[error("the machine gives no {what}: {source}")]
    Machine { what: &'static str, source: io::Error },
    #[error("the {thread} thread ended by itself; this is a fault of the program, the journal holds what came before")]
    ThreadEnded { thread: &'static str },
    #[error(
        "none of the {n_ports} ports can be opened: all are in use by another program; close that one (another tautrail \
         daemon?) or start with --wait-for-ports"
    )]
    PortsBusy { n_ports: usize },
    #[error("the last records could not be made durable on the disk in {dir}; the journal may miss its end")]
    NotDurable { dir: PathBuf },
}
