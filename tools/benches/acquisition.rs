//! Bench section `acquisition`: processor time from a port to journal and decoded samples, per channel sample, beside a
//! tuned Python reader; how many demanding rigs (four channels at 10 kHz) one core could take; and the longest stall of
//! the disk that loses nothing.
//!
//! Ours: the links' thread, both threads of the recorder, and decoding for the live view, over a pty. Python has it
//! easier: no stuffing, no checksum, samples of 32 bits, whole records joined by a marker; one `os.read` after the other
//! of all that is there, one `split`, one `numpy.frombuffer`, one append to HDF5 each time.

#![allow(clippy::unwrap_used, reason = "a bench that cannot go on stops here")]

use std::io::{Read, Write};
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};
use std::sync::Arc;
use std::sync::atomic::{AtomicI64, Ordering};
use std::time::{Duration, Instant};

use crossbeam_channel::bounded;
use firmware_protocol::{
    Block, Channel, Channels, Describe, Encoding, Header, MAX_FRAME_LEN, Message, Stream, Streams, encode,
};
use tautrail::capture::{Captured, FrameDecoder};
use tautrail::journal::{
    AppendFile, Clocks, DeviceAtOpen, Disk, Ends, Journal, Listed, Origin, RealDisk, Recorder, Settings, Start,
};
use tautrail::link::{Asks, DeviceIdx, FromLinks, HostClock, LinkWhat, PortSpec, Sinks, SystemClock, spawn_links};
use tautrail::rig::SerialSettings;

const N_PER_BLOCK: u16 = 100;
const N_CHANNELS: usize = 4;
const DEMANDING_PER_S: f64 = 40_000.0;
/// As fast as the pty takes them.
const N_BLOCKS: u32 = 20_000;
const DAEMON_QUEUE: usize = 12 * 1000 + 12 * 50;

fn frame(header: &Header, message: &Message<'_>) -> Vec<u8> {
    let mut bytes = [0; MAX_FRAME_LEN];
    let n = encode(header, message, &mut bytes).unwrap();
    bytes[..n].to_vec()
}

fn describe() -> Vec<u8> {
    let channel = |name| Channel {
        name,
        quantity: "force",
        encoding: Encoding::I24,
        nominal_min: -8e6,
        nominal_max: 8e6,
        group_delay_s: 1e-4,
        bandwidth_hz: Some(2000.0),
    };
    let channels = ["a", "b", "c", "d"].map(channel);
    let streams = [Stream { id: 1, ticks_per_sample: 100, channels: Channels::given(&channels) }];
    let describe = Describe {
        device_id: 1,
        name: "bench",
        firmware: "0",
        tick_rate_hz: 1e6,
        tick_tolerance_ppm: 50.0,
        streams: Streams::given(&streams),
    };
    frame(&Header { boot_id: 7, description_id: 1, ..Header::default() }, &Message::Describe(describe))
}

fn block(number: u32) -> Vec<u8> {
    let samples: Vec<u8> = (0..u32::from(N_PER_BLOCK) * N_CHANNELS as u32)
        .flat_map(|k| (1_200_000 + (k.wrapping_mul(2_654_435_761) >> 22)).to_le_bytes()[..3].to_vec())
        .collect();
    let first_index = u64::from(number) * u64::from(N_PER_BLOCK);
    let block = Block {
        first_index,
        tick: first_index * 100,
        sent_tick: first_index * 100 + 10_000,
        overruns: 0,
        n_samples: N_PER_BLOCK,
        sample_len: 3 * N_CHANNELS as u16,
        samples: &samples,
    };
    let header = Header { flags: 0, stream: 1, sequence: number, boot_id: 7, description_id: 1 };
    frame(&header, &Message::Block(block))
}

/// A pty in raw mode: the device's end, and the path of the other.
fn pty() -> (std::fs::File, PathBuf) {
    use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
    use rustix::termios::{OptionalActions, tcgetattr, tcsetattr};
    let master = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC).unwrap();
    grantpt(&master).unwrap();
    unlockpt(&master).unwrap();
    let mut settings = tcgetattr(&master).unwrap();
    settings.make_raw();
    tcsetattr(&master, OptionalActions::Now, &settings).unwrap();
    let path = PathBuf::from(ptsname(&master, Vec::new()).unwrap().into_string().unwrap());
    (master.into(), path)
}

