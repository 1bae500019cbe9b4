//! Where a command finds the running daemon's feed, and in whose name it speaks there.

use std::path::PathBuf;

use tautrail::feed::SOCKET_NAME;

/// The daemon to talk to.
#[derive(Debug, clap::Args)]
pub struct FeedPlace {
    /// The directory that the daemon records into
    #[arg(long, value_name = "DIR", default_value = ".")]
    dir: PathBuf,
    /// The daemon's feed socket, where it is not in that directory
    #[arg(long, value_name = "PATH", conflicts_with = "dir")]
    socket: Option<PathBuf>,
}

impl FeedPlace {
    pub fn socket(&self) -> PathBuf {
        self.socket.clone().unwrap_or_else(|| self.dir.join(SOCKET_NAME))
    }
}

/// The login name, for who did not say who they are.
pub fn login_name() -> String {
    std::env::var("USER").ok().filter(|name| !name.is_empty()).unwrap_or_else(|| String::from("unnamed"))
}
