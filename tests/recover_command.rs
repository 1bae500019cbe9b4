//! `tautrail recover` as a crew runs it after something broke: a journal that cannot be read is named and holds up no other.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]

#[path = "support/journal.rs"]
mod journal_file;
#[path = "support/nobody.rs"]
mod nobody;

use std::path::Path;
use std::process::{Command, Output};

use journal_file::{RIG_TEXT, TRIAL_ID, nominal, opened, opening};
use nobody::{as_nobody, set_mode};
use serde_json::Value;
use tautrail::journal::{Body, Record, segment_name};
use tautrail::link::DeviceIdx;

/// A journal of one launch.
fn sound(dir: &Path) {
    nominal(dir, 0.02, true);
}

fn of_a_later_format() -> Vec<u8> {
    let mut open = opening(&RIG_TEXT);
    open.format_version = 99;
    let mut bytes = Vec::new();
    let body = Body::SegmentOpen(Box::new(open));
    Record { seq: 1, host_ns: 0, device: DeviceIdx(0), body }.encode(&mut bytes);
    bytes
}

fn recover(dir: &Path, args: &[&str]) -> Output {
    let mut command = Command::new(env!("CARGO_BIN_EXE_tautrail"));
    command.arg("recover").arg(dir.join("trials")).args(args);
    set_mode(dir, 0o755);
    as_nobody(command, dir).output().unwrap()
}

#[test]
fn bad_journals_are_named_and_the_others_are_sealed() {
    let dir = tempfile::tempdir().unwrap();
    let trials = dir.path().join("trials");
    sound(&trials);
    let journals = trials.join("journal");
    let segment = |id: &str| journals.join(segment_name(id, 1));
    // Before and after the sound one, which is 000001-abc123.
    let bad = ["000000-aaaaaa", "000002-bbbbbb", "000003-cccccc"].map(segment);
    std::fs::write(&bad[0], "no journal at all").unwrap();
    std::fs::write(&bad[1], of_a_later_format()).unwrap();
    std::fs::copy(segment("000001-abc123"), &bad[2]).unwrap();
    set_mode(&bad[2], 0o000);
    let kept = journals.join("kept");
    let bad_kept = kept.join("000009-dddddd").join(segment_name("000004-eeeeee", 1));
    std::fs::create_dir_all(bad_kept.parent().unwrap()).unwrap();
    std::fs::write(&bad_kept, "half a copy").unwrap();
    std::fs::write(kept.join("notes.txt"), "left here by somebody").unwrap();
    std::fs::create_dir(kept.join("000010-ffffff")).unwrap();
    std::fs::write(segment("000005-abcabc"), "").unwrap(); // made ahead and never begun: nothing is missing
    for path in [&trials, &journals, &kept] {
        set_mode(path, 0o777);
    }

    let output = recover(dir.path(), &["--json"]);
    assert_eq!(output.status.code(), Some(1), "{output:?}");
    let told: Value = serde_json::from_slice(&output.stdout).unwrap();
    assert_eq!(told["trials"][0]["fate"], "sealed", "{told}");
    assert!(trials.join(format!("trial-{TRIAL_ID}.h5")).exists());
    let unreadable = told["unreadable"].as_array().unwrap();
    let named: Vec<&str> = unreadable.iter().map(|one| one["path"].as_str().unwrap()).collect();
    let expected = bad.iter().chain([&bad_kept]).map(|path| path.to_str().unwrap());
    assert_eq!(named, expected.collect::<Vec<_>>(), "{told}");
    for (one, part) in unreadable.iter().zip(["000000-aaaaaa", "format 99", "ermission denied", "000004-eeeeee"]) {
        assert!(one["error"].as_str().unwrap().contains(part), "{part:?} in {one}");
    }
    for path in &bad {
        assert!(path.exists(), "it is left as it is");
    }

    let output = recover(dir.path(), &[]);
    let said = String::from_utf8(output.stdout).unwrap();
    assert_eq!(output.status.code(), Some(1), "{said}");
    assert_eq!(said.matches("NOT READ").count(), 4, "{said}");
    assert!(said.contains("is sealed already"), "{said}");
}

#[test]
fn a_directory_that_may_not_be_written_is_one_sentence_and_exit_code_2() {
    let dir = tempfile::tempdir().unwrap();
    let trials = dir.path().join("trials");
    sound(&trials);
    set_mode(&trials, 0o555);
    let output = recover(dir.path(), &[]);
    assert_eq!(output.status.code(), Some(2), "{output:?}");
    let said = String::from_utf8(output.stderr).unwrap();
    assert!(said.contains("cannot write in") && said.contains("this user may write"), "{said}");
    assert_eq!(said.trim().lines().count(), 1, "one sentence: {said}");
    let (_, range) = opened(&trials);
    assert_eq!(range.trial_id, TRIAL_ID, "the journal is as it was");
}
