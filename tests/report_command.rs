//! `tautrail report` on a trial of the virtual rig: the page stands alone and shows what the trial says.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]

#[path = "support/journal.rs"]
mod journal_file;

use std::path::{Path, PathBuf};
use std::process::{Command, Output};
use std::sync::Arc;

use journal_file::{nominal, opened};
use tautrail::archive::seal;
use tautrail::journal::{Disk, RealDisk};

/// A nominal launch, played fast, sealed.
fn sealed_trial(folder: &Path) -> PathBuf {
    nominal(folder, 0.3, true);
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let (reader, range) = opened(folder);
    seal(&reader, &range, folder, &disk).expect("it can be sealed").path
}

fn report(args: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_tautrail")).arg("report").args(args).output().expect("tautrail starts")
}

#[test]
fn a_sealed_launch_becomes_a_page_with_replay_and_nothing_from_outside() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let trial = sealed_trial(folder.path());
    let before = std::fs::read(&trial).expect("the trial");
    let output = report(&[trial.to_str().expect("UTF-8")]);
    assert_eq!(output.status.code(), Some(0), "{}", String::from_utf8_lossy(&output.stderr));
    let html = std::fs::read_to_string(trial.with_extension("html")).expect("the page is beside the trial");
    for text in
        ["no such trial took place", "<h1>launched</h1>", "modelled", "inside the window", "is no safety device"]
    {
        assert!(html.contains(text), "{text}");
    }
    assert!(!html.contains("No replay was made") && !html.contains("NO LONGER MATCHES") && !html.contains("NaN"));
    assert!(!html.contains("src=") && !html.contains("href="));
    assert_eq!(html.matches("<svg ").count(), 15, "strip, 3 tensions, 6 motions, 4 residuals, energy");
    assert_eq!(std::fs::read(&trial).expect("the trial"), before, "the trial file is only read");
}

#[test]
fn what_is_no_trial_is_refused_and_never_overwritten() {
    let folder = tempfile::tempdir().expect("a temporary folder");
    let path = folder.path().join("notes.h5");
    std::fs::write(&path, "no trial").expect("it can be written");
    let shown = path.to_str().expect("UTF-8");
    let output = report(&[shown]);
    assert_eq!(output.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&output.stderr).contains("notes.h5"));
    let output = report(&["--out", shown, shown]);
    assert_eq!(output.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&output.stderr).contains("is the trial itself, choose another name with --out"));
    assert_eq!(std::fs::read_to_string(&path).expect("it is there"), "no trial");
}
