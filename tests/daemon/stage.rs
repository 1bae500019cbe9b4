//! A stage for one test: a directory, the virtual rig playing in it, the daemon as a child process.

use std::collections::BTreeMap;
use std::path::PathBuf;
use std::process::{Command, Output};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, OnceLock};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

use crate::rehearsal_rig::rig_text;
use serde::Deserialize;
use tautrail::trial::{BlockRow, TrialFile};
use virtual_rig::performance::{Options, Performance, prepare};
use virtual_rig::play::pty::{PtySettings, play};

pub use crate::daemon_process::Daemon;
use crate::daemon_process::PATIENCE;

pub const DEVICES: [&str; 2] = ["winch-node", "shuttle-node"];

/// The virtual rig, playing until it is stopped.
pub struct Playing {
    stop: Arc<AtomicBool>,
    thread: JoinHandle<()>,
}

pub struct Stage {
    pub dir: tempfile::TempDir,
}

/// What the rig really sent.
#[derive(Debug, Deserialize)]
pub struct Truth {
    pub events: Vec<TruthEvent>,
    pub devices: Vec<DeviceTruth>,
    launch: Option<LaunchTruth>,
}

#[derive(Debug, Deserialize)]
struct LaunchTruth {
    speed_ground_mps: f64,
}

#[derive(Debug, Deserialize)]
pub struct TruthEvent {
    pub kind: String,
    pub host_ns: i64,
}

#[derive(Debug, Deserialize)]
pub struct DeviceTruth {
    pub name: String,
    pub streams: Vec<StreamTruth>,
}

#[derive(Debug, Deserialize)]
pub struct StreamTruth {
    /// Sequence, first index, samples, checksum of the frame.
    pub blocks: Vec<(u32, u64, u32, u32)>,
    /// Places of blocks whose bytes the line changed.
    pub touched: Vec<u32>,
}

/// Worked out once: the physics of the nominal launch, its slow phases in three tenths of their time.
fn performance() -> &'static Performance {
    static PERFORMANCE: OnceLock<Performance> = OnceLock::new();
    PERFORMANCE.get_or_init(|| prepare(&Options { pace: 0.3, ..Options::default() }).expect("the nominal scenario"))
}

impl Stage {
    pub fn new() -> Self {
        Self::of_rig("north-pier.toml")
    }

    /// With a rig file of the rehearsal's.
    pub fn of_rig(name: &str) -> Self {
        let dir = tempfile::tempdir().expect("a directory");
        std::fs::write(dir.path().join("rig.toml"), rig_text(name)).expect("the rig file");
        Self { dir }
    }

    pub fn path(&self, name: &str) -> PathBuf {
        self.dir.path().join(name)
    }

    /// Starts the rig with its ports below `dir`, and waits until they are there.
    pub fn play(&self, dir: &str) -> Playing {
        self.play_this(performance(), dir)
    }

    /// The same with the slow phases at another pace; 1 is that of a crew.
    pub fn play_at_pace(&self, pace: f64, dir: &str) -> Playing {
        let performance = prepare(&Options { pace, ..Options::default() }).expect("the nominal scenario");
        self.play_this(Box::leak(Box::new(performance)), dir)
    }

    fn play_this(&self, performance: &'static Performance, dir: &str) -> Playing {
        let stop = Arc::new(AtomicBool::new(false));
        let settings = PtySettings { dir: self.path(dir), wait_for_start: PATIENCE, stop: Arc::clone(&stop) };
        let ready = settings.dir.join("ports").join(DEVICES[1]);
        let thread = std::thread::spawn(move || {
            play(performance, &settings).expect("the rig plays");
        });
        wait_until("the rig's ports", || ready.exists());
        Playing { stop, thread }
    }

    /// The same of another performance.
    pub fn play_of(&self, dir: &str, performance: Performance) -> Playing {
        let stop = Arc::new(AtomicBool::new(false));
        let settings = PtySettings { dir: self.path(dir), wait_for_start: PATIENCE, stop: Arc::clone(&stop) };
        let last = performance.devices.last().expect("a device").name;
        let ready = settings.dir.join("ports").join(last);
        let thread = std::thread::spawn(move || {
            play(&performance, &settings).expect("the rig plays");
        });
        wait_until("the rig's ports", || ready.exists());
        Playing { stop, thread }
    }

    pub fn daemon_command(&self) -> Command {
        self.daemon_command_in("trials")
    }

    pub fn daemon_command_in(&self, archive: &str) -> Command {
        let mut command = Command::new(env!("CARGO_BIN_EXE_tautrail"));
        command.arg("--json").arg("daemon").arg(self.path("rig.toml")).arg("--dir").arg(self.path(archive));
        command
    }

