//! A disk in memory that fails on demand and can lose its power: for tests and sweeps, in virtual time.
//!
//! The power cut is as unkind as disks are allowed to be: of what was not synced any pages may be there, torn at
//! 512 bytes or read as zeros, and of names made, renamed or removed since their directory was synced any may have
//! taken effect, in any order. A failed sync drops what it should have made durable for good, whatever later syncs say.

use std::collections::BTreeMap;
use std::io::{self, Cursor, Read};
use std::ops::Range;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicI64, Ordering};
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};

use super::disk::{AppendFile, Disk, Listed};

const PAGE_BYTES: usize = 4096;
const SECTOR_BYTES: usize = 512;

/// What can be asked of a disk, for counting and failing.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub enum Operation {
    CreateDir,
    Create,
    Append,
    Reserve,
    Sync,
    Trim,
    Open,
    List,
    Remove,
    Rename,
    SyncDir,
    FreeBytes,
}

/// How an operation goes wrong.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Fault {
    /// Fails with this error number and does nothing.
    Error(i32),
    /// Takes this many bytes at most (of an append; elsewhere no fault).
    Short(usize),
    /// Takes this long, then works.
    Stall(i64),
}

/// The disk. Clones are the same disk.
#[derive(Debug, Clone, Default)]
pub struct StagedDisk {
    state: Arc<Mutex<State>>,
    clock_ns: Arc<AtomicI64>,
}

#[derive(Debug, Default)]
struct State {
    inodes: Vec<Inode>,
    names: BTreeMap<PathBuf, usize>,
    durable_names: BTreeMap<PathBuf, usize>,
    unsynced_names: Vec<NameChange>,
    counts: BTreeMap<Operation, u64>,
    faults: Vec<(Operation, u64, Fault)>,
    n_faults_hit: usize,
    capacity_bytes: Option<u64>,
}

#[derive(Debug, Default, Clone)]
struct Inode {
    data: Vec<u8>,
    reserved: u64,
    n_synced: usize,
    /// What a failed sync dropped: readable until the power goes.
    dropped: Vec<Range<usize>>,
}

#[derive(Debug, Clone)]
enum NameChange {
    Link(PathBuf, usize),
    Unlink(PathBuf),
}

impl StagedDisk {
    /// An empty disk on a virtual clock, which stalls move on.
    pub fn new(clock_ns: Arc<AtomicI64>) -> Self {
        Self { state: Arc::default(), clock_ns }
    }

    /// Lets the `nth` operation of a kind (from 1) go wrong.
    pub fn fail(&self, operation: Operation, nth: u64, fault: Fault) {
        self.lock().faults.push((operation, nth, fault));
    }

    /// Limits what files may hold or reserve in all.
    pub fn set_capacity(&self, bytes: Option<u64>) {
        self.lock().capacity_bytes = bytes;
    }

    /// How often each operation was asked for.
    pub fn counts(&self) -> BTreeMap<Operation, u64> {
        self.lock().counts.clone()
    }

    /// How many of the faults asked for were met.
    pub fn n_faults_hit(&self) -> usize {
        self.lock().n_faults_hit
    }

    /// The disk as the next process finds it when this one was killed: all that was handed over is there.
    pub fn after_kill(&self) -> Self {
        let state = self.lock();
        let kept = State {
            inodes: state.inodes.clone(),
            names: state.names.clone(),
            durable_names: state.durable_names.clone(),
            unsynced_names: state.unsynced_names.clone(),
            capacity_bytes: state.capacity_bytes,
            ..State::default()
        };
        Self { state: Arc::new(Mutex::new(kept)), clock_ns: Arc::clone(&self.clock_ns) }
    }

    /// The disk after a power cut; `draw` decides what of the unsynced is there.
    pub fn after_power_cut(&self, draw: &mut dyn FnMut() -> u64) -> Self {
        let state = self.lock();
        let mut names = state.durable_names.clone();
        for change in &state.unsynced_names {
            if draw().is_multiple_of(2) {
                change.apply(&mut names);
            }
        }
        let survivor = |inode: &Inode, draw: &mut dyn FnMut() -> u64| {
            let data = inode.survive(draw);
            Inode { n_synced: data.len(), data, ..Inode::default() }
        };
        let inodes = state.inodes.iter().map(|inode| survivor(inode, draw)).collect();
        let kept = State {
            inodes,
            durable_names: names.clone(),
            names,
            capacity_bytes: state.capacity_bytes,
            ..State::default()
        };
        Self { state: Arc::new(Mutex::new(kept)), clock_ns: Arc::clone(&self.clock_ns) }
    }

    /// A file's bytes, as a reader finds them now.
    pub fn content(&self, path: &Path) -> Option<Vec<u8>> {
        let state = self.lock();
        state.names.get(path).map(|&inode| state.inodes[inode].data.clone())
    }

