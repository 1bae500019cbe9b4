//! Sealing on a disk that fails, is full, or has something else under the trial's name: whole or not at all.

use std::io;
use std::path::Path;
use std::process::Command;
use std::sync::Arc;

use tautrail::archive::{SealError, file_room_bytes};
use tautrail::journal::{AppendFile, Disk, Listed, RealDisk};

use crate::journal_file::{JOURNAL_ID, TRIAL_ID};
use crate::{names, nominal_copy, real, seal_in, segment, short_trial};

/// The real disk with one thing wrong.
#[derive(Debug)]
struct Faulty {
    rename: Option<i32>,
    sync_dir: Option<i32>,
    free_bytes: Option<u64>,
}

const SOUND: Faulty = Faulty { rename: None, sync_dir: None, free_bytes: None };

fn fault(number: Option<i32>) -> io::Result<()> {
    number.map_or(Ok(()), |number| Err(io::Error::from_raw_os_error(number)))
}

impl Disk for Faulty {
    fn create_dir(&self, dir: &Path) -> io::Result<()> {
        RealDisk.create_dir(dir)
    }
    fn create_new(&self, path: &Path) -> io::Result<Arc<dyn AppendFile>> {
        RealDisk.create_new(path)
    }
    fn open(&self, path: &Path) -> io::Result<Box<dyn io::Read + Send>> {
        RealDisk.open(path)
    }
    fn list(&self, dir: &Path) -> io::Result<Vec<Listed>> {
        RealDisk.list(dir)
    }
    fn remove(&self, path: &Path) -> io::Result<()> {
        RealDisk.remove(path)
    }
    fn rename_noreplace(&self, from: &Path, to: &Path) -> io::Result<()> {
        fault(self.rename)?;
        RealDisk.rename_noreplace(from, to)
    }
    fn sync_file(&self, path: &Path) -> io::Result<()> {
        RealDisk.sync_file(path)
    }
    fn sync_dir(&self, dir: &Path) -> io::Result<()> {
        fault(self.sync_dir)?;
        RealDisk.sync_dir(dir)
    }
    fn free_bytes(&self, dir: &Path) -> io::Result<u64> {
        self.free_bytes.map_or_else(|| RealDisk.free_bytes(dir), Ok)
    }
}

#[test]
fn a_failed_rename_or_a_full_disk_leaves_no_half_file_and_the_journal() {
    let dir = nominal_copy();
    let journal = std::fs::read(dir.path().join(segment())).unwrap();
    let (exdev, enospc) = (18, 28);
    for disk in [
        Faulty { rename: Some(exdev), ..SOUND },
        Faulty { rename: Some(enospc), ..SOUND },
        Faulty { free_bytes: Some(journal.len() as u64), ..SOUND },
    ] {
        let disk: Arc<dyn Disk> = Arc::new(disk);
        let error = seal_in(dir.path(), &disk).expect_err("a fault was staged");
        assert!(matches!(error, SealError::Io { .. } | SealError::NoRoom { .. }), "{error}");
        assert_eq!(names(dir.path()), ["journal"], "{disk:?}");
    }
    assert!(std::fs::read(dir.path().join(segment())).unwrap() == journal, "the journal was touched");
    seal_in(dir.path(), &real()).unwrap();
}

#[test]
fn a_trial_file_fits_the_room_that_is_asked_for_it() {
    let dir = nominal_copy();
    let journal_bytes = std::fs::metadata(dir.path().join(segment())).unwrap().len();
    let needed_bytes = file_room_bytes(journal_bytes);
    let short: Arc<dyn Disk> = Arc::new(Faulty { free_bytes: Some(needed_bytes - 1), ..SOUND });
    assert!(matches!(seal_in(dir.path(), &short), Err(SealError::NoRoom { .. })));
    let just: Arc<dyn Disk> = Arc::new(Faulty { free_bytes: Some(needed_bytes), ..SOUND });
    let file_bytes = std::fs::metadata(seal_in(dir.path(), &just).unwrap().path).unwrap().len();
    assert!(file_bytes <= needed_bytes, "{file_bytes} bytes from {journal_bytes}");
}

