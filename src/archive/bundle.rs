//! Everything about a trial in one archive: the trial, its amendments and holds, its journal, logs and named attachments, with
//! a manifest that names each by its SHA-256.
//!
//! The archive is POSIX tar, uncompressed, so that any system opens it for as long as there are systems; `SHA256SUMS` in it
//! is checked by `sha256sum -c` alone. Files are read once: what is hashed is what is packed. Nothing is overwritten.

use std::collections::BTreeSet;
use std::fs::{self, File};
use std::io::{self, BufWriter, Read, Write};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use jiff::Timestamp;
use serde::Serialize;
use sha2::{Digest, Sha256};
use thiserror::Error;

use super::amendment::Amended;
use super::numbered::{Kind, folder, numbered, stem_of};
use super::recover::journal_dir;
use crate::journal::{Disk, JournalReader, journals};

/// What goes in beside what is about the trial by its name.
#[derive(Debug, Clone, Default)]
pub struct Extras {
    pub logs: Vec<PathBuf>,
    /// Camera files and the like.
    pub attachments: Vec<PathBuf>,
}

/// A file of the bundle.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Packed {
    /// Path within the archive, below its one folder.
    pub path: String,
    /// `trial`, `amendment`, `hold`, `journal`, `log` or `attachment`.
    pub kind: &'static str,
    pub bytes: u64,
    pub sha256: String,
    /// Where it was.
    pub from: PathBuf,
}

/// What was bundled; the manifest says the same.
#[derive(Debug, Clone, PartialEq, Eq, Serialize)]
pub struct Bundled {
    pub format: &'static str,
    pub format_version: u32,
    pub program_version: &'static str,
    /// RFC 3339.
    pub written: String,
    pub trial_id: String,
    /// Digest over all raw groups as the trial file says; empty where it can't be read.
    pub raw_sha256: String,
    pub files: Vec<Packed>,
    /// What is missing or doubtful, in sentences.
    pub remarks: Vec<String>,
}

/// Why there is no bundle.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum BundleError {
    #[error("{path} can't be packed: {source}", path = path.display())]
    Unreadable { path: PathBuf, source: io::Error },
    #[error("{path} is no file", path = .0.display())]
    NoFile(PathBuf),
    #[error("{path} changed its length while it was packed: try again when nobody writes to it", path = .0.display())]
    Changed(PathBuf),
    #[error("{path} can't be written: {source}", path = path.display())]
    Unwritable { path: PathBuf, source: io::Error },
    #[error("the manifest can't be written: {0}")]
    Manifest(#[from] serde_json::Error),
}

/// SHA-256 of a file, lower-case hex.
///
/// # Errors
/// It can't be read.
pub fn file_sha256(path: &Path) -> io::Result<String> {
    let mut reader = Hashing { inner: File::open(path)?, sha256: Sha256::new(), n_bytes: 0, failed: false };
    io::copy(&mut reader, &mut io::sink())?;
    Ok(hex(reader.sha256))
}

fn hex(sha256: Sha256) -> String {
    sha256.finalize().iter().map(|byte| format!("{byte:02x}")).collect()
}

/// Packs everything about `trial` into the new file `out`; `told` hears of each file.
///
/// # Errors
/// [`BundleError`]; no bundle is left behind then.
pub fn bundle(
    trial: &Path,
    extras: &Extras,
    out: &Path,
    disk: &Arc<dyn Disk>,
    now: Timestamp,
    mut told: impl FnMut(&Path),
) -> Result<Bundled, BundleError> {
    if !trial.is_file() {
        return Err(BundleError::NoFile(trial.to_owned()));
    }
    let mut bundled = about(trial, now);
    let files = gather(trial, extras, disk, &mut bundled)?;
    let unwritable = |source| BundleError::Unwritable { path: out.to_owned(), source };
    let file = File::options().write(true).create_new(true).open(out).map_err(unwritable)?;
    let packed = pack(trial, files, file, &mut bundled, out, &mut told);
    if packed.is_err() {
        // It would look like a bundle and not be one.
        let _ = fs::remove_file(out);
    }
    packed.map(|()| bundled)
}