/// Processor time of this process's threads of these names, ns.
fn cpu_ns(names: &[&str]) -> f64 {
    let mut sum = 0.0;
    for task in std::fs::read_dir("/proc/self/task").unwrap() {
        let dir = task.unwrap().path();
        let read = |name: &str| std::fs::read_to_string(dir.join(name)).unwrap_or_default();
        if names.iter().any(|name| read("comm").trim().starts_with(name)) {
            sum += read("schedstat").split(' ').next().and_then(|ns| ns.parse::<f64>().ok()).unwrap_or(0.0);
        }
    }
    sum
}

/// A disk whose appends stand still until a time.
#[derive(Debug)]
struct StallingDisk {
    until_ns: Arc<AtomicI64>,
}

#[derive(Debug)]
struct StallingFile {
    file: Arc<dyn AppendFile>,
    until_ns: Arc<AtomicI64>,
}

impl StallingFile {
    fn wait(&self) {
        let left_ns = self.until_ns.load(Ordering::Relaxed) - SystemClock.monotonic_ns();
        if left_ns > 0 {
            std::thread::sleep(Duration::from_nanos(left_ns.unsigned_abs()));
        }
    }
}

impl AppendFile for StallingFile {
    fn append(&self, bytes: &[u8]) -> std::io::Result<usize> {
        self.wait();
        self.file.append(bytes)
    }
    fn reserve(&self, bytes: u64) -> std::io::Result<()> {
        self.wait();
        self.file.reserve(bytes)
    }
    fn sync(&self) -> std::io::Result<()> {
        self.wait();
        self.file.sync()
    }
    fn trim(&self) -> std::io::Result<()> {
        self.wait();
        self.file.trim()
    }
}

impl Disk for StallingDisk {
    fn create_dir(&self, dir: &Path) -> std::io::Result<()> {
        RealDisk.create_dir(dir)
    }
    fn create_new(&self, path: &Path) -> std::io::Result<Arc<dyn AppendFile>> {
        let until_ns = Arc::clone(&self.until_ns);
        Ok(Arc::new(StallingFile { file: RealDisk.create_new(path)?, until_ns }))
    }
    fn open(&self, path: &Path) -> std::io::Result<Box<dyn Read + Send>> {
        RealDisk.open(path)
    }
    fn list(&self, dir: &Path) -> std::io::Result<Vec<Listed>> {
        RealDisk.list(dir)
    }
    fn remove(&self, path: &Path) -> std::io::Result<()> {
        RealDisk.remove(path)
    }
    fn rename_noreplace(&self, from: &Path, to: &Path) -> std::io::Result<()> {
        RealDisk.rename_noreplace(from, to)
    }
    fn sync_file(&self, path: &Path) -> std::io::Result<()> {
        RealDisk.sync_file(path)
    }
    fn sync_dir(&self, dir: &Path) -> std::io::Result<()> {
        RealDisk.sync_dir(dir)
    }
    fn free_bytes(&self, dir: &Path) -> std::io::Result<u64> {
        RealDisk.free_bytes(dir)
    }
}

struct Acquired {
    /// Links' thread, recorder's threads, decoding.
    cpu_ns: [f64; 3],
    n_samples: u64,
    n_missing: u64,
    lost_reads: u64,
}

