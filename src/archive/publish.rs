//! Makes a finished file public: read back, synced, renamed without replacing, directory synced. Until then it has a
//! temporary name in the same directory, and whatever goes wrong it is removed.

use std::fs::{File, Permissions};
use std::io::{self, Read};
use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};

use crate::journal::Disk;

use super::error::SealError;

const PART_SUFFIX: &str = ".part";

/// A file under a temporary name; removed when dropped unless it was published.
#[derive(Debug)]
pub(super) struct Part<'d> {
    disk: &'d dyn Disk,
    path: PathBuf,
    published: bool,
}

/// How a file became public.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Published {
    New,
    /// The very same bytes were there already.
    AlreadyThere,
}

impl<'d> Part<'d> {
    /// A temporary name beside `dir/<stem>.h5` that names this process, so that two never meet on one file.
    pub(super) fn new(disk: &'d dyn Disk, dir: &Path, stem: &str) -> Result<Self, SealError> {
        remove_stale(disk, dir, stem)?;
        let path = dir.join(format!(".{stem}.{}{PART_SUFFIX}", std::process::id()));
        Ok(Self { disk, path, published: false })
    }

    pub(super) fn path(&self) -> &Path {
        &self.path
    }

    /// Gives the file its name for good.
    ///
    /// # Errors
    /// [`SealError::Differs`] if the name is taken by other content; the disk's. The part is removed then.
    pub(super) fn publish(mut self, target: &Path) -> Result<Published, SealError> {
        if target.exists() {
            return self.is_there_already(target);
        }
        let at = |doing, path: &Path| {
            let path = path.to_owned();
            move |source| SealError::Io { doing, path, source }
        };
        std::fs::set_permissions(&self.path, Permissions::from_mode(0o444)).map_err(at("protect", &self.path))?;
        self.disk.sync_file(&self.path).map_err(at("sync", &self.path))?;
        match self.disk.rename_noreplace(&self.path, target) {
            // Two seal the same trial at once, after a daemon died and left its child: the first one's file stands.
            Err(error) if error.kind() == io::ErrorKind::AlreadyExists => return self.is_there_already(target),
            renamed => renamed.map_err(at("rename to", target))?,
        }
        self.published = true;
        let dir = target.parent().unwrap_or(Path::new("."));
        self.disk.sync_dir(dir).map_err(at("sync", dir))?;
        Ok(Published::New)
    }

    fn is_there_already(&self, target: &Path) -> Result<Published, SealError> {
        if !same_bytes(&self.path, target)? {
            return Err(SealError::Differs { path: target.to_owned() });
        }
        // Whoever put it there may have died, or failed, before its name was durable; the journal is let go after this.
        let dir = target.parent().unwrap_or(Path::new("."));
        self.disk.sync_dir(dir).map_err(|source| SealError::Io { doing: "sync", path: dir.to_owned(), source })?;
        Ok(Published::AlreadyThere)
    }
}

impl Drop for Part<'_> {
    fn drop(&mut self) {
        if !self.published {
            // Left behind, it is removed by the next sealing of the trial.
            let _ = self.disk.remove(&self.path);
        }
    }
}

/// Removes what killed sealings left in `dir`, and makes durable what they had published: whoever finds a trial sealed
/// lets its journal go, and the one who sealed it may have died before its name was on the disk.
///
/// # Errors
/// The disk's. A part that cannot be removed only takes room.
pub fn clear_up(disk: &dyn Disk, dir: &Path) -> io::Result<()> {
    for path in stale_parts(disk, dir)? {
        // The next start tries again.
        let _ = disk.remove(&path);
    }
    disk.sync_dir(dir)
}

/// Removes what a killed sealing of the same trial left.
fn remove_stale(disk: &dyn Disk, dir: &Path, stem: &str) -> Result<(), SealError> {
    let failed = |doing, path: &Path| {
        let path = path.to_owned();
        move |source| SealError::Io { doing, path, source }
    };
    let prefix = format!(".{stem}.");
    let of_trial = |path: &&PathBuf| path.file_name().is_some_and(|name| name.to_string_lossy().starts_with(&prefix));
    let stale = stale_parts(disk, dir).map_err(failed("list", dir))?;
    stale.iter().filter(of_trial).try_for_each(|path| disk.remove(path).map_err(failed("remove", path)))
}

/// Temporary files `.trial-….PID.part` whose process is gone, or is this one from an attempt before.
fn stale_parts(disk: &dyn Disk, dir: &Path) -> io::Result<Vec<PathBuf>> {
    let pid_of = |name: &str| name.strip_prefix(".trial-")?.strip_suffix(PART_SUFFIX)?.rsplit_once('.')?.1.parse().ok();
    let is_stale =
        |name: &str| pid_of(name).is_some_and(|pid: i32| pid == std::process::id() as i32 || !is_running(pid));
    let listed = disk.list(dir)?;
    Ok(listed.into_iter().filter(|file| is_stale(&file.name)).map(|file| dir.join(file.name)).collect())
}

fn is_running(pid: i32) -> bool {
    let exists = rustix::process::Pid::from_raw(pid)
        .is_some_and(|pid| !matches!(rustix::process::test_kill_process(pid), Err(rustix::io::Errno::SRCH)));
    exists && !has_ended(pid)
}

/// Killed, but nobody has asked for its end yet: it writes no more (proc(5), the third field of `stat`).
fn has_ended(pid: i32) -> bool {
    let stat = std::fs::read_to_string(format!("/proc/{pid}/stat")).unwrap_or_default();
    stat.rsplit_once(") ").is_some_and(|(_, after_name)| after_name.starts_with(['Z', 'X']))
}

fn same_bytes(a: &Path, b: &Path) -> Result<bool, SealError> {
    let open =
        |path: &Path| File::open(path).map_err(|source| SealError::Io { doing: "read", path: path.to_owned(), source });
    let (mut one, mut two) = (open(a)?, open(b)?);
    let mut buffers = (vec![0; 1 << 16], vec![0; 1 << 16]);
    loop {
        let read = |file: &mut File, into: &mut [u8], path: &Path| {
            read_fully(file, into).map_err(|source| SealError::Io { doing: "read", path: path.to_owned(), source })
        };
        let (n, m) = (read(&mut one, &mut buffers.0, a)?, read(&mut two, &mut buffers.1, b)?);
        if buffers.0[..n] != buffers.1[..m] {
            return Ok(false);
        }
        if n == 0 {
            return Ok(true);
        }
    }
}

fn read_fully(file: &mut File, into: &mut [u8]) -> io::Result<usize> {
    let mut n = 0;
    while n < into.len() {
        match file.read(&mut into[n..]) {
            Ok(0) => break,
            Ok(more) => n += more,
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(n)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_killed_process_that_nobody_waited_for_runs_no_more() {
        let mut child = std::process::Command::new("sleep").arg("60").spawn().unwrap();
        let pid = child.id() as i32;
        assert!(is_running(pid));
        child.kill().unwrap();
        while is_running(pid) {
            std::thread::yield_now(); // it dies in its own time
        }
        let exists = rustix::process::Pid::from_raw(pid).map(rustix::process::test_kill_process);
        assert_eq!(exists, Some(Ok(())), "it is still there to be waited for");
        child.wait().unwrap();
    }
}
