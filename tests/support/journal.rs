//! Writes journals for tests by their documented format, record by record, with no thread and no clock.

use std::path::{Path, PathBuf};
use std::sync::{Arc, LazyLock};

use tautrail::journal::{
    Body, Clocks, DeviceAtOpen, Disk, JournalReader, RealDisk, Record, SegmentOpen, TrialClose, TrialOpen, TrialRange,
    segment_name,
};
use tautrail::link::{DeviceIdx, LinkWhat};
use virtual_rig::device::DEVICES;
use virtual_rig::performance::{Options, prepare};
use virtual_rig::play::virtual_time::{Delivered, VirtualPlay};

pub const JOURNAL_ID: &str = "000001-abc123";
pub const TRIAL_ID: &str = "000001-7f3a9c";
/// The rehearsal's rig file with its records.
pub static RIG_TEXT: LazyLock<String> = LazyLock::new(|| {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal/north-pier.toml");
    tautrail::rig::read_joined(&path).unwrap()
});
const PREROLL_NS: i64 = 100_000_000;

/// One journal of one segment, being written.
pub struct JournalFile {
    path: PathBuf,
    bytes: Vec<u8>,
    next_seq: u64,
    pub trial_id: String,
}

pub fn opening(rig_text: &str) -> SegmentOpen {
    let device = |name: &str| DeviceAtOpen { name: name.into(), port: name.into(), describe_hex: String::new() };
    SegmentOpen {
        format_version: 1,
        journal_id: JOURNAL_ID.into(),
        segment: 1,
        first_seq: 1,
        program_version: "0".into(),
        kernel_boot_id: "boot".into(),
        rig_text: rig_text.into(),
        devices: DEVICES.iter().map(|spec| device(spec.name)).collect(),
        open_trial: None,
        previous_given_up: None,
        keep: false,
    }
}

impl JournalFile {
    pub fn begin(dir: &Path, rig_text: &str) -> Self {
        Self::begin_of(dir, JOURNAL_ID, rig_text)
    }

    pub fn begin_of(dir: &Path, journal_id: &str, rig_text: &str) -> Self {
        std::fs::create_dir_all(dir.join("journal")).unwrap();
        let path = dir.join("journal").join(segment_name(journal_id, 1));
        let mut file = Self { path, bytes: Vec::new(), next_seq: 1, trial_id: TRIAL_ID.into() };
        let body = Body::SegmentOpen(Box::new(SegmentOpen { journal_id: journal_id.into(), ..opening(rig_text) }));
        Record { seq: 1, host_ns: 0, device: DeviceIdx(0), body }.encode(&mut file.bytes);
        file
    }

    pub fn add(&mut self, host_ns: i64, device: u16, body: Body) -> u64 {
        let seq = self.next_seq;
        self.next_seq += 1;
        Record { seq, host_ns, device: DeviceIdx(device), body }.encode(&mut self.bytes);
        seq
    }

    pub fn bytes(&mut self, host_ns: i64, device: u16, bytes: Vec<u8>) -> u64 {
        self.add(host_ns, device, Body::Link(LinkWhat::Bytes(bytes.into())))
    }

    pub fn clocks(&mut self, host_ns: i64) {
        let (monotonic_raw_ns, boottime_ns, realtime_ns) = (host_ns, host_ns, 1_796_000_000_000_000_000 + host_ns);
        let clocks = Clocks { monotonic_ns: host_ns, monotonic_raw_ns, boottime_ns, realtime_ns, wall_clock_set: true };
        self.add(host_ns, 0, Body::Clocks(clocks));
    }

    pub fn open_trial(&mut self, host_ns: i64, first_seq: u64, first_host_ns: i64) {
        let (trial_id, reason, person) = (self.trial_id.clone(), "tension".into(), String::new());
        let open = TrialOpen { trial_id, first_seq, first_host_ns, reason, person, continues: None };
        self.add(host_ns, 0, Body::TrialOpen(open));
    }

    pub fn close_trial(&mut self, host_ns: i64) {
        let close = TrialClose { trial_id: self.trial_id.clone(), reason: "slack again".into(), person: String::new() };
        self.add(host_ns, 0, Body::TrialClose(close));
    }

    /// Hands what is there to the disk.
    pub fn save(&self) {
        std::fs::write(&self.path, &self.bytes).unwrap();
    }
}

/// A nominal launch, played fast through the virtual rig into a journal of its own.
pub fn nominal(dir: &Path, pace: f64, closed: bool) {
    played(JournalFile::begin(dir, &RIG_TEXT), &Options { pace, ..Options::default() }, closed);
}

/// Any performance of the virtual rig, written into a journal that was begun for it.
pub fn played(mut file: JournalFile, options: &Options, closed: bool) {
    let performance = prepare(options).unwrap();
    let mut opened = false;
    let (mut first, mut last_ns, mut next_clocks_ns) = (None, 0, 0);
    for delivery in VirtualPlay::new(&performance).unwrap() {
        let delivery = delivery.unwrap();
        let host_ns = delivery.host_ns;
        if host_ns >= next_clocks_ns {
            file.clocks(host_ns);
            next_clocks_ns = host_ns + 1_000_000_000;
        }
        let device = delivery.device as u16;
        let seq = match delivery.what {
            Delivered::Bytes(bytes) => file.bytes(host_ns, device, bytes),
            Delivered::TimeRequested { token } => {
                file.add(host_ns, device, Body::Link(LinkWhat::TimeRequested { token }))
            }
            Delivered::Down => file.add(host_ns, device, Body::Link(LinkWhat::Down { reason: "pulled".into() })),
            Delivered::Up => file.add(host_ns, device, Body::Link(LinkWhat::Up { path: "port".into(), baud: 115_200 })),
        };
        let (first_seq, first_ns) = *first.get_or_insert((seq, host_ns));
        if !opened && host_ns > first_ns + PREROLL_NS {
            file.open_trial(host_ns, first_seq, first_ns);
            opened = true;
        }
        last_ns = host_ns;
    }
    if closed {
        file.close_trial(last_ns);
    }
    file.save();
}

/// The journal in `dir` with its one trial.
pub fn opened(dir: &Path) -> (JournalReader, TrialRange) {
    opened_of(dir, JOURNAL_ID)
}

pub fn opened_of(dir: &Path, journal_id: &str) -> (JournalReader, TrialRange) {
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let reader = JournalReader::open(disk, &dir.join("journal"), journal_id).unwrap();
    let range = reader.trials().unwrap().remove(0);
    (reader, range)
}
