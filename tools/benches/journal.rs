//! Bench section `journal`: how long a record waits until it is on the disk, at the rate of four channels at 10 kHz, on
//! an idle disk and beside a program that writes and removes large files.
//!
//! The control does nothing but write the same bytes to a file of its own on the same disk and sync it every 50 ms, in
//! the same run: its longest wait (the interval and the sync) is the reference. Where that is over 100 ms, the disk or
//! the machine cannot keep the promise, and no verdict is given.
//!
//!     cargo run --example bench-journal -- [SECONDS OF EACH RUN, 20]

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a bench that cannot go on stops here")]

use std::io::Write;
use std::path::Path;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

use bytes::Bytes;
use crossbeam_channel::bounded;
use tautrail::journal::{Clocks, DeviceAtOpen, Ends, Journal, Origin, RealDisk, Recorder, Settings, Start};
use tautrail::link::{DeviceIdx, FromLinks, HostClock, LinkEvent, LinkWhat, SystemClock};

const RUN_S: u64 = 20;
const SYNC_EVERY: Duration = Duration::from_millis(50);
/// Two boards of two channels, 24 bits, a read each millisecond, framing included.
const READ_BYTES: usize = 64;
/// Small, so that segments are made, finished and removed while the bench runs.
const SEGMENT_BYTES: u64 = 512 << 10;
const BUDGET_BYTES: u64 = 2 << 20;
const TARGET_MS: f64 = 100.0;

fn main() {
    let run_s = std::env::args().nth(1).map_or(RUN_S, |arg| arg.parse().expect("SECONDS is a number"));
    let dir = tempfile::tempdir_in(".").unwrap();
    for (name, loaded) in [("journal_exposure_idle", false), ("journal_exposure_beside_large_files", true)] {
        let stop = Arc::new(AtomicBool::new(false));
        let load = loaded.then(|| load(&dir.path().join("large"), &stop));
        let control = control(&dir.path().join("control"), &stop);
        let longest = longest_exposure_ms(&dir.path().join(name), run_s);
        stop.store(true, Ordering::Relaxed);
        let control_longest = control.join().unwrap();
        load.into_iter().for_each(|thread| thread.join().unwrap());
        figure(name, longest, control_longest);
        if control_longest > TARGET_MS {
            println!("inconclusive {name}: the control itself waited {control_longest:.0} ms");
        }
    }
}

fn figure(name: &str, value: f64, reference: f64) {
    let ratio = value / reference;
    println!("figure {name} value={value:.1} unit=ms reference={reference:.1} ratio={ratio:.2} target={TARGET_MS:.0}");
}

/// Longest that any record waited to be on the disk, ms.
fn longest_exposure_ms(dir: &Path, run_s: u64) -> f64 {
    let device = |name: &str| DeviceAtOpen { name: name.into(), port: "p".into(), describe_hex: String::new() };
    let origin = Origin {
        journal_id: "000001-abc123".into(),
        program_version: "0".into(),
        kernel_boot_id: "bench".into(),
        rig_text: "invented".into(),
        devices: vec![device("one"), device("two")],
    };
    let clock = Arc::new(SystemClock);
    let settings = Settings { segment_bytes: SEGMENT_BYTES, budget_bytes: BUDGET_BYTES, ..Settings::default() };
    let start = clock.monotonic_ns();
    let journal = Journal::begin(Arc::new(RealDisk), dir, origin, Start::fresh(), settings, start).unwrap();
    let ((links, links_end), (orders, orders_end), (told, reports)) = (bounded(24_000), bounded(8), bounded(4096));
    let ends = Ends { links: links_end, orders: orders_end, reports: told };
    let recorder = Recorder::spawn(journal, Arc::new(RealDisk), ends, Arc::clone(&clock) as _, Clocks::read).unwrap();
    let begun = Instant::now();
    for i in 0_u64.. {
        let due = begun + Duration::from_millis(i);
        if due > begun + Duration::from_secs(run_s) {
            break;
        }
        std::thread::sleep(due.saturating_duration_since(Instant::now()));
        for device in 0..2 {
            let what = LinkWhat::Bytes(Bytes::from(vec![i as u8; READ_BYTES]));
            let event = LinkEvent { host_ns: clock.monotonic_ns(), device: DeviceIdx(device), what };
            links.send(FromLinks::Event(event)).unwrap();
        }
    }
    drop((links, orders));
    let farewell = recorder.join().unwrap();
    assert!(farewell.durable && farewell.health.lost_events == 0, "{farewell:?}");
    drop(reports);
    farewell.health.exposure_ns_max as f64 * 1e-6
}

/// The longest interval with its sync, ms.
fn control(path: &Path, stop: &Arc<AtomicBool>) -> std::thread::JoinHandle<f64> {
    let (mut file, stop) = (std::fs::File::create(path).unwrap(), Arc::clone(stop));
    std::thread::spawn(move || {
        let mut longest_ms = 0.0_f64;
        while !stop.load(Ordering::Relaxed) {
            let begun = Instant::now();
            file.write_all(&vec![1; 2 * READ_BYTES * SYNC_EVERY.as_millis() as usize]).unwrap();
            std::thread::sleep(SYNC_EVERY);
            file.sync_data().unwrap();
            longest_ms = longest_ms.max(begun.elapsed().as_secs_f64() * 1e3);
        }
        longest_ms
    })
}

/// Writes 256 MiB and removes it, again and again.
fn load(path: &Path, stop: &Arc<AtomicBool>) -> std::thread::JoinHandle<()> {
    let (path, stop) = (path.to_owned(), Arc::clone(stop));
    std::thread::spawn(move || {
        let chunk = vec![3; 1 << 20];
        while !stop.load(Ordering::Relaxed) {
            let mut file = std::fs::File::create(&path).unwrap();
            for _ in 0..256 {
                file.write_all(&chunk).unwrap();
            }
            std::fs::remove_file(&path).unwrap();
        }
    })
}