/// The library keeps saying yes for megabytes after the disk is full and says nothing when a close fails (HDF5 2.x):
/// the flush has to be believed, wherever the limit is met.
#[test]
fn writes_that_hit_a_limit_end_in_an_error_not_in_a_short_file() {
    let dir = nominal_copy();
    let whole = std::fs::metadata(seal_in(nominal_copy().path(), &real()).unwrap().path).unwrap().len();
    for share in [0.05, 0.3, 0.6, 0.9, 0.99] {
        let n_blocks = (whole as f64 * share / 1024.0) as u64;
        let limited = format!(
            "trap '' XFSZ; ulimit -f {n_blocks}; exec {} seal-child --niceness 0 {} {JOURNAL_ID} {TRIAL_ID}",
            env!("CARGO_BIN_EXE_tautrail"),
            dir.path().display()
        );
        let output = Command::new("bash").arg("-c").arg(limited).output().unwrap();
        let error = String::from_utf8(output.stderr).unwrap();
        assert_eq!(output.status.code(), Some(2), "{share}: {error}");
        assert!(error.contains("File too large"), "{share}: {error}");
        assert_eq!(names(dir.path()), ["journal"], "{share}: {error}");
    }
}

/// The child of a daemon that died goes on; the next daemon starts another one for the same trial.
#[test]
fn two_sealing_processes_at_once_leave_one_file_and_both_succeed() {
    let dir = nominal_copy();
    let start = || {
        let mut command = Command::new(env!("CARGO_BIN_EXE_tautrail"));
        command.args(["seal-child", "--niceness", "0"]).arg(dir.path()).args([JOURNAL_ID, TRIAL_ID]).spawn().unwrap()
    };
    let children = [start(), start()];
    for mut child in children {
        assert!(child.wait().unwrap().success());
    }
    assert_eq!(names(dir.path()), ["journal".to_owned(), format!("trial-{TRIAL_ID}.h5")]);
}

#[test]
fn a_target_that_appears_while_sealing_is_not_replaced() {
    let dir = nominal_copy();
    let eexist = 17;
    let disk: Arc<dyn Disk> = Arc::new(Faulty { rename: Some(eexist), ..SOUND });
    assert!(seal_in(dir.path(), &disk).is_err());
    assert_eq!(names(dir.path()), ["journal"]);
}

#[test]
fn a_name_that_is_a_link_to_something_else_is_never_written_through() {
    let dir = tempfile::tempdir().unwrap();
    short_trial(dir.path(), |_, bytes| bytes);
    let target = dir.path().join(format!("trial-{TRIAL_ID}.h5"));
    let elsewhere = tempfile::tempdir_in(dir.path()).unwrap();
    let other = elsewhere.path().join("notes");
    std::fs::write(&other, "a crew's notes").unwrap();
    std::fs::hard_link(&other, &target).unwrap();
    assert!(seal_in(dir.path(), &real()).is_err());
    assert_eq!(std::fs::read_to_string(&other).unwrap(), "a crew's notes");
    std::fs::remove_file(&target).unwrap();
    let nothing = elsewhere.path().join("nothing");
    std::os::unix::fs::symlink(&nothing, &target).unwrap();
    assert!(matches!(seal_in(dir.path(), &real()), Err(SealError::Io { .. })));
    assert!(!nothing.exists() && target.symlink_metadata().unwrap().is_symlink());
    std::fs::remove_file(&target).unwrap();
    // The very file under another name too: it is sealed already, and both names stay.
    let sealed = seal_in(dir.path(), &real()).unwrap();
    std::fs::hard_link(&sealed.path, elsewhere.path().join("copy.h5")).unwrap();
    assert!(!seal_in(dir.path(), &real()).unwrap().is_new);
    assert!(elsewhere.path().join("copy.h5").exists());
    assert!(!names(dir.path()).iter().any(|name| name.ends_with(".part")));
}
