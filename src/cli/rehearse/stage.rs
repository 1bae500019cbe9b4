//! The rehearsal's directory: rig file, ports, archive, logs, truth.

use std::collections::BTreeSet;
use std::fs;
use std::io::{self, ErrorKind};
use std::os::unix::ffi::OsStrExt;
use std::path::{Path, PathBuf};

use thiserror::Error;

/// The rig file of the rehearsal; its ports are relative to where it lies.
const RIG_TEXT: &str = include_str!("../../../tools/rehearsal/north-pier.toml");
const RIG_NAME: &str = "north-pier.toml";
/// The calibration records that it points to, beside it in `records/`.
const RECORDS: [(&str, &str); 4] = [
    ("line.toml", include_str!("../../../tools/rehearsal/records/line.toml")),
    ("anchor.toml", include_str!("../../../tools/rehearsal/records/anchor.toml")),
    ("encoder.toml", include_str!("../../../tools/rehearsal/records/encoder.toml")),
    ("accel.toml", include_str!("../../../tools/rehearsal/records/accel.toml")),
];
/// Longest path a Unix socket takes, less some room.
const SOCKET_PATH_LEN_MAX: usize = 100;

#[derive(Debug, Error)]
pub enum StageError {
    #[error("{path}: {source}; choose a directory you may write to with --out")]
    NotWritable { path: PathBuf, source: io::Error },
    #[error("{path} holds other files and no earlier rehearsal; name a new or empty directory with --out")]
    Occupied { path: PathBuf },
}

/// A directory set for one rehearsal. An earlier rehearsal there keeps its trials.
#[derive(Debug)]
pub struct Stage {
    dir: PathBuf,
    earlier: BTreeSet<PathBuf>,
    /// Where the socket goes when `dir` is too long a path for one.
    short: Option<tempfile::TempDir>,
}

impl Stage {
    pub fn set(out: &Path) -> Result<Self, StageError> {
        let cannot = |source| StageError::NotWritable { path: out.to_owned(), source };
        fs::create_dir_all(out).map_err(cannot)?;
        let dir = out.canonicalize().map_err(cannot)?;
        let occupied = fs::read_dir(&dir).map_err(cannot)?.next().is_some();
        if occupied && !dir.join(RIG_NAME).exists() {
            return Err(StageError::Occupied { path: out.to_owned() });
        }
        fs::write(dir.join(RIG_NAME), RIG_TEXT).map_err(cannot)?;
        let records = dir.join("records");
        fs::create_dir_all(&records).map_err(cannot)?;
        RECORDS.iter().try_for_each(|(name, text)| fs::write(records.join(name), text)).map_err(cannot)?;
        forget(&dir.join("truth.json")).map_err(cannot)?;
        let earlier = sealed(&dir).map_err(cannot)?;
        let fits = dir.join("feed.sock").as_os_str().as_bytes().len() <= SOCKET_PATH_LEN_MAX;
        let short = if fits { None } else { Some(tempfile::tempdir().map_err(cannot)?) };
        Ok(Self { dir, earlier, short })
    }

    pub fn dir(&self) -> &Path {
        &self.dir
    }

    pub fn rig_file(&self) -> PathBuf {
        self.dir.join(RIG_NAME)
    }

    pub fn truth_file(&self) -> PathBuf {
        self.dir.join("truth.json")
    }

    pub fn socket(&self) -> PathBuf {
        self.short.as_ref().map_or(self.dir.as_path(), tempfile::TempDir::path).join("feed.sock")
    }

    /// True once every port that the rig file names is there.
    pub fn ports_are_there(&self, ports: &[String]) -> bool {
        ports.iter().all(|port| self.dir.join(port).exists())
    }

    /// The trial that this rehearsal sealed, once it is there.
    pub fn new_trial(&self) -> io::Result<Option<PathBuf>> {
        Ok(sealed(&self.dir)?.into_iter().find(|path| !self.earlier.contains(path)))
    }
}

fn forget(path: &Path) -> io::Result<()> {
    match fs::remove_file(path) {
        Err(error) if error.kind() != ErrorKind::NotFound => Err(error),
        _ => Ok(()),
    }
}

/// Sealed trials in `dir`: a file has this name only once it is whole.
fn sealed(dir: &Path) -> io::Result<BTreeSet<PathBuf>> {
    let mut found = BTreeSet::new();
    for entry in fs::read_dir(dir)? {
        let path = entry?.path();
        let name = path.file_name().unwrap_or_default().to_string_lossy();
        if name.starts_with("trial-") && name.ends_with(".h5") {
            found.insert(path);
        }
    }
    Ok(found)
}
