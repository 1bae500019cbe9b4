//! Instruments that print text, from pty to sealed trial: the real daemon, the virtual rig's indicator, polled display and
//! hobby board.

use std::sync::OnceLock;

use tautrail::trial::BlockRow;
use virtual_rig::device::catalogue::SensorSet;
use virtual_rig::performance::{Options, Performance, prepare};

use crate::stage::{Stage, Truth};

const INSTRUMENTS: [&str; 3] = ["hold-display", "anchor-display", "shuttle-board"];

fn performance(faults: &[&str]) -> Performance {
    static PLAIN: OnceLock<Performance> = OnceLock::new();
    let options = Options { pace: 0.3, sensors: SensorSet::Text, ..Options::default() };
    let mut performance = PLAIN.get_or_init(|| prepare(&options).expect("the nominal scenario")).clone();
    performance.options.faults = faults.iter().map(|text| text.parse().expect("a fault")).collect();
    performance
}

/// Whether the trial's lines are what the rig printed from some line on, without one missing or another between.
fn is_all_of_its_range(truth: &Truth, device: &str, blocks: &[BlockRow]) -> bool {
    let heard: Vec<u32> = blocks.iter().map(|block| block.crc).collect();
    truth.lines(device).windows(heard.len()).any(|printed| printed == heard)
}

/// `check` beside the running daemon tells how each link does.
#[track_caller]
fn check_shows_health(stage: &Stage) {
    let mut command = std::process::Command::new(env!("CARGO_BIN_EXE_tautrail"));
    let archive = stage.path("trials");
    let output =
        command.arg("--json").arg("check").arg(stage.path("rig.toml")).arg("--dir").arg(archive).output().unwrap();
    let told: serde_json::Value = serde_json::from_slice(&output.stdout).unwrap();
    assert!(told["machine_ports"].is_array());
    let journal = &told["journal"];
    let synced_s = journal["sync_interval_s"].as_f64().unwrap();
    assert!(synced_s > 0.0 && synced_s < 60.0, "what was achieved, not what is wanted: {journal}");
    assert!(journal["bytes"].as_u64().unwrap() > 0 && journal["free_bytes"].as_u64().unwrap() > 0, "{journal}");
    let links = told["links"].as_array().unwrap();
    assert_eq!(links.len(), INSTRUMENTS.len(), "{told}");
    for (link, device) in links.iter().zip(INSTRUMENTS) {
        assert_eq!((&link["device"], &link["up"]), (&device.into(), &true.into()));
        assert!(link["frames"].as_u64().unwrap() > 5 && link["bytes"].as_u64().unwrap() > 50, "{link}");
        assert_eq!(link["missing_samples"], 0, "{link}");
        assert!(link["clock_uncertainty_s"].as_f64().unwrap() > 0.0, "{link}");
        assert_eq!(link["clock_drift_ppm"].is_null(), device != "shuttle-board", "only the board has a clock: {link}");
    }
}

#[test]
fn lines_of_text_become_a_sealed_and_read_trial() {
    let stage = Stage::of_rig("north-pier-text.toml");
    let rig = stage.play_of(".", performance(&[]));
    let mut daemon = stage.start_daemon();
    daemon.wait_for("trial", "opens");
    check_shows_health(&stage);
    daemon.wait_for("phase", "launch");
    daemon.wait_for("trial", "closes");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0));
    let truth = stage.truth(rig, ".");
    let trial = stage.trial();
    for device in INSTRUMENTS {
        let blocks = trial.blocks(device).unwrap();
        let raw = trial.device(device).unwrap();
        assert!(blocks.len() > 50 && is_all_of_its_range(&truth, device, &blocks), "{device}: lines are missing");
        assert!(raw.text_lines.len() >= blocks.len(), "{device}: lines are kept as they came");
        assert!(raw.rejected.len() <= 1, "{device}: {:?}", raw.rejected);
        let link = raw.link.expect("the file says how the link did");
        assert!(link.n_reads > 0 && link.n_bytes > 0 && link.n_gaps == 0 && link.n_link_losses == 0, "{link:?}");
        assert!(link.longest_stall_s > 0.0, "{link:?}");
    }
    let line = trial.signal("line").unwrap();
    let greatest_n = line.value.iter().copied().fold(0.0, f64::max);
    assert!((greatest_n - 612.0).abs() < 6.0, "kgf became newtons: {greatest_n}");
    let encoder = trial.signal("encoder").unwrap();
    // By arrival an adapter's 16 ms and more must be reckoned with. How well the board's own time is known hangs on how busy this
    // machine is; tests/text_truth.rs looks at that in virtual time.
    assert!(line.time_uncertainty_s > 0.005, "{}", line.time_uncertainty_s);
    // The position over the board's own time runs as fast as the shuttle did: 16.76 m/s at separation, by the rig's truth.
    let ends = encoder.time_s.windows(11).zip(encoder.value.windows(11));
    let speeds_mps = ends.map(|(time_s, x_m)| (x_m[10] - x_m[0]) / (time_s[10] - time_s[0]));
    let greatest_mps = speeds_mps.fold(0.0, f64::max);
    assert!((16.4..17.2).contains(&greatest_mps), "{greatest_mps} m/s");
    let read = trial.results().unwrap();
    let speed = read.entries.iter().find(|entry| entry.name == "launch_speed").expect("the launch speed is read");
    let truth_mps = truth.launch_speed_mps();
    assert!((speed.low..=speed.high).contains(&truth_mps), "{} to {} m/s for {truth_mps}", speed.low, speed.high);
    assert!(speed.high - speed.low < 1.0, "the board knows it well: {} to {} m/s", speed.low, speed.high);
}

#[test]
fn a_pulled_indicator_leaves_a_gap_and_damaged_lines_are_kept_as_refused() {
    let stage = Stage::of_rig("north-pier-text.toml");
    let faults = ["hold-display:cable-pull@r-1.5+0.6", "shuttle-board:lost-bytes=2e-4"];
    let rig = stage.play_of(".", performance(&faults));
    let mut daemon = stage.start_daemon();
    daemon.wait_for("trial", "opens");
    daemon.wait_for("alarm", "hold-display: link lost");
    daemon.wait_for("link", "is open");
    daemon.wait_for("trial", "closes");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0));
    let truth = stage.truth(rig, ".");
    let trial = stage.trial();
    let hold = trial.device("hold-display").unwrap();
    let missing: u64 = hold.gaps.iter().map(|gap| gap.n_missing).sum();
    // The cable's 0.6 s at 80 lines a second, and the time until the port was open and the instrument running again.
    assert!((45..400).contains(&missing), "{missing} readings missing: {:?}", hold.gaps);
    assert_eq!(hold.gaps.len(), 1, "{:?}", hold.gaps);
    let board = trial.device("shuttle-board").unwrap();
    assert!(!board.rejected.is_empty(), "cut lines are kept");
    let touched = truth.touched("shuttle-board");
    let refused = board.rejected.len();
    assert!(refused <= touched + 1, "{refused} refused, {touched} touched: nothing else was refused");
}
