//! The trial files kept of each version of the format: packed with gzip, since most of a small HDF5 file is empty index.

use std::path::{Path, PathBuf};

/// Unpacks `tests/archive-files/<name>.gz` into a directory.
pub fn kept(name: &str, dir: &Path) -> PathBuf {
    let packed = Path::new(env!("CARGO_MANIFEST_DIR")).join("tests/archive-files").join(format!("{name}.gz"));
    let packed = std::fs::read(packed).unwrap();
    // The last four bytes are the length, little-endian (RFC 1952, 2.3.1).
    let length = u32::from_le_bytes(*packed.last_chunk().unwrap());
    let mut whole = vec![0; length as usize];
    libdeflater::Decompressor::new().gzip_decompress(&packed, &mut whole).unwrap();
    let path = dir.join(name);
    std::fs::write(&path, whole).unwrap();
    path
}
