//! The archive's commands as a crew meets them: what they print, what they exit with.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]
#![allow(dead_code, reason = "the support files serve several tests")]

#[path = "support/archive.rs"]
mod archive;
#[path = "support/journal.rs"]
mod journal_file;
#[path = "support/kept.rs"]
mod kept_file;
mod support;

use std::path::{Path, PathBuf};

use archive::{ARCHIVE, json, sealed_trial as trial, tautrail, unlock};

#[test]
fn recover_seals_once_and_says_what() {
    let (dir, first) = &*ARCHIVE;
    assert!(first.contains("sealed ") && first.contains("launched") && first.contains("0 missing"), "{first}");
    let dir = dir.path().to_str().unwrap();
    let (code, again) = tautrail(&["recover", dir]);
    assert_eq!(code, 0);
    assert!(again.contains("is sealed already"), "{again}");
    assert_eq!(json(&["recover", dir])["trials"][0]["fate"], "already_sealed");
}

#[test]
fn a_directory_that_is_not_there_is_a_sentence_and_exit_code_2() {
    for command in ["recover", "trials"] {
        let (code, said) = tautrail(&[command, "/no/such/directory"]);
        assert_eq!(code, 2, "{said}");
        assert!(said.contains("/no/such/directory"), "{said}");
    }
    let (code, said) = tautrail(&["show", "/no/such/trial.h5"]);
    assert_eq!(code, 2);
    assert!(said.contains("/no/such/trial.h5"), "{said}");
}

#[test]
fn trials_lists_what_opens_and_names_what_does_not() {
    let dir = tempfile::tempdir().unwrap();
    std::fs::copy(trial(), dir.path().join("trial-000001-7f3a9c.h5")).unwrap();
    std::fs::write(dir.path().join("trial-000002-000000.h5"), b"cut short").unwrap();
    std::fs::write(dir.path().join("notes.txt"), b"").unwrap();
    let (code, said) = tautrail(&["trials", dir.path().to_str().unwrap()]);
    assert_eq!(code, 1, "{said}");
    assert!(said.contains("north-pier") && said.contains("launched"), "{said}");
    assert!(said.contains("UNREADABLE") && said.contains("trial-000002-000000.h5"), "{said}");
    let listed = json(&["trials", dir.path().to_str().unwrap()]);
    assert_eq!(listed["trials"].as_array().unwrap().len(), 2);
    assert!(listed["trials"][0]["launch_speed_mps"].as_f64().is_some_and(|speed| (10.0..25.0).contains(&speed)));
}

#[test]
fn show_says_results_with_intervals_and_whose_job_safety_is() {
    let path = trial();
    let (code, said) = tautrail(&["show", "--events", path.to_str().unwrap()]);
    assert_eq!(code, 0, "{said}");
    for part in ["launch_speed", "95 %", "raw winch-node/line", "raw sha256", "closed: slack again", "no safety device"]
    {
        assert!(said.contains(part), "{part} is not in {said}");
    }
    let shown = json(&["show", path.to_str().unwrap()]);
    assert_eq!(shown["raw_sha256"], json(&["verify", path.to_str().unwrap()])["trials"][0]["raw_sha256"]);
}

#[test]
fn verify_passes_a_sound_file() {
    let path = trial();
    let (code, said) = tautrail(&["verify", path.to_str().unwrap()]);
    assert_eq!(code, 0, "{said}");
    assert!(said.contains(": sound, "), "{said}");
    assert_eq!(json(&["verify", path.to_str().unwrap()])["trials"][0]["derived_again"], true);
}

/// Copies the trial `n` times and alters each through h5py; `deed` sees the file `f`, its number `k` and `random`.
fn altered(dir: &Path, n: usize, deed: &str) -> Vec<PathBuf> {
    altered_of(&trial(), dir, n, deed)
}

