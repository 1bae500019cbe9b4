//! What the daemon says of the rig itself when it starts: a cord that is to come off, a limit that nobody proved. Invented data.

use crate::board::{Board, Prints};
use crate::guided::{daemon, rig_text};

struct Slack;

impl Prints for Slack {
    fn line(&mut self) -> String {
        "12000".to_owned()
    }
}

#[test]
fn a_worn_cord_and_an_unproven_limit_are_alarms_and_told_on_the_feed() {
    let dir = tempfile::tempdir().unwrap();
    let _board = Board::at(&dir.path().join("ports/bench-board"), Slack);
    let of_the_rig = "[[cord]]\nserial = \"7-01\"\nlot = \"7\"\nplace = \"left inner\"\nin_service_since = \"2031-05-04\"\n\
                      cycles_before = 5\nretire_cycles = 5\n[proof_load]\nstructure = \"both wings\"\nmasses = \"46 kg\"\n\
                      spread = \"evenly over the span\"\nown_weight = \"not counted\"\naccelerated_mass = \"4.6 kg\"\n\
                      direction = \"aft\"\nmargin = 1.25\ndate = \"2031-04-02\"\ninspector = \"an inspector\"\n";
    std::fs::write(dir.path().join("rig.toml"), rig_text("").replacen("[losses]", &format!("{of_the_rig}[losses]"), 1))
        .unwrap();
    let mut daemon = daemon(dir.path());
    daemon.wait_for("alarm", "the peak limit of 10.00 g is above 8.00 g, what the proof load of both wings allows");
    daemon.wait_for("alarm", "cord 7-01 (left inner) is to come off: 5 cycles, retired at 5");
    let client = tautrail::feed::FeedClient::connect(&dir.path().join("trials/feed.sock")).unwrap();
    assert_eq!(client.hello().proof_limit_g, Some(8.0));
    assert!(client.hello().proof_load.as_ref().is_some_and(|said| said.contains("licensed practice")));
    drop(client);
    assert_eq!(daemon.stop(), Some(0));
}
