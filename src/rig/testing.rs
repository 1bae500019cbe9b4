//! The rehearsal's rig for tests of every room, with the records that it points to. Invented data.

use super::{Rig, parse, read_joined};

/// The rig file's text with its records.
pub(crate) fn north_pier_text() -> String {
    let path = concat!(env!("CARGO_MANIFEST_DIR"), "/tools/rehearsal/north-pier.toml");
    read_joined(std::path::Path::new(path)).unwrap()
}

pub(crate) fn north_pier() -> Rig {
    parse(&north_pier_text()).unwrap()
}
