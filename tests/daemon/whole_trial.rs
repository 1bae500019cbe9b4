use crate::stage::{DEVICES, Stage};

#[test]
fn a_nominal_trial_holds_every_block_the_rig_sent_in_its_range() {
    let stage = Stage::new();
    let rig = stage.play(".");
    let mut daemon = stage.start_daemon();
    daemon.wait_for("trial", "opens");
    daemon.wait_for("phase", "launch");
    daemon.wait_for("trial", "closes: launched and at rest");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0));
    let truth = stage.truth(rig, ".");
    let trial = stage.trial();
    for device in DEVICES {
        let blocks = trial.blocks(device).unwrap();
        assert_eq!(truth.holes(device, &blocks), [], "{device}");
        // from before the first tension to rest: winch-back, hold, launch at 100 blocks a second
        let (first, last) = (blocks[0].host_ns, blocks[blocks.len() - 1].host_ns);
        assert!(first < truth.host_ns("winch-back") && truth.host_ns("rest") < last, "{device}");
        let span_s = (last - first) as f64 * 1e-9;
        assert!((blocks.len() as f64 - 100.0 * span_s).abs() < 10.0, "{} blocks in {span_s} s", blocks.len());
        assert!(trial.device(device).unwrap().gaps.is_empty());
    }
}

#[test]
fn sigterm_under_tension_loses_nothing_and_closes_nothing() {
    let stage = Stage::new();
    let rig = stage.play(".");
    let mut daemon = stage.start_daemon();
    let opened = daemon.wait_for("trial", "opens");
    std::thread::sleep(std::time::Duration::from_millis(700));
    let beside = stage.run(&["--json", "recover"]);
    assert!(beside.status.success(), "{beside:?}");
    let beside: serde_json::Value = serde_json::from_slice(&beside.stdout).unwrap();
    assert_eq!((&beside["trials"][0]["fate"], beside["trials"].as_array().unwrap().len()), (&"live".into(), 1));
    let told_ns = crate::stage::monotonic_ns();
    assert_eq!(daemon.stop(), Some(0));
    daemon.wait_for("trial", "stays open");
    let truth = stage.truth(rig, ".");
    let recovered = stage.run(&["recover"]);
    assert!(recovered.status.success(), "{}", String::from_utf8_lossy(&recovered.stderr));
    let trial = stage.trial();
    assert_eq!(trial.outcome(), "truncated");
    for device in DEVICES {
        let blocks = trial.blocks(device).unwrap();
        assert_eq!(truth.holes(device, &blocks), [], "{device}");
        let last_ns = blocks[blocks.len() - 1].host_ns;
        assert!(opened.host_ns < told_ns && told_ns <= last_ns, "{device}: recorded until after SIGTERM was sent");
    }
}
