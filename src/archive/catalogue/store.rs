//! The index file: a line a trial, each with its own checksum, replaced as a whole.
//!
//! Lines that can't be believed are as if they weren't there. JSON writes numbers so that they come back bit for bit; a
//! row with a number that JSON has not (not a number) is left out, and so is read from its file every time.

use std::collections::BTreeMap;
use std::fs::{self, File};
use std::io::{self, BufWriter, Read, Write};
use std::path::Path;

use serde::{Deserialize, Serialize};

use super::super::numbered::new_part;
use super::row::TrialRow;

const NAME: &str = ".trials-index";
/// Of another program version nothing is taken over: it may have read a trial differently.
const HEAD: &str = concat!("tautrail-index 1 of ", env!("CARGO_PKG_VERSION"));
/// A larger file is no index of ours.
const BYTES_MAX: u64 = 1 << 30;

/// What a row depends on.
#[derive(Debug, Clone, PartialEq, Eq, Serialize, Deserialize)]
pub(super) struct Key {
    pub(super) bytes: u64,
    pub(super) changed_ns: i64,
    pub(super) n_amendments: u32,
    pub(super) amendment_bytes: u64,
    pub(super) newest_amendment_ns: i64,
}

/// A row, and what it was read from.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub(super) struct Seen {
    pub(super) key: Key,
    pub(super) row: TrialRow,
}

#[derive(Serialize, Deserialize)]
struct Line {
    name: String,
    #[serde(flatten)]
    seen: Seen,
}

/// What the index remembers, by file name; empty where there is none that can be read.
pub(super) fn load(dir: &Path) -> BTreeMap<String, Seen> {
    let mut text = Vec::new();
    let Ok(file) = File::open(dir.join(NAME)) else { return BTreeMap::new() };
    match file.take(BYTES_MAX + 1).read_to_end(&mut text) {
        Ok(n) if n as u64 <= BYTES_MAX => {}
        _ => return BTreeMap::new(),
    }
    let mut lines = text.split(|byte| *byte == b'\n');
    if lines.next() != Some(HEAD.as_bytes()) {
        return BTreeMap::new();
    }
    lines.filter_map(parse).map(|line| (line.name, line.seen)).collect()
}

fn parse(line: &[u8]) -> Option<Line> {
    let (sum, json) = line.split_at_checked(9)?;
    let sum = u32::from_str_radix(std::str::from_utf8(sum).ok()?.strip_suffix(' ')?, 16).ok()?;
    if crc32c::crc32c(json) != sum {
        return None;
    }
    serde_json::from_slice(json).ok()
}

/// Replaces the index. Two who do so at once replace each other's: each is whole.
pub(super) fn save(dir: &Path, rows: impl Iterator<Item = (String, Seen)>) -> io::Result<()> {
    let (part, file) = new_part(dir, "trials-index")?;
    let mut to = BufWriter::new(file);
    let written = (|| {
        writeln!(to, "{HEAD}")?;
        for (name, seen) in rows {
            if seen.row.results.iter().any(|result| !(result.value + result.standard_uncertainty).is_finite()) {
                continue;
            }
            let json = serde_json::to_string(&Line { name, seen })?;
            writeln!(to, "{:08x} {json}", crc32c::crc32c(json.as_bytes()))?;
        }
        to.flush()?;
        fs::rename(&part, dir.join(NAME))
    })();
    if written.is_err() {
        let _ = fs::remove_file(&part);
    }
    written
}