    fn lock(&self) -> MutexGuard<'_, State> {
        self.state.lock().unwrap_or_else(PoisonError::into_inner)
    }

    /// Counts the operation and meets its fault, if one is due; `Some` limits an append.
    fn begin(&self, operation: Operation) -> io::Result<Option<usize>> {
        let mut state = self.lock();
        let count = state.counts.entry(operation).or_default();
        *count += 1;
        let nth = *count;
        let due = state.faults.iter().find(|(of, at, _)| (*of, *at) == (operation, nth)).map(|&(_, _, fault)| fault);
        state.n_faults_hit += usize::from(due.is_some());
        match due {
            Some(Fault::Error(number)) => Err(io::Error::from_raw_os_error(number)),
            Some(Fault::Short(n)) => Ok(Some(n)),
            Some(Fault::Stall(stall_ns)) => {
                self.clock_ns.fetch_add(stall_ns, Ordering::SeqCst);
                Ok(None)
            }
            None => Ok(None),
        }
    }
}

impl NameChange {
    fn apply(&self, names: &mut BTreeMap<PathBuf, usize>) {
        match self {
            Self::Link(path, inode) => names.insert(path.clone(), *inode),
            Self::Unlink(path) => names.remove(path),
        };
    }

    fn path(&self) -> &Path {
        match self {
            Self::Link(path, _) | Self::Unlink(path) => path,
        }
    }
}

impl Inode {
    fn n_held(&self) -> u64 {
        self.reserved.max(self.data.len() as u64)
    }

    fn survive(&self, draw: &mut dyn FnMut() -> u64) -> Vec<u8> {
        let n_unsynced = self.data.len() - self.n_synced;
        let mut end = self.n_synced + (draw() % (n_unsynced as u64 + 1)) as usize;
        if draw().is_multiple_of(2) {
            end = (end - end % SECTOR_BYTES).max(self.n_synced); // torn at a sector
        }
        let mut data = self.data[..end].to_vec();
        let mut at = self.n_synced;
        while at < end {
            let next = (at + PAGE_BYTES - at % PAGE_BYTES).min(end);
            if draw().is_multiple_of(2) {
                data[at..next].fill(0);
            }
            at = next;
        }
        for dropped in &self.dropped {
            data[dropped.clone()].fill(0);
        }
        data
    }
}

impl State {
    fn change(&mut self, change: NameChange) {
        change.apply(&mut self.names);
        self.unsynced_names.push(change);
    }

    fn free(&self) -> u64 {
        let held: u64 = self.names.values().map(|&inode| self.inodes[inode].n_held()).sum();
        self.capacity_bytes.map_or(u64::MAX / 2, |capacity| capacity.saturating_sub(held))
    }

    fn inode_of(&self, path: &Path) -> io::Result<usize> {
        self.names.get(path).copied().ok_or_else(|| io::ErrorKind::NotFound.into())
    }
}

impl Disk for StagedDisk {
    fn create_dir(&self, _dir: &Path) -> io::Result<()> {
        self.begin(Operation::CreateDir).map(|_| ())
    }

    fn create_new(&self, path: &Path) -> io::Result<Arc<dyn AppendFile>> {
        self.begin(Operation::Create)?;
        let mut state = self.lock();
        if state.names.contains_key(path) {
            return Err(io::ErrorKind::AlreadyExists.into());
        }
        state.inodes.push(Inode::default());
        let inode = state.inodes.len() - 1;
        state.change(NameChange::Link(path.to_owned(), inode));
        Ok(Arc::new(StagedFile { disk: self.clone(), inode }))
    }

    fn open(&self, path: &Path) -> io::Result<Box<dyn Read + Send>> {
        self.begin(Operation::Open)?;
        let state = self.lock();
        let inode = state.inode_of(path)?;
        Ok(Box::new(Cursor::new(state.inodes[inode].data.clone())))
    }

    fn list(&self, dir: &Path) -> io::Result<Vec<Listed>> {
        self.begin(Operation::List)?;
        let state = self.lock();
        let here = state.names.iter().filter(|(path, _)| path.parent() == Some(dir));
        Ok(here
            .map(|(path, &inode)| Listed {
                name: path.file_name().unwrap_or_default().to_string_lossy().into_owned(),
                bytes: state.inodes[inode].data.len() as u64,
                held_bytes: state.inodes[inode].n_held(),
            })
            .collect())
    }

    fn remove(&self, path: &Path) -> io::Result<()> {
        self.begin(Operation::Remove)?;
        let mut state = self.lock();
        state.inode_of(path)?;
        state.change(NameChange::Unlink(path.to_owned()));
        Ok(())
    }

