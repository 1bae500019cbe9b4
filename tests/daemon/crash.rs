//! kill -9 at the two worst moments: while the winch draws, and while the shuttle flies.
//!
//! The virtual rig waits while nobody reads its ports, so what is missing afterwards is what stood in a port's queue and
//! was cleared at the new opening. A real device would go on: it would lose all of the time the daemon was away.

use std::time::Duration;

use crate::stage::{DEVICES, Daemon, Stage};

/// Written but not read by the daemon when it was killed: one block in the making, and the machine's lateness.
const NOT_READ_YET_S: f64 = 0.1;

/// Kills the daemon `after` an event, starts it again, and checks what the sealed trial holds.
fn killed(wait: impl Fn(&Daemon), after: Duration) {
    let stage = Stage::new();
    let rig = stage.play(".");
    let daemon = stage.start_daemon();
    wait(&daemon);
    std::thread::sleep(after);
    let killed_ns = daemon.kill();
    let mut daemon = stage.start_daemon();
    daemon.wait_for("journal", "was under way and goes on; nothing was recorded for");
    daemon.wait_for("trial", "closes");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0));
    let truth = stage.truth(rig, ".");
    let trial = stage.trial();
    for device in DEVICES {
        let blocks = trial.blocks(device).unwrap();
        let holes = truth.holes(device, &blocks);
        let lost: u64 = holes.iter().map(|(_, n)| n).sum();
        println!("{device}: {lost} samples lost in {} holes, of {} blocks kept", holes.len(), blocks.len());
        assert!(holes.len() <= 1, "{device}: only where the daemon was away: {holes:?}");
        for (before, _) in &holes {
            let unread_s = (killed_ns - before.host_ns) as f64 * 1e-9;
            assert!(unread_s < NOT_READ_YET_S, "{device}: {unread_s} s before the kill are missing");
        }
        let told: u64 = trial.device(device).unwrap().gaps.iter().map(|gap| gap.n_missing).sum();
        assert_eq!(told, lost, "{device}: the file says what is missing, no more and no less");
    }
}

#[test]
fn killed_during_winch_back_the_next_start_goes_on_with_the_trial() {
    killed(|daemon| drop(daemon.wait_for("trial", "opens")), Duration::from_millis(900));
}

#[test]
fn killed_during_launch_the_next_start_seals_what_was_recorded() {
    killed(|daemon| drop(daemon.wait_for("phase", "launch")), Duration::from_millis(100));
}
