//! The trials of a directory with what a list shows of each, quickly: an index remembers what was read before.
//!
//! The index (`DIR/.trials-index`) is never the truth. A row counts only while name, size, time of change and amendments of
//! its trial are what they were; deleting, corrupting or racing the file costs time and nothing else, and a directory
//! that can't be written to is listed without one.

mod row;
mod select;
mod store;

use std::collections::BTreeMap;
use std::fs::Metadata;
use std::io;
use std::os::unix::fs::MetadataExt;
use std::path::{Path, PathBuf};
use std::time::{Duration, SystemTime};

pub(super) use row::effective;
pub use row::{ResultValue, TrialRow};
pub use select::{BadFilter, Range, Selection, SortKey};

use super::numbered::{Kind, number_in};
use store::{Key, Seen};

/// A file changed this shortly before it was read may change again without its time of change showing it: times are as
/// coarse as 2 s on some file systems.
const RACY: Duration = Duration::from_secs(2);

/// One trial file of a directory.
#[derive(Debug)]
pub struct Catalogued {
    pub path: PathBuf,
    /// What is shown of it, or why it can't be read.
    pub what: Result<TrialRow, String>,
    pub held: bool,
}

/// The trials of a directory, by name.
#[derive(Debug)]
pub struct Catalogue {
    pub trials: Vec<Catalogued>,
    /// Files that had to be read, the others being in the index.
    pub n_read: usize,
}

/// How far the index is used.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum Index {
    #[default]
    Used,
    /// Every file is read; the index is written anew.
    Rebuilt,
    /// Neither read nor written.
    Unused,
}

/// Lists the trials of `dir`. `now` is what the computer's clock says; `told` hears how many of how many files were read.
///
/// # Errors
/// The directory can't be listed.
pub fn catalogue(
    dir: &Path,
    index: Index,
    now: SystemTime,
    mut told: impl FnMut(usize, usize),
) -> io::Result<Catalogue> {
    let found = look(dir)?;
    let remembered = if index == Index::Used { store::load(dir) } else { BTreeMap::new() };
    let mut due = Vec::new();
    let mut trials = Vec::with_capacity(found.len());
    let mut seen = Vec::with_capacity(found.len());
    let n_remembered = remembered.len();
    let mut remembered = remembered;
    for (name, beside) in found {
        let path = dir.join(&name);
        let held = beside.hold.as_ref().is_some_and(|newest| super::hold::is_set(newest));
        let key = std::fs::metadata(&path).ok().and_then(|about| key_of(&about, &beside));
        let known = remembered.remove(&name).filter(|seen| Some(&seen.key) == key.as_ref()).map(|seen| seen.row);
        if known.is_none() {
            due.push(trials.len());
        }
        trials.push(Catalogued { path, what: known.ok_or_else(String::new), held });
        seen.push((name, key));
    }
    for (n, at) in due.iter().enumerate() {
        told(n + 1, due.len());
        let trial = &mut trials[*at];
        trial.what = row::read(&trial.path);
    }
    let n_kept = trials.len() - due.len();
    if index != Index::Unused && (!due.is_empty() || n_kept != n_remembered) {
        let rows = trials.iter().zip(seen).filter_map(|(trial, (name, key))| {
            let row = trial.what.as_ref().ok()?;
            Some((name, Seen { key: key.filter(|key| key.is_settled(now))?, row: row.clone() }))
        });
        // Without an index the next list takes as long as this one.
        let _ = store::save(dir, rows);
    }
    Ok(Catalogue { n_read: due.len(), trials })
}

/// What stands beside a trial file.
#[derive(Debug, Default)]
struct Beside {
    n_amendments: u32,
    amendment_bytes: u64,
    newest_amendment_ns: i128,
    /// The hold of the greatest number.
    hold: Option<PathBuf>,
}

/// Names of trial files, with what stands beside each.
fn look(dir: &Path) -> io::Result<BTreeMap<String, Beside>> {
    let mut found: BTreeMap<String, Beside> = BTreeMap::new();
    let mut others = Vec::new();
    for entry in std::fs::read_dir(dir)? {
        let name = entry?.file_name().to_string_lossy().into_owned();
        if is_trial(&name) {
            found.insert(name, Beside::default());
        } else if name.ends_with(".toml") {
            others.push(name);
        }
    }
    let mut holds: BTreeMap<String, u32> = BTreeMap::new();
    for name in others {
        let Some((stem, _)) = name.split_once('.') else { continue };
        let trial = format!("{stem}.h5");
        let Some(beside) = found.get_mut(&trial) else { continue };
        if number_in(&name, stem, Kind::Amendment).is_some() {
            let about = std::fs::metadata(dir.join(&name))?;
            beside.n_amendments += 1;
            beside.amendment_bytes += about.len();
            beside.newest_amendment_ns = beside.newest_amendment_ns.max(changed_ns(&about));
        }
        if let Some(number) = number_in(&name, stem, Kind::Hold) {
            let newest = holds.entry(trial).or_default();
            if number > *newest {
                *newest = number;
                beside.hold = Some(dir.join(&name));
            }
        }
    }
    Ok(found)
}

/// The trial files of a directory, by name.
///
/// # Errors
/// It can't be listed.
pub fn trial_files(dir: &Path) -> io::Result<Vec<PathBuf>> {
    Ok(look(dir)?.into_keys().map(|name| dir.join(name)).collect())
}

fn is_trial(name: &str) -> bool {
    name.starts_with("trial-") && name.ends_with(".h5")
}

fn changed_ns(about: &Metadata) -> i128 {
    i128::from(about.mtime()) * 1_000_000_000 + i128::from(about.mtime_nsec())
}

fn key_of(about: &Metadata, beside: &Beside) -> Option<Key> {
    Some(Key {
        bytes: about.len(),
        changed_ns: i64::try_from(changed_ns(about)).ok()?,
        n_amendments: beside.n_amendments,
        amendment_bytes: beside.amendment_bytes,
        newest_amendment_ns: i64::try_from(beside.newest_amendment_ns).ok()?,
    })
}

impl Key {
    /// Whether a later change would show.
    fn is_settled(&self, now: SystemTime) -> bool {
        let now_ns = now.duration_since(SystemTime::UNIX_EPOCH).map_or(0, |since| since.as_nanos() as i128);
        let far = |ns: i64| (now_ns - i128::from(ns)).unsigned_abs() > RACY.as_nanos();
        far(self.changed_ns) && far(self.newest_amendment_ns)
    }
}
