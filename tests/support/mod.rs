//! What whole-program tests share: the Python of the oracles.

#![allow(clippy::expect_used, reason = "a test that cannot go on stops here")]

use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

/// The Python that holds the pinned reference libraries, set up on first use.
///
/// # Panics
/// When it cannot be set up: a missing oracle fails the run, it never skips.
fn oracle_python() -> PathBuf {
    let setup = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/oracles/setup");
    let output = Command::new(&setup).stderr(Stdio::inherit()).output().expect("tools/oracles/setup starts");
    assert!(output.status.success(), "tools/oracles/setup failed, see its message above");
    PathBuf::from(String::from_utf8(output.stdout).expect("a path in UTF-8").trim())
}

/// Runs a Python text in the oracles' environment with arguments, returns what it printed.
///
/// # Panics
/// When the script fails: its message is part of the panic.
pub fn run_oracle(script: &str, args: &[&str]) -> String {
    let output = Command::new(oracle_python()).arg("-c").arg(script).args(args).output().expect("python starts");
    assert!(output.status.success(), "the oracle failed: {}", String::from_utf8_lossy(&output.stderr));
    String::from_utf8(output.stdout).expect("the oracle prints UTF-8")
}
