//! The daemon under a service manager: one socket that stands for it.

use std::os::unix::net::UnixDatagram;
use std::time::Duration;

use crate::stage::{Daemon, Stage};

fn next(manager: &UnixDatagram) -> String {
    let mut buffer = [0; 512];
    let n = manager.recv(&mut buffer).expect("the daemon tells the service manager");
    String::from_utf8_lossy(&buffer[..n]).into_owned()
}

#[test]
fn a_service_manager_is_told_when_it_records_that_it_lives_and_when_it_stops() {
    let stage = Stage::new();
    let rig = stage.play(".");
    let manager = UnixDatagram::bind(stage.path("notify")).unwrap();
    manager.set_read_timeout(Some(Duration::from_secs(30))).unwrap();
    let mut command = stage.daemon_command();
    command.env("NOTIFY_SOCKET", stage.path("notify")).env("WATCHDOG_USEC", "400000");
    let mut daemon = Daemon::start(&mut command);
    assert!(next(&manager).starts_with("READY=1\n"));
    assert!(stage.path("trials/feed.sock").exists(), "ready only once the feed is served");
    for _ in 0..3 {
        assert_eq!(next(&manager), "WATCHDOG=1");
    }
    assert_eq!(daemon.stop(), Some(0));
    let mut last = next(&manager);
    while last == "WATCHDOG=1" {
        last = next(&manager);
    }
    assert!(last.starts_with("STOPPING=1\n"), "{last}");
    stage.truth(rig, ".");
}
