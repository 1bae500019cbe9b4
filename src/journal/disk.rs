//! The disk as the journal needs it, behind a trait, and the real one.
//!
//! Appending, syncing, renaming and listing go through [`Disk`] and [`AppendFile`], so that a sweep can fail each of
//! them in turn and cut the power. Nothing here overwrites: a file is created new, grows at its end, and is removed
//! whole.

use std::fmt::Debug;
use std::fs::{self, File, OpenOptions};
use std::io::{self, Read, Write};
use std::os::unix::fs::MetadataExt;
use std::path::Path;
use std::sync::Arc;
use std::sync::atomic::{AtomicU64, Ordering};

use rustix::fs::{FallocateFlags, RenameFlags};

/// One name in a directory.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord)]
pub struct Listed {
    pub name: String,
    /// Length of the file as readers see it; reserved but unwritten bytes are not counted.
    pub bytes: u64,
    /// What it takes of the disk, with what is reserved: a killed writer leaves that behind.
    pub held_bytes: u64,
}

/// A file system, reduced to what an append-only record needs.
pub trait Disk: Send + Sync + Debug {
    /// Creates the directory and its parents; one that is there already is fine.
    fn create_dir(&self, dir: &Path) -> io::Result<()>;
    /// Creates a file that must not be there yet.
    fn create_new(&self, path: &Path) -> io::Result<Arc<dyn AppendFile>>;
    fn open(&self, path: &Path) -> io::Result<Box<dyn Read + Send>>;
    /// The files of `dir`, sorted by name; directories are left out.
    fn list(&self, dir: &Path) -> io::Result<Vec<Listed>>;
    fn remove(&self, path: &Path) -> io::Result<()>;
    /// Renames within one file system; a target that exists is an error.
    fn rename_noreplace(&self, from: &Path, to: &Path) -> io::Result<()>;
    /// Makes a finished file's content survive a power cut. A failure is final: it is never tried again.
    fn sync_file(&self, path: &Path) -> io::Result<()>;
    /// Makes created, renamed and removed names of `dir` survive a power cut.
    fn sync_dir(&self, dir: &Path) -> io::Result<()>;
    /// Bytes that an ordinary user may still write below `dir`.
    fn free_bytes(&self, dir: &Path) -> io::Result<u64>;
}

/// A file that only grows. Shared by the thread that appends and the thread that syncs.
pub trait AppendFile: Send + Sync + Debug {
    /// Appends what fits and says how much that was, as `write(2)` does: it may be less than asked.
    fn append(&self, bytes: &[u8]) -> io::Result<usize>;
    /// Reserves room for `bytes` in all, without changing the length that readers see.
    fn reserve(&self, bytes: u64) -> io::Result<()>;
    /// Makes everything appended so far survive a power cut. A failure is final: it is never tried again.
    fn sync(&self) -> io::Result<()>;
    /// Gives back what was reserved and not used.
    fn trim(&self) -> io::Result<()>;
}

/// What `stat(2)` counts blocks in, whatever the file system's own.
const STAT_BLOCK_BYTES: u64 = 512;

/// The machine's own disk.
#[derive(Debug, Clone, Copy, Default)]
pub struct RealDisk;

#[derive(Debug)]
struct RealFile {
    file: File,
    length: AtomicU64,
}

impl Disk for RealDisk {
    fn create_dir(&self, dir: &Path) -> io::Result<()> {
        fs::create_dir_all(dir)
    }

    fn create_new(&self, path: &Path) -> io::Result<Arc<dyn AppendFile>> {
        let file = OpenOptions::new().append(true).create_new(true).open(path)?;
        Ok(Arc::new(RealFile { file, length: AtomicU64::new(0) }))
    }

    fn open(&self, path: &Path) -> io::Result<Box<dyn Read + Send>> {
        Ok(Box::new(File::open(path)?))
    }

    fn list(&self, dir: &Path) -> io::Result<Vec<Listed>> {
        let mut listed = Vec::new();
        for entry in fs::read_dir(dir)? {
            let entry = entry?;
            let about = entry.metadata()?;
            if about.is_file() {
                let name = entry.file_name().to_string_lossy().into_owned();
                let held_bytes = about.len().max(about.blocks().saturating_mul(STAT_BLOCK_BYTES));
                listed.push(Listed { name, bytes: about.len(), held_bytes });
            }
        }
        listed.sort();
        Ok(listed)
    }

    fn remove(&self, path: &Path) -> io::Result<()> {
        fs::remove_file(path)
    }

    fn rename_noreplace(&self, from: &Path, to: &Path) -> io::Result<()> {
        Ok(rustix::fs::renameat_with(rustix::fs::CWD, from, rustix::fs::CWD, to, RenameFlags::NOREPLACE)?)
    }

    fn sync_file(&self, path: &Path) -> io::Result<()> {
        File::open(path)?.sync_all()
    }

    fn sync_dir(&self, dir: &Path) -> io::Result<()> {
        File::open(dir)?.sync_all()
    }

    fn free_bytes(&self, dir: &Path) -> io::Result<u64> {
        let about = rustix::fs::statvfs(dir)?;
        Ok(about.f_bavail.saturating_mul(about.f_frsize))
    }
}

impl AppendFile for RealFile {
    fn append(&self, bytes: &[u8]) -> io::Result<usize> {
        let n_written = (&self.file).write(bytes)?;
        self.length.fetch_add(n_written as u64, Ordering::Relaxed);
        Ok(n_written)
    }

    fn reserve(&self, bytes: u64) -> io::Result<()> {
        Ok(rustix::fs::fallocate(&self.file, FallocateFlags::KEEP_SIZE, 0, bytes)?)
    }

    fn sync(&self) -> io::Result<()> {
        self.file.sync_data()
    }

    fn trim(&self) -> io::Result<()> {
        self.file.set_len(self.length.load(Ordering::Relaxed))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_reserve_does_not_change_the_length_readers_see() {
        let dir = tempfile::tempdir().unwrap();
        let path = dir.path().join("a");
        let file = RealDisk.create_new(&path).unwrap();
        file.reserve(1 << 20).unwrap();
        assert_eq!(file.append(b"abc").unwrap(), 3);
        file.sync().unwrap();
        let listed = || RealDisk.list(dir.path()).unwrap().remove(0);
        assert_eq!((listed().name.as_str(), listed().bytes), ("a", 3));
        assert!(listed().held_bytes >= 1 << 20, "the reserve is on the disk: {:?}", listed());
        file.trim().unwrap();
        assert!(listed().held_bytes < 1 << 17, "and given back: {:?}", listed());
        assert_eq!(fs::read(&path).unwrap(), b"abc");
    }

    #[test]
    fn renaming_never_replaces() {
        let dir = tempfile::tempdir().unwrap();
        let (a, b) = (dir.path().join("a"), dir.path().join("b"));
        fs::write(&a, "a").unwrap();
        fs::write(&b, "b").unwrap();
        let error = RealDisk.rename_noreplace(&a, &b).unwrap_err();
        assert_eq!(error.kind(), io::ErrorKind::AlreadyExists);
        assert_eq!(fs::read(&b).unwrap(), b"b");
    }
}