/// Acquires `n_blocks`, sent as `pause` says, on a disk that stands still for `stall` after a second.
fn acquire(n_blocks: u32, pause: Option<Duration>, stall: Duration) -> Acquired {
    let dir = tempfile::tempdir_in("target").unwrap();
    let until_ns = Arc::new(AtomicI64::new(0));
    let disk: Arc<dyn Disk> = Arc::new(StallingDisk { until_ns: Arc::clone(&until_ns) });
    let devices = vec![DeviceAtOpen { name: "bench".into(), port: String::new(), describe_hex: String::new() }];
    let origin = Origin {
        journal_id: "000001-bench0".into(),
        program_version: "0".into(),
        kernel_boot_id: "boot".into(),
        rig_text: String::new(),
        devices,
    };
    let clock: Arc<dyn HostClock> = Arc::new(SystemClock);
    let journal = Journal::begin(
        Arc::clone(&disk),
        &dir.path().join("journal"),
        origin,
        Start::fresh(),
        Settings::default(),
        clock.monotonic_ns(),
    )
    .unwrap();
    let (to_journal, links) = bounded(DAEMON_QUEUE);
    let (to_live, live) = bounded(DAEMON_QUEUE);
    let (orders, orders_end) = bounded(16);
    let (reports, reports_end) = bounded(4096);
    let recorder =
        Recorder::spawn(journal, disk, Ends { links, orders: orders_end, reports }, Arc::clone(&clock), Clocks::read)
            .unwrap();
    let (mut master, path) = pty();
    let spec =
        PortSpec { device: DeviceIdx(0), path, baud: 3_000_000, serial: SerialSettings::default(), asks: Asks::Frames };
    let links = spawn_links(vec![spec], Sinks { journal: to_journal, live: to_live }, clock, 1).unwrap();
    let decoding = std::thread::Builder::new().name("decoding".into()).spawn(move || decode_live(&live)).unwrap();
    while !recorder_is_up(&mut master) {}
    let began = [cpu_ns(&["links"]), cpu_ns(&["journal"])];
    let feeding = std::thread::spawn(move || {
        master.write_all(&describe()).unwrap();
        let mut at = Instant::now();
        for number in 0..n_blocks {
            master.write_all(&block(number)).unwrap();
            if let Some(pause) = pause {
                at += pause;
                std::thread::sleep(at.saturating_duration_since(Instant::now()));
            }
        }
        // Held open until everything was read.
        std::thread::sleep(Duration::from_millis(500));
        master
    });
    if !stall.is_zero() {
        std::thread::sleep(Duration::from_secs(1));
        until_ns.store(SystemClock.monotonic_ns() + stall.as_nanos() as i64, Ordering::Relaxed);
    }
    let master = feeding.join().unwrap();
    std::thread::sleep(stall / 4);
    let (links_ns, journal_ns) = (cpu_ns(&["links"]) - began[0], cpu_ns(&["journal"]) - began[1]);
    links.stop().unwrap();
    drop((orders, master));
    let decoded = decoding.join().unwrap();
    let farewell = recorder.join().unwrap();
    drop(reports_end);
    Acquired {
        cpu_ns: [links_ns, journal_ns, decoded.2],
        n_samples: decoded.0,
        n_missing: decoded.1,
        lost_reads: farewell.health.lost_events,
    }
}

/// True once the link has asked for something: then its port is open.
fn recorder_is_up(master: &mut std::fs::File) -> bool {
    let mut asked = [0; 256];
    master.read(&mut asked).is_ok_and(|n| n > 0)
}

/// Channel samples, missing ones, processor time of this thread.
fn decode_live(live: &crossbeam_channel::Receiver<FromLinks>) -> (u64, u64, f64) {
    let mut decoder = FrameDecoder::new();
    let mut n_samples = 0;
    for item in live {
        let FromLinks::Event(event) = item else { continue };
        if let LinkWhat::Bytes(bytes) = &event.what {
            decoder.feed(event.host_ns, bytes, &mut |captured| {
                if let Captured::Block(block) = captured {
                    n_samples += u64::from(block.n_samples) * block.counts.len() as u64;
                }
            });
        }
    }
    (n_samples, decoder.counters().missing, cpu_ns(&["decoding"]))
}

