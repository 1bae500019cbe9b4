//! Bench section `start_up`: how long a daemon takes to record again over an archive of 200 sealed trials with 1 GiB of
//! journal: at the first start, which reads all of it, and once it is noted that it is done with.
//!
//! The control reads the journal's files and does nothing else, in the same run. Where two readings of it differ by more
//! than half the machine is unfit for a verdict.
//!
//!     cargo run --example bench-start_up -- [TRIALS, 200] [MIB OF JOURNAL, 1024]

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a bench that cannot go on stops here")]

use std::io::{BufRead, BufReader, Read};
use std::path::Path;
use std::process::{Command, Stdio};
use std::sync::Arc;
use std::time::{Duration, Instant};

use bytes::Bytes;
use tautrail::archive::{Fate, recover};
use tautrail::journal::{
    Body, DeviceAtOpen, Disk, Journal, Origin, RealDisk, Settings, Start, TrialClose, TrialOpen, segment_name,
};
use tautrail::link::{DeviceIdx, LinkWhat};

const JOURNAL_ID: &str = "000001-abc123";
/// A read, framing included: about two blocks of a board at 10 kHz.
const READ_BYTES: usize = 1400;
const CONTROL_UNFIT: f64 = 1.5;

fn main() {
    let number = |place: usize, otherwise: u64| -> u64 {
        std::env::args().nth(place).map_or(otherwise, |arg| arg.parse().expect("TRIALS and MIB are numbers"))
    };
    let (n_trials, mib) = (number(1, 200), number(2, 1024));
    let dir = tempfile::tempdir_in(".").unwrap();
    let archive = dir.path().join("trials");
    let rig = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal/north-pier.toml");
    std::fs::copy(rig, dir.path().join("rig.toml")).unwrap();
    record(&archive, n_trials, mib << 20);
    let sealed = recover(&archive, &(Arc::new(RealDisk) as Arc<dyn Disk>), &mut |_| {}).unwrap();
    assert!(sealed.trials.len() as u64 == n_trials, "{} trials", sealed.trials.len());
    assert!(sealed.trials.iter().all(|one| matches!(one.fate, Fate::Sealed(_))));
    println!("figure start_up_trials value={n_trials} unit=1 reference=- ratio=- target=-");
    let (first_s, second_s) = (read_all(&archive), read_all(&archive));
    let control_s = first_s.min(second_s);
    let figure = |name: &str, value: f64| {
        let ratio = value / control_s;
        println!("figure start_up_{name} value={value:.2} unit=s reference={control_s:.2} ratio={ratio:.2} target=-");
    };
    figure("all_read", start(dir.path()));
    start(dir.path()); // notes what is done with
    figure("noted", start(dir.path()));
    if first_s.max(second_s) > CONTROL_UNFIT * control_s {
        println!("inconclusive start_up: the control's two readings took {first_s:.2} and {second_s:.2} s");
    }
}

/// A journal with trials spread over it, as the recorder writes it.
fn record(archive: &Path, n_trials: u64, n_bytes: u64) {
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let device = |name: &str| DeviceAtOpen { name: name.into(), port: "p".into(), describe_hex: String::new() };
    let origin = Origin {
        journal_id: JOURNAL_ID.into(),
        program_version: "0".into(),
        kernel_boot_id: "another".into(),
        rig_text: "invented".into(), // counts only: sealing is not what is measured here
        devices: vec![device("one"), device("two")],
    };
    let settings = Settings { segment_ns: i64::MAX, budget_bytes: u64::MAX, ..Settings::default() };
    let mut journal =
        Journal::begin(Arc::clone(&disk), &archive.join("journal"), origin, Start::fresh(), settings, 0).unwrap();
    let read = Body::Link(LinkWhat::Bytes(Bytes::from(vec![7; READ_BYTES])));
    let n_reads = n_bytes / READ_BYTES as u64;
    let every = n_reads / n_trials;
    for i in 0..n_reads {
        let host_ns = i as i64 * 1_000_000;
        let first_seq = journal.append(host_ns, DeviceIdx((i % 2) as u16), &read).unwrap();
        let (number, place) = (i / every + 1, i % every);
        let trial_id = format!("{number:06}-abcdef");
        if place == 0 && number <= n_trials {
            let (reason, person) = ("bench".into(), String::new());
            let open = TrialOpen { trial_id, first_seq, first_host_ns: host_ns, reason, person, continues: None };
            journal.append(host_ns, DeviceIdx(0), &Body::TrialOpen(open));
        } else if place == every.min(20) - 1 && number <= n_trials {
            let close = TrialClose { trial_id, reason: "bench".into(), person: String::new() };
            journal.append(host_ns, DeviceIdx(0), &Body::TrialClose(close));
        }
        journal.commit(host_ns);
        while let Some(job) = journal.next_job(host_ns) {
            let outcome = job.run(&*disk);
            journal.job_done(outcome, host_ns);
        }
    }
    journal.end();
    assert!(archive.join("journal").join(segment_name(JOURNAL_ID, 1)).exists());
}

fn read_all(archive: &Path) -> f64 {
    let begun = Instant::now();
    let mut buffer = vec![0; 1 << 20];
    for entry in std::fs::read_dir(archive.join("journal")).unwrap() {
        let path = entry.unwrap().path();
        if path.is_file() {
            let mut file = std::fs::File::open(path).unwrap();
            while file.read(&mut buffer).unwrap() > 0 {}
        }
    }
    begun.elapsed().as_secs_f64()
}

/// Seconds from the daemon's start until it says that it records.
fn start(dir: &Path) -> f64 {
    let program = std::env::current_exe().unwrap().ancestors().nth(2).unwrap().join("tautrail");
    let begun = Instant::now();
    let mut command = Command::new(program);
    command.args(["--json", "daemon", "--wait-for-ports", "--longest-hold", "0.01", "--dir"]);
    command.arg(dir.join("trials")).arg(dir.join("rig.toml")).stdout(Stdio::piped());
    let mut daemon = command.spawn().unwrap();
    let mut lines = BufReader::new(daemon.stdout.take().unwrap()).lines();
    let line = lines.find(|line| line.as_ref().unwrap().contains("recording to journal"));
    assert!(line.is_some(), "the daemon ended");
    let taken_s = begun.elapsed().as_secs_f64();
    std::thread::spawn(move || lines.for_each(drop));
    std::thread::sleep(Duration::from_secs(2)); // the notes are made beside the recording
    rustix::process::kill_process(rustix::process::Pid::from_child(&daemon), rustix::process::Signal::TERM).unwrap();
    assert!(daemon.wait().unwrap().success());
    taken_s
}
