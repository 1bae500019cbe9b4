//! Bench section `seal_beside`: what a running seal costs the daemon beside it. The real daemon records the virtual rig on
//! ptys; for one stretch a sealing process works through a trial of four channels at 10 kHz, niced as the daemon's own.
//!
//! Jitter is how much later than the evenest course a device's blocks were read (they come every 10 ms); the control is
//! the same daemon in the same run without a seal. Where the control itself is late by more than 2 ms at its 99.9th
//! percentile the machine is unfit for a verdict.
//!
//!     cargo run --example bench-seal_beside -- [SECONDS OF EACH STRETCH, 10] [TIMES THE NOMINAL SLOW PHASES, 10]

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a bench that cannot go on stops here")]

#[path = "../../tests/support/journal.rs"]
mod journal_file;

use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

use journal_file::{JOURNAL_ID, TRIAL_ID, nominal};
use tautrail::journal::{Body, Disk, Item, JournalReader, RealDisk, journals};
use tautrail::link::LinkWhat;
use virtual_rig::performance::{Options, prepare};
use virtual_rig::play::pty::{PtySettings, monotonic_ns, play};

/// Length of each stretch at least.
const STRETCH_S: f64 = 10.0;
/// Ten times the nominal slow phases: about four and a half minutes.
const PACE: f64 = 10.0;
const CONTROL_UNFIT_MS: f64 = 2.0;

fn program() -> PathBuf {
    std::env::current_exe().unwrap().ancestors().nth(2).unwrap().join("tautrail")
}

fn main() {
    let number = |place: usize, otherwise: f64| -> f64 {
        std::env::args().nth(place).map_or(otherwise, |arg| arg.parse().expect("SECONDS and pace are numbers"))
    };
    let (how_long, pace) = (Duration::from_secs_f64(number(1, STRETCH_S)), number(2, PACE));
    let sealed_dir = tempfile::tempdir().unwrap();
    nominal(sealed_dir.path(), pace, true);
    let (_, range) = journal_file::opened(sealed_dir.path());
    let trial_s = (range.last_host_ns - range.first_host_ns) as f64 * 1e-9;
    println!("figure seal_beside_trial_length value={trial_s:.1} unit=s reference=- ratio=- target=-");
    let dir = tempfile::tempdir().unwrap();
    let rig_file = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal/north-pier.toml");
    std::fs::write(dir.path().join("rig.toml"), tautrail::rig::read_joined(&rig_file).unwrap()).unwrap();
    let stop = Arc::new(AtomicBool::new(false));
    let wait_for_start = Duration::from_secs(60);
    let settings = PtySettings { dir: dir.path().to_owned(), wait_for_start, stop: Arc::clone(&stop) };
    let performance = prepare(&Options { pace: PACE, ..Options::default() }).unwrap();
    let playing = std::thread::spawn(move || play(&performance, &settings).map(drop));
    let mut daemon = start_daemon(dir.path());
    std::thread::sleep(Duration::from_secs(3)); // past the start
    let control_ns = stretch(|| std::thread::sleep(how_long));
    let sealing_ns = stretch(|| seal_for(how_long, sealed_dir.path()));
    let peak_mib = peak_mib(daemon.id());
    rustix::process::kill_process(rustix::process::Pid::from_child(&daemon), rustix::process::Signal::TERM).unwrap();
    assert!(daemon.wait().unwrap().success());
    stop.store(true, Ordering::Relaxed);
    playing.join().unwrap().unwrap();

    let (control, sealing) = (lateness(dir.path(), control_ns), lateness(dir.path(), sealing_ns));
    for (name, share) in [("p50", 0.5), ("p999", 0.999), ("max", 1.0)] {
        let (reference, value) = (quantile(&control, share), quantile(&sealing, share));
        println!(
            "figure seal_beside_jitter_{name} value={value:.3} unit=ms reference={reference:.3} ratio={:.2} target=-",
            value / reference
        );
    }
    if quantile(&control, 0.999) > CONTROL_UNFIT_MS {
        println!("inconclusive seal_beside_jitter: the control alone is late by more than {CONTROL_UNFIT_MS} ms");
    }
    println!("figure seal_beside_daemon_memory value={peak_mib:.1} unit=MiB reference=- ratio=- target=64");
}

fn start_daemon(dir: &Path) -> Child {
    let args = ["--json", "daemon", "--wait-for-ports", "--dir"];
    let mut command = Command::new(program());
    command.args(args).arg(dir.join("trials")).arg(dir.join("rig.toml")).stdout(Stdio::null()).spawn().unwrap()
}

/// Host times of a stretch.
fn stretch(what: impl FnOnce()) -> (i64, i64) {
    let begun_ns = monotonic_ns();
    what();
    (begun_ns, monotonic_ns())
}

/// Seals again and again for a while, and at least once.
fn seal_for(how_long: Duration, dir: &Path) {
    let begun = Instant::now();
    while begun.elapsed() < how_long {
        let status = Command::new(program())
            .arg("seal-child")
            .arg(dir)
            .args([JOURNAL_ID, TRIAL_ID])
            .stdout(Stdio::null())
            .status()
            .unwrap();
        assert!(status.success());
        std::fs::remove_file(dir.join(format!("trial-{TRIAL_ID}.h5"))).unwrap();
    }
}

/// Greatest resident size so far.
fn peak_mib(pid: u32) -> f64 {
    let status = std::fs::read_to_string(format!("/proc/{pid}/status")).unwrap();
    let line = status.lines().find_map(|line| line.strip_prefix("VmHWM:")).unwrap();
    line.trim().trim_end_matches(" kB").trim().parse::<f64>().unwrap() / 1024.0
}

/// How late each device's reads came against the earliest course of 10 ms steps through the stretch, ms, sorted.
fn lateness(dir: &Path, (from_ns, to_ns): (i64, i64)) -> Vec<f64> {
    const BLOCK_NS: i64 = 10_000_000;
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let journal_dir = dir.join("trials/journal");
    let id = journals(&*disk, &journal_dir).unwrap().pop().unwrap();
    let reader = JournalReader::open(disk, &journal_dir, &id).unwrap();
    let mut stamps: [Vec<i64>; 2] = Default::default();
    for item in reader.records() {
        if let Item::Record(record) = item.unwrap()
            && let Body::Link(LinkWhat::Bytes(bytes)) = &record.body
            && bytes.len() > 200 // a block, not an answer
            && (from_ns..to_ns).contains(&record.host_ns)
        {
            stamps[usize::from(record.device.0)].push(record.host_ns);
        }
    }
    let mut late_ms = Vec::new();
    for stamps in stamps {
        // The phase of the earliest read within a second around: clocks drift slowly against each other.
        for second in stamps.chunks(100) {
            let phase = |stamp: &i64| (stamp - second[0] + BLOCK_NS / 2).rem_euclid(BLOCK_NS);
            let earliest = second.iter().map(phase).min().unwrap();
            late_ms.extend(second.iter().map(|stamp| (phase(stamp) - earliest) as f64 * 1e-6));
        }
        // What is later than a block shows as a pause.
        late_ms.extend(stamps.windows(2).map(|pair| ((pair[1] - pair[0] - BLOCK_NS).max(0)) as f64 * 1e-6));
    }
    late_ms.sort_by(f64::total_cmp);
    late_ms
}

fn quantile(sorted: &[f64], share: f64) -> f64 {
    sorted[((sorted.len() - 1) as f64 * share).round() as usize]
}
