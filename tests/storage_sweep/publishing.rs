//! Sealing and `recover` on a disk that fails in one place, and what a power cut leaves of the names they make.
//!
//! HDF5 writes the file itself, on the real disk; what decides whether a trial is there (listing, removing, syncing,
//! renaming) goes through the same trait as the journal and is failed here place by place. Sealing reads no clock, so a
//! stall is no fault of its own.

use std::collections::BTreeMap;
use std::io;
use std::path::{Path, PathBuf};
use std::sync::{Arc, Mutex};

use tautrail::archive::{Depth, Fate, RecoverError, Recovered, recover, verify};
use tautrail::journal::{AppendFile, Disk, Listed, RealDisk};

use crate::journal_file::{JournalFile, RIG_TEXT, TRIAL_ID};
use crate::{draws, table_head, table_row};

const FAULTS: [(&str, i32); 2] = [("EIO", 5), ("ENOSPC", 28)];
const SEGMENT: &str = "journal/000001-abc123-000001.tjl";

/// The real disk, with a log and one fault.
#[derive(Debug, Default)]
struct Logged {
    done: Mutex<Vec<Done>>,
    /// The nth operation of this kind fails with this number.
    fault: Option<(&'static str, u64, i32)>,
}

#[derive(Debug, Clone, PartialEq, Eq)]
struct Done {
    what: &'static str,
    path: PathBuf,
    to: Option<PathBuf>,
    worked: bool,
}

impl Logged {
    fn begin(&self, what: &'static str, path: &Path, to: Option<&Path>) -> io::Result<()> {
        let mut done = self.done.lock().unwrap();
        let nth = 1 + done.iter().filter(|earlier| earlier.what == what).count() as u64;
        let fault = self.fault.filter(|&(of, at, _)| (of, at) == (what, nth)).map(|(_, _, number)| number);
        let (path, to, worked) = (path.to_owned(), to.map(Path::to_owned), fault.is_none());
        done.push(Done { what, path, to, worked });
        fault.map_or(Ok(()), |number| Err(io::Error::from_raw_os_error(number)))
    }

    fn counts(&self) -> BTreeMap<&'static str, u64> {
        let mut counts = BTreeMap::new();
        self.done.lock().unwrap().iter().for_each(|done| *counts.entry(done.what).or_default() += 1);
        counts
    }

    fn was_met(&self) -> bool {
        self.done.lock().unwrap().iter().any(|done| !done.worked)
    }
}

impl Disk for Logged {
    fn create_dir(&self, dir: &Path) -> io::Result<()> {
        self.begin("CreateDir", dir, None)?;
        RealDisk.create_dir(dir)
    }
    fn create_new(&self, path: &Path) -> io::Result<Arc<dyn AppendFile>> {
        self.begin("Create", path, None)?;
        RealDisk.create_new(path)
    }
    fn open(&self, path: &Path) -> io::Result<Box<dyn io::Read + Send>> {
        self.begin("Open", path, None)?;
        RealDisk.open(path)
    }
    fn list(&self, dir: &Path) -> io::Result<Vec<Listed>> {
        self.begin("List", dir, None)?;
        RealDisk.list(dir)
    }
    fn remove(&self, path: &Path) -> io::Result<()> {
        self.begin("Remove", path, None)?;
        RealDisk.remove(path)
    }
    fn rename_noreplace(&self, from: &Path, to: &Path) -> io::Result<()> {
        self.begin("Rename", from, Some(to))?;
        RealDisk.rename_noreplace(from, to)
    }
    fn sync_file(&self, path: &Path) -> io::Result<()> {
        self.begin("SyncFile", path, None)?;
        RealDisk.sync_file(path)
    }
    fn sync_dir(&self, dir: &Path) -> io::Result<()> {
        self.begin("SyncDir", dir, None)?;
        RealDisk.sync_dir(dir)
    }
    fn free_bytes(&self, dir: &Path) -> io::Result<u64> {
        self.begin("FreeBytes", dir, None)?;
        RealDisk.free_bytes(dir)
    }
}

/// An archive with a journal of one small trial, and what a killed sealing of it left.
fn archive() -> tempfile::TempDir {
    let dir = tempfile::tempdir().unwrap();
    let mut journal = JournalFile::begin(dir.path(), &RIG_TEXT);
    journal.clocks(1);
    journal.open_trial(2, 1, 1);
    journal.bytes(3, 0, vec![7; 100]);
    journal.close_trial(4);
    journal.save();
    std::fs::write(stale(dir.path()), b"half").unwrap();
    dir
}

/// Of a process id that no machine gives out.
fn stale(dir: &Path) -> PathBuf {
    dir.join(format!(".trial-{TRIAL_ID}.2147483647.part"))
}

fn target(dir: &Path) -> PathBuf {
    dir.join(format!("trial-{TRIAL_ID}.h5"))
}

fn run(dir: &Path, disk: &Arc<Logged>) -> Result<Recovered, Option<RecoverError>> {
    let shared: Arc<dyn Disk> = Arc::clone(disk) as _;
    let mut recovery = recover(dir, &shared, &mut |_| {}).map_err(Some)?;
    assert!(recovery.trials.len() <= 1, "{recovery:?}");
    let Some(one) = recovery.trials.pop() else { return Err(None) };
    if matches!(one.fate, Fate::Failed(_)) { Err(None) } else { Ok(one) }
}