fn about(trial: &Path, now: Timestamp) -> Bundled {
    let mut bundled = Bundled {
        format: "tautrail-bundle",
        format_version: 1,
        program_version: env!("CARGO_PKG_VERSION"),
        written: now.to_string(),
        trial_id: stem_of(trial),
        raw_sha256: String::new(),
        files: Vec::new(),
        remarks: Vec::new(),
    };
    match Amended::open(trial) {
        Ok(amended) => {
            bundled.trial_id = amended.trial.header().trial_id.clone();
            bundled.raw_sha256 = amended.raw_sha256;
            bundled.remarks = amended.findings;
        }
        Err(error) => bundled.remarks.push(format!("the trial file can't be read: {error}")),
    }
    bundled
}

/// A file to pack: its kind, its folder within the archive, where it is.
type Wanted = (&'static str, &'static str, PathBuf);

fn gather(
    trial: &Path,
    extras: &Extras,
    disk: &Arc<dyn Disk>,
    bundled: &mut Bundled,
) -> Result<Vec<Wanted>, BundleError> {
    let mut files: Vec<Wanted> = vec![("trial", "", trial.to_owned())];
    for (kind, word) in [(Kind::Amendment, "amendment"), (Kind::Hold, "hold")] {
        let found = numbered(trial, kind);
        let found = found.map_err(|source| BundleError::Unreadable { path: folder(trial), source })?;
        files.extend(found.into_iter().map(|found| (word, "", found.path)));
    }
    let segments = segments(trial, &bundled.trial_id, disk);
    if segments.is_empty() {
        bundled.remarks.push("no journal of the trial is there any more".to_owned());
    }
    files.extend(segments.into_iter().map(|path| ("journal", "journal", path)));
    files.extend(extras.logs.iter().map(|path| ("log", "logs", path.clone())));
    files.extend(extras.attachments.iter().map(|path| ("attachment", "attachments", path.clone())));
    match files.iter().find(|(_, _, path)| !path.is_file()) {
        Some((_, _, path)) => Err(BundleError::NoFile(path.clone())),
        None => Ok(files),
    }
}

/// The journal segments of a trial: those kept for it, else those that the recorder still has.
fn segments(trial: &Path, trial_id: &str, disk: &Arc<dyn Disk>) -> Vec<PathBuf> {
    let journal = journal_dir(&folder(trial));
    let plain = trial_id.chars().all(|c| c.is_ascii_alphanumeric() || c == '-');
    if !plain {
        return Vec::new();
    }
    let kept = journal.join("kept").join(trial_id);
    let mut found: Vec<PathBuf> = fs::read_dir(kept)
        .map(|entries| entries.filter_map(|entry| Some(entry.ok()?.path())).filter(|path| path.is_file()).collect())
        .unwrap_or_default();
    if found.is_empty() {
        for id in journals(&**disk, &journal).unwrap_or_default() {
            let Ok(reader) = JournalReader::open(Arc::clone(disk), &journal, &id) else { continue };
            let ranges = reader.trials().unwrap_or_default();
            let of_trial = ranges.iter().filter(|range| range.trial_id == trial_id);
            let needed = of_trial.flat_map(|range| super::keep::needed(reader.segments(), range));
            found.extend(needed.map(|segment| segment.path.clone()));
        }
    }
    found.sort();
    found.dedup();
    found
}

