//! The rehearsal's rig files, joined with the calibration records that they point to. Invented data.

use std::path::Path;

/// The text of a rig file in `tools/rehearsal` with its records; as a file it needs none beside it.
///
/// # Panics
/// When the file can't be read: the tests that need it can't go on.
pub fn rig_text(name: &str) -> String {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal").join(name);
    tautrail::rig::read_joined(&path).unwrap_or_else(|error| panic!("{error}"))
}
