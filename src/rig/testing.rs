//! The rehearsal's rigs for tests of every room, joined with the records that they point to. Invented data.

use std::path::Path;
use std::sync::LazyLock;

use super::{Rig, parse, read_joined};

/// The rehearsal's rig file with its records.
pub(crate) static NORTH_PIER: LazyLock<String> = LazyLock::new(|| joined("north-pier.toml"));

/// The rig file that uses every key, with its records.
pub(crate) static EVERY_KEY: LazyLock<String> = LazyLock::new(|| joined("every-key.toml"));

/// The rig file of the text instruments, with its records.
pub(crate) static TEXT_RIG: LazyLock<String> = LazyLock::new(|| joined("north-pier-text.toml"));

fn joined(name: &str) -> String {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal").join(name);
    read_joined(&path).unwrap()
}

pub(crate) fn north_pier() -> Rig {
    parse(&NORTH_PIER).unwrap()
}