    /// A command to the running daemon, through its feed.
    pub fn ask(&self, args: &[&str]) -> Output {
        let archive = self.path("trials");
        Command::new(env!("CARGO_BIN_EXE_tautrail"))
            .args(args)
            .arg("--dir")
            .arg(archive)
            .output()
            .expect("tautrail runs")
    }

    pub fn start_daemon(&self) -> Daemon {
        self.start_daemon_with(&[])
    }

    pub fn start_daemon_with(&self, more: &[&str]) -> Daemon {
        Daemon::start(self.daemon_command().args(more))
    }

    /// The only trial file there is.
    pub fn trial(&self) -> TrialFile {
        let mut trials = self.trials();
        assert_eq!(trials.len(), 1, "one trial file: {trials:?}");
        trials.remove(0)
    }

    /// All trial files there are; each opens.
    pub fn trials(&self) -> Vec<TrialFile> {
        let listed = std::fs::read_dir(self.path("trials")).expect("the archive");
        let mut files: Vec<PathBuf> = listed
            .map(|entry| entry.expect("an entry").path())
            .filter(|path| path.extension().is_some_and(|extension| extension == "h5"))
            .collect();
        files.sort();
        files.iter().map(|path| TrialFile::open(path).expect("the trial file opens")).collect()
    }

    pub fn run(&self, args: &[&str]) -> Output {
        let archive = self.path("trials");
        Command::new(env!("CARGO_BIN_EXE_tautrail")).args(args).arg(archive).output().expect("tautrail runs")
    }

    /// Ends the rig and reads what it says it sent.
    pub fn truth(&self, playing: Playing, dir: &str) -> Truth {
        playing.stop.store(true, Ordering::Relaxed);
        playing.thread.join().expect("the rig ends");
        let text = std::fs::read_to_string(self.path(dir).join("truth.json")).expect("the truth log");
        serde_json::from_str(&text).expect("the truth log is as its README says")
    }
}

impl Daemon {
    pub fn kill(mut self) -> i64 {
        self.signal(libc::SIGKILL);
        let killed_ns = monotonic_ns();
        self.child.wait().expect("the daemon ends");
        killed_ns
    }
}

impl Truth {
    pub fn host_ns(&self, kind: &str) -> i64 {
        self.events.iter().find(|event| event.kind == kind).unwrap_or_else(|| panic!("{kind} in the truth")).host_ns
    }

    pub fn launch_speed_mps(&self) -> f64 {
        self.launch.as_ref().expect("a launch in the truth").speed_ground_mps
    }

    fn device(&self, name: &str) -> &DeviceTruth {
        self.devices.iter().find(|truth| truth.name == name).expect("the device")
    }

    /// Checksums of the lines that a text device printed, in order.
    pub fn lines(&self, device: &str) -> Vec<u32> {
        self.device(device).streams.iter().flat_map(|stream| &stream.blocks).map(|block| block.3).collect()
    }

    /// How many of them the line changed.
    pub fn touched(&self, device: &str) -> usize {
        self.device(device).streams.iter().map(|stream| stream.touched.len()).sum()
    }

    /// By first index.
    fn blocks(&self, device: &str) -> BTreeMap<u64, (u32, u32, u32)> {
        let blocks = self.device(device).streams.iter().flat_map(|stream| &stream.blocks);
        blocks.map(|&(sequence, first_index, n, crc)| (first_index, (sequence, n, crc))).collect()
    }

    /// Every block of the file is one the rig sent, checksum and all; gives the holes between them, in samples.
    #[track_caller]
    pub fn holes(&self, device: &str, blocks: &[BlockRow]) -> Vec<(BlockRow, u64)> {
        let sent = self.blocks(device);
        for block in blocks {
            let found = (block.sequence, block.n_samples, block.crc);
            assert_eq!(sent.get(&block.first_index), Some(&found), "{device}, block {}", block.first_index);
        }
        let hole = |pair: &[BlockRow]| {
            let next = pair[0].first_index + u64::from(pair[0].n_samples);
            (pair[1].first_index != next).then(|| (pair[0], pair[1].first_index - next))
        };
        blocks.windows(2).filter_map(hole).collect()
    }
}

pub fn monotonic_ns() -> i64 {
    virtual_rig::play::pty::monotonic_ns()
}

#[track_caller]
pub fn wait_until(what: &str, condition: impl Fn() -> bool) {
    let deadline = Instant::now() + PATIENCE;
    while !condition() {
        assert!(Instant::now() < deadline, "{what} did not come");
        std::thread::sleep(Duration::from_millis(20));
    }
}