fn pack(
    trial: &Path,
    files: Vec<Wanted>,
    file: File,
    bundled: &mut Bundled,
    out: &Path,
    told: &mut impl FnMut(&Path),
) -> Result<(), BundleError> {
    let unwritable = |source| BundleError::Unwritable { path: out.to_owned(), source };
    let top = format!("{}-bundle", stem_of(trial));
    let mut tar = tar::Builder::new(BufWriter::new(file));
    let mut taken = BTreeSet::new();
    for (kind, dir, from) in files {
        told(&from);
        let path = free_name(dir, &from, &mut taken);
        let packed = append(&mut tar, &top, kind, path, from, out)?;
        bundled.files.push(packed);
    }
    let sums: String = bundled.files.iter().map(|file| format!("{}  {}\n", file.sha256, file.path)).collect();
    let manifest = serde_json::to_string_pretty(&bundled)? + "\n";
    for (name, text) in [("manifest.json", &manifest), ("SHA256SUMS", &sums)] {
        let mut header = header(text.len() as u64);
        let path = format!("{top}/{name}");
        tar.append_data(&mut header, path, text.as_bytes()).map_err(unwritable)?;
    }
    let mut buffer = tar.into_inner().map_err(unwritable)?;
    buffer.flush().map_err(unwritable)?;
    buffer.get_ref().sync_all().map_err(unwritable)
}

fn header(n_bytes: u64) -> tar::Header {
    let mut header = tar::Header::new_gnu();
    header.set_size(n_bytes);
    header.set_mode(0o444);
    header.set_mtime(0);
    header
}

/// A name within the archive that no other file has. It is the file's own last name, so it can't lead anywhere; a line feed
/// or backslash in it, which `SHA256SUMS` would have to escape, becomes `_`.
fn free_name(dir: &str, from: &Path, taken: &mut BTreeSet<String>) -> String {
    let name = from.file_name().unwrap_or_default().to_string_lossy().replace(['\n', '\r', '\\'], "_");
    let within = |name: &str| if dir.is_empty() { name.to_owned() } else { format!("{dir}/{name}") };
    let mut path = within(&name);
    let mut k = 1;
    while !taken.insert(path.clone()) {
        k += 1;
        path = within(&format!("{k}-{name}"));
    }
    path
}

fn append(
    tar: &mut tar::Builder<BufWriter<File>>,
    top: &str,
    kind: &'static str,
    path: String,
    from: PathBuf,
    out: &Path,
) -> Result<Packed, BundleError> {
    let unreadable = |source| BundleError::Unreadable { path: from.clone(), source };
    let file = File::open(&from).map_err(unreadable)?;
    let about = file.metadata().map_err(unreadable)?;
    let mut header = header(about.len());
    if let Ok(changed) =
        about.modified().and_then(|at| at.duration_since(std::time::UNIX_EPOCH).map_err(io::Error::other))
    {
        header.set_mtime(changed.as_secs());
    }
    let mut reader = Hashing { inner: file.take(about.len()), sha256: Sha256::new(), n_bytes: 0, failed: false };
    let appended = tar.append_data(&mut header, format!("{top}/{path}"), &mut reader);
    if reader.failed {
        return appended.map_err(unreadable).and_then(|()| Err(BundleError::Changed(from.clone())));
    }
    appended.map_err(|source| BundleError::Unwritable { path: out.to_owned(), source })?;
    if reader.n_bytes != about.len() {
        return Err(BundleError::Changed(from));
    }
    Ok(Packed { path, kind, bytes: about.len(), sha256: hex(reader.sha256), from })
}

/// Hashes what goes through it.
struct Hashing<R> {
    inner: R,
    sha256: Sha256,
    n_bytes: u64,
    failed: bool,
}

impl<R: Read> Read for Hashing<R> {
    fn read(&mut self, into: &mut [u8]) -> io::Result<usize> {
        let n = self.inner.read(into).inspect_err(|error| self.failed = error.kind() != io::ErrorKind::Interrupted)?;
        self.sha256.update(&into[..n]);
        self.n_bytes += n as u64;
        Ok(n)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn no_name_leads_out_of_the_archive_and_none_is_given_twice() {
        let mut taken = BTreeSet::new();
        let mut name = |from: &str| free_name("attachments", Path::new(from), &mut taken);
        assert_eq!(name("/film/../a.mov"), "attachments/a.mov");
        assert_eq!(name("/other/a.mov"), "attachments/2-a.mov");
        assert_eq!(name("/x/line\nfeed\\"), "attachments/line_feed_");
        assert_eq!(name(".."), "attachments/");
    }
}
