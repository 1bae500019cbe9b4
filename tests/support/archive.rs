//! One sealed launch for tests of the archive, and how its commands are run.

use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::LazyLock;

use serde_json::Value;

use crate::journal_file::{TRIAL_ID, nominal, opened};

/// An archive with one sealed launch and its journal; what `recover` said when it was sealed.
pub static ARCHIVE: LazyLock<(tempfile::TempDir, String)> = LazyLock::new(|| {
    let dir = tempfile::tempdir().unwrap();
    nominal(dir.path(), 0.1, true);
    assert_eq!(opened(dir.path()).1.trial_id, TRIAL_ID);
    let (code, said) = tautrail(&["recover", dir.path().to_str().unwrap()]);
    assert_eq!(code, 0, "{said}");
    (dir, said)
});

pub fn sealed_trial() -> PathBuf {
    ARCHIVE.0.path().join(format!("trial-{TRIAL_ID}.h5"))
}

/// A copy of the sealed trial in a directory of its own.
pub fn copied() -> (tempfile::TempDir, PathBuf) {
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join(format!("trial-{TRIAL_ID}.h5"));
    std::fs::copy(sealed_trial(), &path).unwrap();
    (dir, path)
}

/// Exit code and everything said.
pub fn tautrail(args: &[&str]) -> (i32, String) {
    let output = Command::new(env!("CARGO_BIN_EXE_tautrail")).args(args).env("NO_COLOR", "1").output().unwrap();
    let said = [output.stdout, output.stderr].concat();
    (output.status.code().unwrap(), String::from_utf8(said).unwrap())
}

pub fn json(args: &[&str]) -> Value {
    let (_, said) = tautrail(&[&["--json"], args].concat());
    serde_json::from_str(&said).unwrap_or_else(|error| panic!("{error}: {said}"))
}

pub fn shown(path: &Path) -> &str {
    path.to_str().unwrap()
}

/// Makes a sealed file writable, for tests that damage it.
pub fn unlock(path: &Path) {
    let mut permissions = std::fs::metadata(path).unwrap().permissions();
    std::os::unix::fs::PermissionsExt::set_mode(&mut permissions, 0o644);
    std::fs::set_permissions(path, permissions).unwrap();
}