fn altered_of(trial: &Path, dir: &Path, n: usize, deed: &str) -> Vec<PathBuf> {
    let paths: Vec<PathBuf> = (0..n).map(|k| dir.join(format!("altered-{k}.h5"))).collect();
    for path in &paths {
        std::fs::copy(trial, path).unwrap();
        unlock(path);
    }
    let script = format!(
        "import sys,h5py,random\nrandom.seed(1)\nfor k, p in enumerate(sys.argv[1:]):\n with h5py.File(p,'r+') as f:\n  {deed}"
    );
    let args: Vec<&str> = paths.iter().map(|path| path.to_str().unwrap()).collect();
    support::run_oracle(&script, &args);
    paths
}

#[test]
fn verify_finds_every_single_altered_count() {
    let dir = tempfile::tempdir().unwrap();
    let deed = "d = f['raw'][random.choice(['winch-node/line','winch-node/anchor','shuttle-node/encoder','shuttle-node/accel'])]; i = random.randrange(len(d)); d[i] = d[i] ^ (1 << random.randrange(16))";
    let paths = altered(dir.path(), 40, deed);
    let mut args = vec!["verify", "--stored-only"];
    args.extend(paths.iter().map(|path| path.to_str().unwrap()));
    let verified = json(&args);
    for trial in verified["trials"].as_array().unwrap() {
        let findings = trial["findings"].to_string();
        assert!(
            trial["sound"] == false && findings.contains("raw data of ") && findings.contains("-node changed"),
            "{trial}"
        );
    }
    assert_eq!(verified["trials"].as_array().unwrap().len(), 40);
}

#[test]
fn verify_derives_signals_and_results_again_and_says_what_differs() {
    let dir = tempfile::tempdir().unwrap();
    let small = kept_file::kept("format-1.h5", dir.path());
    let check = |deed: &str, expected: &str| {
        let path = altered_of(&small, dir.path(), 1, deed).remove(0);
        let (code, said) = tautrail(&["verify", path.to_str().unwrap()]);
        assert_eq!(code, 1, "{deed}: {said}");
        assert!(said.contains(expected), "{deed}: {said}");
    };
    check("f['signals/line/value'][123] += 0.001", "signal line: value");
    check("f['signals/encoder/time'][17] += 1e-9", "time");
    check("f['result/hold_tension'][()] += 0.01", "result hold_tension is");
    check("f['result/hold_tension'].attrs['standard_uncertainty'] *= 1.01", "result hold_tension is");
    check("f['result/instants/time'][1] += 0.001", "instant release is at");
    check("f['signals/line'].move('value', 'velue')", "value is missing");
}

#[test]
fn verify_says_in_words_what_else_is_wrong() {
    let dir = tempfile::tempdir().unwrap();
    let check = |deed: &str, expected: &str| {
        let path = altered(dir.path(), 1, deed).remove(0);
        let (code, said) = tautrail(&["verify", "--stored-only", path.to_str().unwrap()]);
        assert_eq!(code, 1, "{deed}: {said}");
        assert!(said.contains(expected), "{deed}: {said}");
    };
    check("f['raw/winch-node/blocks/first_index'][50:] += 100", "jumps from index");
    check("f['raw/winch-node/line'].resize((1000,))", "channel line has 1000 counts");
    check("f['signals/line/time'][500] = 0.0", "time does not move on at sample 500");
    check("f['clock/winch-node/map/period'][0] = -1.0", "does not run forward");
    check("f['raw/winch-node/blocks/first_tick'][50] = 0", "ticks of stream 1 do not move on at block 50");
    check("f['clock/host/boottime'][1] = 0", "clock boottime runs backward");
    check("f['rig/rig.toml'][()] = 'name = 1'", "rig.toml is not the one sealed");
    check("del f['raw/winch-node/gaps/stream']", "stream is missing");
    check("f.attrs['outcome'] = 'let-down'", "among the results");
}

#[test]
fn every_command_explains_itself_with_an_example() {
    for command in ["recover", "trials", "show", "verify", "amend", "hold", "bundle", "export"] {
        let (code, said) = tautrail(&[command, "--help"]);
        assert_eq!(code, 0);
        assert!(said.contains("Examples:"), "{said}");
    }
    let (_, said) = tautrail(&["--help"]);
    assert!(!said.contains("seal-child"), "{said}");
}
