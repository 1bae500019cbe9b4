//! Writing a text that must not silently take another's place.

use std::fs;
use std::io::Write as _;
use std::path::Path;

use thiserror::Error;

#[derive(Debug, Error)]
pub enum NewFileError {
    #[error("{path}: cannot be written: {source}")]
    Unwritable { path: String, source: std::io::Error },
    #[error("{path} is already there: choose another name, or --replace it (trials keep the card they were made with)")]
    Exists { path: String },
}

/// Says before the work what [`write_new`] would say after it.
pub fn refuse_existing(path: &Path, replace: bool) -> Result<(), NewFileError> {
    let there = !replace && path.exists();
    if there { Err(NewFileError::Exists { path: path.display().to_string() }) } else { Ok(()) }
}

pub fn write_new(path: &Path, text: &str, replace: bool) -> Result<(), NewFileError> {
    let shown = path.display().to_string();
    let mut options = fs::OpenOptions::new();
    options.write(true).truncate(true);
    let options = if replace { options.create(true) } else { options.create_new(true) };
    let written = options.open(path).and_then(|mut file| file.write_all(text.as_bytes()));
    written.map_err(|source| match source.kind() {
        std::io::ErrorKind::AlreadyExists => NewFileError::Exists { path: shown },
        _ => NewFileError::Unwritable { path: shown, source },
    })
}