    fn rename_noreplace(&self, from: &Path, to: &Path) -> io::Result<()> {
        self.begin(Operation::Rename)?;
        let mut state = self.lock();
        let inode = state.inode_of(from)?;
        if state.names.contains_key(to) {
            return Err(io::ErrorKind::AlreadyExists.into());
        }
        state.change(NameChange::Link(to.to_owned(), inode));
        state.change(NameChange::Unlink(from.to_owned()));
        Ok(())
    }

    fn sync_file(&self, path: &Path) -> io::Result<()> {
        let inode = self.lock().inode_of(path)?;
        StagedFile { disk: self.clone(), inode }.sync()
    }

    fn sync_dir(&self, dir: &Path) -> io::Result<()> {
        self.begin(Operation::SyncDir)?;
        let mut state = self.lock();
        let (here, elsewhere): (Vec<_>, Vec<_>) = std::mem::take(&mut state.unsynced_names)
            .into_iter()
            .partition(|change| change.path().parent() == Some(dir));
        state.unsynced_names = elsewhere;
        here.iter().for_each(|change| change.apply(&mut state.durable_names));
        Ok(())
    }

    fn free_bytes(&self, _dir: &Path) -> io::Result<u64> {
        self.begin(Operation::FreeBytes)?;
        Ok(self.lock().free())
    }
}

#[derive(Debug)]
struct StagedFile {
    disk: StagedDisk,
    inode: usize,
}

impl AppendFile for StagedFile {
    fn append(&self, bytes: &[u8]) -> io::Result<usize> {
        let limit = self.disk.begin(Operation::Append)?;
        let mut state = self.disk.lock();
        let free = state.free();
        let inode = &mut state.inodes[self.inode];
        let room = free.saturating_add(inode.n_held() - inode.data.len() as u64);
        let n = bytes.len().min(limit.unwrap_or(usize::MAX)).min(usize::try_from(room).unwrap_or(usize::MAX));
        if n == 0 && !bytes.is_empty() {
            return Err(io::ErrorKind::StorageFull.into());
        }
        inode.data.extend_from_slice(&bytes[..n]);
        Ok(n)
    }

    fn reserve(&self, bytes: u64) -> io::Result<()> {
        self.disk.begin(Operation::Reserve)?;
        let mut state = self.disk.lock();
        let free = state.free();
        let inode = &mut state.inodes[self.inode];
        if bytes.saturating_sub(inode.n_held()) > free {
            return Err(io::ErrorKind::StorageFull.into());
        }
        inode.reserved = inode.reserved.max(bytes);
        Ok(())
    }

    fn sync(&self) -> io::Result<()> {
        let begun = self.disk.begin(Operation::Sync);
        let mut state = self.disk.lock();
        let inode = &mut state.inodes[self.inode];
        if begun.is_err() {
            inode.dropped.push(inode.n_synced..inode.data.len());
        }
        inode.n_synced = inode.data.len();
        begun.map(|_| ())
    }

    fn trim(&self) -> io::Result<()> {
        self.disk.begin(Operation::Trim)?;
        self.disk.lock().inodes[self.inode].reserved = 0;
        Ok(())
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_failed_sync_loses_its_bytes_for_good() {
        let disk = StagedDisk::default();
        let file = disk.create_new(Path::new("d/a")).unwrap();
        disk.sync_dir(Path::new("d")).unwrap();
        disk.fail(Operation::Sync, 2, Fault::Error(5));
        file.append(b"aaa").unwrap();
        file.sync().unwrap();
        file.append(b"bbb").unwrap();
        assert_eq!(file.sync().unwrap_err().raw_os_error(), Some(5));
        file.append(b"ccc").unwrap();
        file.sync().unwrap();
        assert_eq!(disk.content(Path::new("d/a")).unwrap(), b"aaabbbccc");
        let after = disk.after_power_cut(&mut || 0);
        assert_eq!(after.content(Path::new("d/a")).unwrap(), b"aaa\0\0\0ccc");
    }

    #[test]
    fn an_unsynced_name_may_vanish_with_its_file() {
        let disk = StagedDisk::default();
        let file = disk.create_new(Path::new("d/a")).unwrap();
        file.append(b"aaa").unwrap();
        file.sync().unwrap();
        assert_eq!(disk.after_power_cut(&mut || 1).content(Path::new("d/a")), None);
        disk.sync_dir(Path::new("d")).unwrap();
        assert_eq!(disk.after_power_cut(&mut || 1).content(Path::new("d/a")).unwrap(), b"aaa");
    }

    #[test]
    fn a_full_disk_takes_a_short_write_first() {
        let disk = StagedDisk::default();
        disk.set_capacity(Some(4));
        let file = disk.create_new(Path::new("d/a")).unwrap();
        assert_eq!(file.append(b"abcdef").unwrap(), 4);
        assert_eq!(file.append(b"ef").unwrap_err().kind(), io::ErrorKind::StorageFull);
    }
}
