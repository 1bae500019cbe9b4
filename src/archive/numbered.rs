//! Small numbered texts beside a trial: amendments and holds.
//!
//! `trial-<id>.<kind>-0001.toml`, `-0002`, … Each is made whole or not at all, under a number that nobody else has, synced,
//! and never written again. Numbers are four digits or more.

use std::fs::{self, File, OpenOptions, Permissions};
use std::io::{self, Read, Write};
use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};

use crate::journal::{Disk, RealDisk};

/// No text that a person wrote is larger; a larger file is not read.
pub(super) const TEXT_BYTES_MAX: u64 = 16 << 20;

/// What the numbered files beside a trial are.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Kind {
    Amendment,
    Hold,
}

impl Kind {
    const fn word(self) -> &'static str {
        match self {
            Self::Amendment => "amend",
            Self::Hold => "hold",
        }
    }
}

/// One numbered file.
#[derive(Debug, Clone, PartialEq, Eq, PartialOrd, Ord)]
pub(super) struct Numbered {
    pub(super) number: u32,
    pub(super) path: PathBuf,
}

/// The name without its last ending: what the names of a trial's numbered files begin with.
pub(super) fn stem_of(trial: &Path) -> String {
    trial.file_stem().unwrap_or_default().to_string_lossy().into_owned()
}

/// The number in `name` if it is a `kind` of the trial `stem`.
pub(super) fn number_in(name: &str, stem: &str, kind: Kind) -> Option<u32> {
    let digits = name.strip_prefix(stem)?.strip_prefix('.')?.strip_prefix(kind.word())?.strip_prefix('-')?;
    let digits = digits.strip_suffix(".toml")?;
    let plain = digits.len() >= 4 && digits.bytes().all(|byte| byte.is_ascii_digit());
    digits.parse().ok().filter(|number| plain && *number > 0 && file_digits(*number) == digits)
}

fn file_digits(number: u32) -> String {
    format!("{number:04}")
}

/// The files of a kind beside a trial, by number.
pub(super) fn numbered(trial: &Path, kind: Kind) -> io::Result<Vec<Numbered>> {
    let (dir, stem) = (folder(trial), stem_of(trial));
    let mut found = Vec::new();
    for entry in fs::read_dir(&dir)? {
        let entry = entry?;
        if let Some(number) = number_in(&entry.file_name().to_string_lossy(), &stem, kind) {
            found.push(Numbered { number, path: entry.path() });
        }
    }
    found.sort();
    Ok(found)
}

/// Makes `trial-<id>.<kind>-<number>.toml` with this text; `AlreadyExists` where somebody was faster.
pub(super) fn create(trial: &Path, kind: Kind, number: u32, text: &str) -> io::Result<PathBuf> {
    let (dir, stem) = (folder(trial), stem_of(trial));
    let path = dir.join(format!("{stem}.{}-{}.toml", kind.word(), file_digits(number)));
    let (part, mut file) = new_part(&dir, &format!("{stem}.{}", kind.word()))?;
    let made = (|| {
        file.write_all(text.as_bytes())?;
        fs::set_permissions(&part, Permissions::from_mode(0o444))?;
        file.sync_all()?;
        RealDisk.rename_noreplace(&part, &path)?;
        RealDisk.sync_dir(&dir)
    })();
    if made.is_err() {
        // Left behind it is only a hidden file that nobody reads.
        let _ = fs::remove_file(&part);
    }
    made.map(|()| path)
}

/// A new hidden file that no other process or thread has.
pub(super) fn new_part(dir: &Path, name: &str) -> io::Result<(PathBuf, File)> {
    for k in 0..u32::MAX {
        let part = dir.join(format!(".{name}.{}-{k}.part", std::process::id()));
        match OpenOptions::new().write(true).create_new(true).open(&part) {
            Err(error) if error.kind() == io::ErrorKind::AlreadyExists => {}
            opened => return opened.map(|file| (part, file)),
        }
    }
    Err(io::Error::from(io::ErrorKind::AlreadyExists))
}

/// The text of a numbered file.
pub(super) fn read_text(path: &Path) -> io::Result<String> {
    let mut text = String::new();
    let n = File::open(path)?.take(TEXT_BYTES_MAX + 1).read_to_string(&mut text)?;
    if n as u64 > TEXT_BYTES_MAX {
        return Err(io::Error::new(io::ErrorKind::InvalidData, format!("it is larger than {TEXT_BYTES_MAX} bytes")));
    }
    Ok(text)
}

pub(super) fn folder(path: &Path) -> PathBuf {
    path.parent().filter(|dir| !dir.as_os_str().is_empty()).map_or_else(|| PathBuf::from("."), Path::to_owned)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_a_name_that_this_program_gives_has_a_number() {
        let number = |name| number_in(name, "trial-000001-7f3a9c", Kind::Amendment);
        assert_eq!(number("trial-000001-7f3a9c.amend-0001.toml"), Some(1));
        assert_eq!(number("trial-000001-7f3a9c.amend-12345.toml"), Some(12_345));
        for other in [
            "trial-000001-7f3a9c.amend-1.toml",
            "trial-000001-7f3a9c.amend-00001.toml",
            "trial-000001-7f3a9c.amend-0000.toml",
            "trial-000001-7f3a9c.amend-+001.toml",
            "trial-000001-7f3a9c.hold-0001.toml",
            "trial-000001-7f3a9c-2.amend-0001.toml",
            "trial-000001-7f3a9c.amend-0001.toml~",
        ] {
            assert_eq!(number(other), None, "{other}");
        }
    }

    #[test]
    fn a_number_is_given_once() {
        let dir = tempfile::tempdir().unwrap();
        let trial = dir.path().join("trial-a.h5");
        create(&trial, Kind::Hold, 1, "first").unwrap();
        let again = create(&trial, Kind::Hold, 1, "second").unwrap_err();
        assert_eq!(again.kind(), io::ErrorKind::AlreadyExists);
        assert_eq!(fs::read_dir(dir.path()).unwrap().count(), 1, "nothing half-made is left");
        let found = numbered(&trial, Kind::Hold).unwrap();
        assert_eq!((found.len(), read_text(&found[0].path).unwrap().as_str()), (1, "first"));
    }
}