fn parts(dir: &Path) -> usize {
    RealDisk.list(dir).unwrap().iter().filter(|file| file.name.ends_with(".part")).count()
}

/// The file as sealing makes it on a sound disk, and what that asks of the disk.
fn clean() -> (Vec<u8>, Vec<Done>, BTreeMap<&'static str, u64>) {
    let (dir, disk) = (archive(), Arc::new(Logged::default()));
    run(dir.path(), &disk).unwrap();
    assert_eq!(verify(&target(dir.path()), Depth::Stored).unwrap().findings, [""; 0]);
    assert_eq!(parts(dir.path()), 0);
    let done = disk.done.lock().unwrap().clone();
    (std::fs::read(target(dir.path())).unwrap(), done, disk.counts())
}

#[test]
fn no_fault_in_sealing_leaves_a_half_file_or_a_changed_journal() {
    let (whole, _, counts) = clean();
    for what in ["FreeBytes", "List", "Open", "Remove", "Rename", "SyncDir", "SyncFile"] {
        assert!(counts.contains_key(what), "{what} was never swept: {counts:?}");
    }
    table_head();
    for (what, n_times) in counts {
        for (name, number) in FAULTS {
            let refused = (1..=n_times).filter(|&nth| !seals(what, nth, number, &whole)).count();
            table_row("sealing", what, n_times, name, refused as u64);
        }
    }
}

/// Whether sealing worked all the same; either way the next one does, to the same bytes.
fn seals(what: &'static str, nth: u64, number: i32, whole: &[u8]) -> bool {
    let says = format!("{what} {nth}, error {number}");
    let dir = archive();
    let journal = std::fs::read(dir.path().join(SEGMENT)).unwrap();
    let disk = Arc::new(Logged { fault: Some((what, nth, number)), ..Logged::default() });
    let sealed = run(dir.path(), &disk);
    assert!(disk.was_met(), "{says}: never met");
    let found = std::fs::read(target(dir.path())).ok();
    assert!(sealed.is_err() || found.is_some(), "{says}: said to be sealed");
    assert!(found.is_none_or(|bytes| bytes == whole), "{says}: a trial file that is not whole");
    let n_synced = disk.done.lock().unwrap().iter().filter(|done| done.what == "SyncFile").count();
    assert!(n_synced <= 1, "{says}: a failed sync is never tried again");
    run(dir.path(), &Arc::new(Logged::default())).unwrap();
    assert!(std::fs::read(target(dir.path())).unwrap() == whole, "{says}: sealed later");
    assert_eq!(parts(dir.path()), 0, "{says}: nothing half-made stays");
    assert!(std::fs::read(dir.path().join(SEGMENT)).unwrap() == journal, "{says}: the journal was written");
    sealed.is_ok()
}

/// What may be on the disk after a power cut behind the first `n` operations: content of the trial's name, if it is
/// there. Names changed since their directory was synced may or may not have taken effect.
fn after_power_cut(done: &[Done], dir: &Path, draw: &mut dyn FnMut() -> u64) -> Option<&'static str> {
    let (mut synced, mut content, mut unsynced) = (false, None, Vec::new());
    for one in done.iter().filter(|one| one.worked) {
        match one.what {
            "SyncFile" => synced = true,
            "Rename" => unsynced.push(if synced { "whole" } else { "torn" }),
            "SyncDir" if one.path == dir => content = unsynced.drain(..).next_back().or(content),
            _ => {}
        }
    }
    unsynced.into_iter().find(|_| draw().is_multiple_of(2)).or(content)
}

#[test]
fn a_power_cut_while_sealing_never_leaves_a_torn_trial_file_under_its_name() {
    let (dir, disk) = (archive(), Arc::new(Logged::default()));
    run(dir.path(), &disk).unwrap();
    let done = disk.done.lock().unwrap().clone();
    let mut draw = draws(1);
    for n in 0..=done.len() {
        for _ in 0..20 {
            let left = after_power_cut(&done[..n], dir.path(), &mut draw);
            assert_ne!(left, Some("torn"), "after {:?}", &done[..n]);
            assert!(n < done.len() || left == Some("whole"), "told to be sealed and not on the disk: {done:?}");
        }
    }
}

#[test]
fn what_is_found_sealed_is_on_the_disk_before_its_journal_may_go() {
    let dir = archive();
    let n_sync_dirs = clean().2["SyncDir"];
    // The rename took effect and its sync failed: not sealed yet, whatever the directory shows.
    let failing = Arc::new(Logged { fault: Some(("SyncDir", n_sync_dirs, 5)), ..Logged::default() });
    run(dir.path(), &failing).unwrap_err();
    assert!(target(dir.path()).exists());
    let later = Arc::new(Logged::default());
    assert!(matches!(run(dir.path(), &later).unwrap().fate, Fate::AlreadySealed(_)));
    let mut done = failing.done.lock().unwrap().clone();
    done.extend(later.done.lock().unwrap().clone());
    for seed in 0..20 {
        assert_eq!(after_power_cut(&done, dir.path(), &mut draws(seed)), Some("whole"), "{done:?}");
    }
}
