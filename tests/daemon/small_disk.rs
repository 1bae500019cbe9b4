//! A real disk that fills up under the real daemon: a memory disk of 24 MiB, mounted for the daemon's process alone.
//!
//! Needs the right to mount (root, or user namespaces); without it the test fails, it is not skipped.

use std::process::Command;

use crate::stage::{DEVICES, Daemon, Stage};

#[test]
fn a_full_disk_ends_the_trial_under_way_cleanly_and_room_lets_it_go_on() {
    let stage = Stage::new();
    let rig = stage.play_at_pace(0.6, ".");
    let script = concat!(env!("CARGO_MANIFEST_DIR"), "/tests/daemon/small_disk.sh");
    let mut command = Command::new("unshare");
    // SAFETY: takes no arguments and only reads the process's own identity.
    if unsafe { libc::geteuid() } != 0 {
        command.args(["--user", "--map-root-user"]);
    }
    command.args(["--mount", "sh", script]).arg(stage.dir.path()).arg(env!("CARGO_BIN_EXE_tautrail"));
    let mut daemon = Daemon::start(command.arg(stage.path("rig.toml")));
    daemon.wait_for("trial", "opens: tension rises");
    std::fs::write(stage.path("fill"), "").unwrap();
    daemon.wait_for("alarm", "make room");
    let ended = daemon.wait_for("trial", "closes: the disk takes no more");
    assert!(ended.text.contains("treat them as loaded"), "{}", ended.text);
    std::fs::write(stage.path("room"), "").unwrap();
    let again = daemon.wait_for("trial", "opens, goes on under the tension of");
    daemon.wait_for("trial", "closes: launched and at rest");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0)); // waits for sealing
    let truth = stage.truth(rig, ".");
    let trials = stage.trials();
    let [first, second] = &trials[..] else { panic!("one that met the full disk, one that goes on: {trials:?}") };
    let events = second.events().unwrap();
    let goes_on = format!("it goes on under the tension of trial {}", first.header().trial_id);
    assert!(events.iter().any(|event| event.text.contains(&goes_on)), "{events:?}");
    assert_eq!(second.outcome(), "launched", "without a restart");
    for trial in &trials {
        for device in DEVICES {
            let blocks = trial.blocks(device).unwrap();
            truth.holes(device, &blocks); // no block that was not sent
            assert!(!blocks.is_empty(), "{device}");
            let reaches_back = blocks[0].host_ns < again.host_ns;
            assert!(reaches_back || trial.header().trial_id == first.header().trial_id, "{device}");
        }
    }
}
