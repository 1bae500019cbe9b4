//! Records and pages on the disk. A record is never overwritten: an older one may be in use.

use std::fs::{self, OpenOptions};
use std::io::Write;
use std::path::Path;

use super::{Failure, Work};

pub(super) fn record(work: &Work, text: &str) -> Result<(), Failure> {
    let Some(path) = &work.record else { return Ok(()) };
    folder_of(path)?;
    let opened = OpenOptions::new().write(true).create_new(true).open(path);
    let mut file = opened.map_err(|error| format!("{}: {error}; a record is never overwritten", path.display()))?;
    file.write_all(text.as_bytes()).map_err(|error| format!("{}: {error}", path.display()))?;
    Ok(file.sync_all().map_err(|error| format!("{}: {error}", path.display()))?)
}

pub(super) fn page(work: &Work, html: &str) -> Result<(), Failure> {
    let Some(path) = &work.page else { return Ok(()) };
    folder_of(path)?;
    Ok(fs::write(path, html).map_err(|error| format!("{}: {error}", path.display()))?)
}

fn folder_of(path: &Path) -> Result<(), Failure> {
    let Some(folder) = path.parent().filter(|folder| !folder.as_os_str().is_empty()) else { return Ok(()) };
    Ok(fs::create_dir_all(folder).map_err(|error| format!("{}: {error}", folder.display()))?)
}
