//! The Unix socket: bound so that a socket left behind by a killed daemon is replaced and a living one is not.

use std::io;
use std::os::unix::fs::{FileTypeExt, PermissionsExt};
use std::os::unix::net::{UnixListener, UnixStream};
use std::path::{Path, PathBuf};

use thiserror::Error;

/// `sun_path` less its closing zero (unix(7)).
const PATH_LEN_MAX: usize = 107;
/// Owner and group read and write.
const MODE: u32 = 0o660;

/// Why the feed cannot be served.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum FeedError {
    #[error("feed socket {path}: the path has {len} bytes, at most {PATH_LEN_MAX} fit; choose a shorter one")]
    PathTooLong { path: PathBuf, len: usize },
    #[error("feed socket {path}: another daemon answers there; stop it or choose another socket")]
    InUse { path: PathBuf },
    #[error("feed socket {path}: something that is no socket is there; remove it or choose another path")]
    NotASocket { path: PathBuf },
    #[error("feed socket {path}: {source}")]
    Io { path: PathBuf, source: io::Error },
}

/// Binds the socket at `path`, owner and group only.
///
/// # Errors
/// [`FeedError`], naming the path.
pub fn bind(path: &Path) -> Result<UnixListener, FeedError> {
    let io = |source| FeedError::Io { path: path.to_owned(), source };
    let len = path.as_os_str().len();
    if len > PATH_LEN_MAX {
        return Err(FeedError::PathTooLong { path: path.to_owned(), len });
    }
    clear_stale(path)?;
    let listener = UnixListener::bind(path).map_err(io)?;
    std::fs::set_permissions(path, std::fs::Permissions::from_mode(MODE)).map_err(io)?;
    Ok(listener)
}

fn clear_stale(path: &Path) -> Result<(), FeedError> {
    let io = |source| FeedError::Io { path: path.to_owned(), source };
    let kind = match std::fs::symlink_metadata(path) {
        Ok(metadata) => metadata.file_type(),
        Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(()),
        Err(error) => return Err(io(error)),
    };
    if !kind.is_socket() {
        return Err(FeedError::NotASocket { path: path.to_owned() });
    }
    match UnixStream::connect(path) {
        Err(error) if error.kind() == io::ErrorKind::ConnectionRefused => std::fs::remove_file(path).map_err(io),
        Err(error) if error.kind() == io::ErrorKind::NotFound => Ok(()),
        Err(error) => Err(io(error)),
        Ok(_) => Err(FeedError::InUse { path: path.to_owned() }),
    }
}
