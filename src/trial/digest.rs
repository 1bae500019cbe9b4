//! The SHA-256 of raw groups, defined over content and not over bytes of the file.
//!
//! For every dataset below the group: `D = SHA-256(name ‖ type ‖ rank ‖ dims ‖ SHA-256(values))`, where a text is its u32
//! length and UTF-8 bytes, `type` the code of [`super::column::Cell::CODE`], rank a u32, dims u64, values row-major; all
//! integers little-endian, texts among values as u32 length and bytes. `name` is the path below the group, parts joined
//! by `/`. The group's digest is `SHA-256` over all `D`, sorted by the bytes of their names. FORMAT.md has an example.

use sha2::{Digest, Sha256};

use super::column::Cell;

/// Digest of one dataset.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct DatasetDigest {
    name: String,
    digest: [u8; 32],
}

impl DatasetDigest {
    pub(super) fn new(name: &str, code: &str, dims: &[u64], values: Sha256) -> Self {
        let mut all = Sha256::new();
        put_text(&mut all, name);
        put_text(&mut all, code);
        all.update((dims.len() as u32).to_le_bytes());
        dims.iter().for_each(|dim| all.update(dim.to_le_bytes()));
        all.update(values.finalize());
        Self { name: name.to_owned(), digest: all.finalize().into() }
    }

    /// Digest of a scalar text (rank 0).
    pub(super) fn of_text(name: &str, text: &str) -> Self {
        let mut values = Sha256::new();
        put_text(&mut values, text);
        Self::new(name, String::CODE, &[], values)
    }
}

fn put_text(hasher: &mut Sha256, text: &str) {
    hasher.update((text.len() as u32).to_le_bytes());
    hasher.update(text.as_bytes());
}

/// The digest of a group, lower-case hex.
pub(super) fn group_digest(mut datasets: Vec<DatasetDigest>) -> String {
    datasets.sort_by(|a, b| a.name.as_bytes().cmp(b.name.as_bytes()));
    let mut all = Sha256::new();
    datasets.iter().for_each(|dataset| all.update(dataset.digest));
    hex(&all.finalize())
}

/// The digest over all devices: (member name, its digest) in the order of the names' bytes.
pub(super) fn devices_digest<'a>(parts: impl Iterator<Item = (&'a str, &'a str)>) -> String {
    let lines: String = parts.map(|(member, digest)| format!("{member}\n{digest}\n")).collect();
    text_sha256(&lines)
}

/// SHA-256 of a text, lower-case hex: what `configuration_hash` and carried texts use.
pub fn text_sha256(text: &str) -> String {
    hex(&Sha256::digest(text.as_bytes()))
}

fn hex(bytes: &[u8]) -> String {
    bytes.iter().map(|byte| format!("{byte:02x}")).collect()
}
