//! A board that is being brought up: the daemon and `check` say what is wrong with it.

use std::fs::File;
use std::io::Write;
use std::os::unix::fs::symlink;

use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};

use crate::stage::Stage;

/// The board's end of a port that the rig file names.
fn port(stage: &Stage, name: &str) -> File {
    let board = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY).unwrap();
    grantpt(&board).unwrap();
    unlockpt(&board).unwrap();
    let node = ptsname(&board, Vec::new()).unwrap().into_string().unwrap();
    std::fs::create_dir_all(stage.path("ports")).unwrap();
    symlink(node, stage.path("ports").join(name)).unwrap();
    File::from(board)
}

/// The wire of a vector of SPEC.md.
fn vector(name: &str) -> Vec<u8> {
    let path = format!("{}/firmware-protocol/vectors/{name}.txt", env!("CARGO_MANIFEST_DIR"));
    let text = std::fs::read_to_string(path).unwrap();
    let hex = text.lines().find_map(|line| line.strip_prefix("frame: ")).unwrap();
    (0..hex.len()).step_by(2).map(|at| u8::from_str_radix(&hex[at..at + 2], 16).unwrap()).collect()
}

#[test]
fn a_link_that_gives_no_samples_is_told_and_fails_the_check() {
    let stage = Stage::new();
    let (mut winch, _silent) = (port(&stage, "winch-node"), port(&stage, "shuttle-node"));
    let mut daemon = stage.start_daemon();
    daemon.wait_for("link", "winch-node: ");
    winch.write_all(&vector("refused-checksum")).unwrap();
    winch.write_all(&vector("refused-direction")).unwrap();
    daemon.wait_for("loss", "winch-node: 1 refused, checksum mismatch");
    daemon.wait_for("alarm", "winch-node: 2 frames refused, none accepted yet");
    daemon.wait_for("alarm", "shuttle-node: nothing came in the 3 s");
    let rig = stage.path("rig.toml");
    let checked = stage.ask(&["check", rig.to_str().unwrap()]);
    let said = String::from_utf8_lossy(&checked.stdout).into_owned();
    assert_eq!(checked.status.code(), Some(1), "{said}");
    let direction = "kind 0x03 (edge): direction has a value that the protocol does not know";
    for part in ["look at: shuttle-node: nothing came", "look at: winch-node: 2 frames refused", direction] {
        assert!(said.contains(part), "{part} in {said}");
    }
    assert!(!said.contains("error") && !said.contains("port absent"), "only the links fail it: {said}");
    winch.write_all(&vector("describe")).unwrap();
    daemon.wait_for("device", "winch-node: describes itself: firmware tension 1.4.0, line and anchor 10000 Hz, ");
    winch.write_all(&vector("text")).unwrap();
    daemon.wait_for("text", "winch-node: excitation 4.98 V, 20 °C");
    assert_eq!(daemon.stop(), Some(0));
}
