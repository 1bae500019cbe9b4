//! How the daemon says no: one clear sentence and exit code 2.

use std::process::Command;

use crate::nobody::{as_nobody, set_mode};
use crate::stage::Stage;

#[track_caller]
fn refused(command: &mut Command, parts: &[&str]) {
    let output = command.output().unwrap();
    assert_eq!(output.status.code(), Some(2), "{output:?}");
    let answer: serde_json::Value = serde_json::from_slice(&output.stdout).expect("one JSON object");
    let sentence = answer["error"].as_str().expect("the error");
    for part in parts {
        assert!(sentence.contains(part), "{part:?} in {sentence:?}");
    }
    assert!(!sentence.contains('\n'), "one sentence: {sentence}");
}

#[test]
fn a_wrong_port_is_named_with_its_device_and_what_to_do() {
    let stage = Stage::new();
    refused(&mut stage.daemon_command(), &["winch-node", "ports/winch-node is not there", "--wait-for-ports"]);
}

#[test]
fn a_port_that_is_a_file_is_no_port() {
    let stage = Stage::new();
    std::fs::create_dir(stage.path("ports")).unwrap();
    std::fs::write(stage.path("ports/winch-node"), "").unwrap();
    refused(&mut stage.daemon_command(), &["winch-node", "is not a serial port"]);
}

#[test]
fn a_directory_without_write_permission_is_named() {
    let stage = Stage::new();
    let archive = stage.path("trials");
    std::fs::create_dir(&archive).unwrap();
    set_mode(stage.dir.path(), 0o755);
    set_mode(&archive, 0o555);
    let mut command = as_nobody(stage.daemon_command(), stage.dir.path());
    refused(&mut command, &["cannot write in", "trials", "this user may write"]);
}

#[test]
fn a_second_daemon_is_told_who_holds_the_directory() {
    let stage = Stage::new();
    let mut command = stage.daemon_command();
    command.arg("--wait-for-ports");
    let first = stage.start_daemon_with(&["--wait-for-ports"]);
    first.wait_for("daemon", "recording");
    let process = format!("process {}", first.child.id());
    refused(&mut command, &["is held by another tautrail process", &process, "north-pier"]);
}

#[test]
fn an_absent_port_is_waited_for_when_asked_to() {
    let stage = Stage::new();
    let mut daemon = stage.start_daemon_with(&["--wait-for-ports"]);
    daemon.wait_for("link", "winch-node: port");
    assert_eq!(daemon.stop(), Some(0));
}