/// Reads records of 100 × 4 samples of 32 bits behind a marker; prints its processor time per channel sample in ns.
const PYTHON: &str = r"
import sys, os, time, numpy, h5py
marker, record = b'\xa5\x5a\xc3\x3c', 1600 + 16
with h5py.File(sys.argv[2], 'w') as out:
    data = out.create_dataset('samples', (0, 4), maxshape=(None, 4), chunks=(16384, 4), dtype='i4')
    port = os.open(sys.argv[1], os.O_RDWR | os.O_NOCTTY)
    os.write(port, b'go')
    rest, n, wanted, waiting = b'', 0, int(sys.argv[3]), []
    begun = time.process_time_ns()
    while n < wanted:
        parts = [rest]
        size = 0
        while size < 65536:
            part = os.read(port, 65536)
            parts.append(part)
            size += len(part)
            if n + (len(rest) + size) // (record + 4) >= wanted: break
        pieces = b''.join(parts).split(marker)
        rest = pieces.pop()
        if len(rest) == record:
            pieces.append(rest); rest = b''
        else:
            rest = marker + rest
        whole = [piece for piece in pieces if len(piece) == record]
        if not whole: continue
        block = numpy.frombuffer(b''.join(whole), dtype='<i4').reshape(len(whole), 404)[:, 4:].reshape(-1, 4)
        n += len(whole)
        at = data.shape[0]
        data.resize(at + len(block), axis=0)
        data[at:] = block
    out.flush()
    spent = time.process_time_ns() - begun
print(spent / (n * 400))
";

fn python_ns(dir: &Path) -> f64 {
    let setup = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/oracles/setup");
    let python = String::from_utf8(Command::new(setup).output().unwrap().stdout).unwrap();
    let (mut master, path) = pty();
    let mut record = b"\xa5\x5a\xc3\x3c".to_vec();
    record.extend_from_slice(&[1; 16]);
    record.extend((0..400_u32).flat_map(|k| (1_200_000 + k).to_le_bytes()));
    let child = Command::new(python.trim())
        .args(["-c", PYTHON])
        .arg(&path)
        .arg(dir.join("python.h5"))
        .arg(N_BLOCKS.to_string())
        .stdout(Stdio::piped())
        .spawn()
        .unwrap();
    let mut go = [0; 2];
    master.read_exact(&mut go).unwrap();
    for _ in 0..N_BLOCKS {
        master.write_all(&record).unwrap();
    }
    let output = child.wait_with_output().unwrap();
    assert!(output.status.success());
    String::from_utf8(output.stdout).unwrap().trim().parse().unwrap()
}

fn main() {
    let dir = tempfile::tempdir().unwrap();
    let python = (0..3).map(|_| python_ns(dir.path())).fold(f64::INFINITY, f64::min);
    let mut best = [f64::INFINITY; 3];
    for _ in 0..3 {
        let acquired = acquire(N_BLOCKS, None, Duration::ZERO);
        let wanted = u64::from(N_BLOCKS) * u64::from(N_PER_BLOCK) * N_CHANNELS as u64;
        assert_eq!((acquired.n_samples, acquired.n_missing, acquired.lost_reads), (wanted, 0, 0));
        let each = acquired.cpu_ns.map(|ns| ns / wanted as f64);
        if each.iter().sum::<f64>() < best.iter().sum() {
            best = each;
        }
    }
    for (thread, ns) in ["links", "journal", "decoding"].iter().zip(best) {
        println!("figure acquisition_per_channel_sample_{thread} value={ns:.2} unit=ns reference=- ratio=- target=-");
    }
    let best: f64 = best.iter().sum();
    let ratio = python / best;
    println!(
        "figure acquisition_per_channel_sample value={best:.2} unit=ns reference={python:.2} ratio={ratio:.1} target=8"
    );
    let rigs = 1e9 / (best * DEMANDING_PER_S);
    println!(
        "figure acquisition_demanding_rigs_on_one_core value={rigs:.0} unit=rigs reference=1 ratio={rigs:.0} target=50"
    );
    let mut survived_s = 0;
    for stall_s in [5_u64, 8, 11, 14] {
        // A frame each millisecond is as many reads as a port gives.
        let n_blocks = (stall_s as u32 + 4) * 1000;
        let acquired = acquire(n_blocks, Some(Duration::from_millis(1)), Duration::from_secs(stall_s));
        let missing = acquired.lost_reads;
        println!(
            "figure acquisition_reads_lost_in_a_stall_of_{stall_s}_s value={missing} unit=reads reference=- ratio=- target=-"
        );
        if missing > 0 {
            break;
        }
        survived_s = stall_s;
    }
    println!(
        "figure acquisition_longest_stall_survived value={survived_s} unit=s reference=10 ratio={:.2} target=10",
        survived_s as f64 / 10.0
    );
}
