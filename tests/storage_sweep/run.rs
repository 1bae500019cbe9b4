//! One run of the recorder's code on a staged disk, and what a reader finds of it.

use std::collections::{BTreeMap, BTreeSet};
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicI64, Ordering};

use bytes::Bytes;
use crossbeam_channel::bounded;
use tautrail::daemon::{Found, Known, Present, begin_journal, look};
use tautrail::journal::{
    Body, Clocks, DeviceAtOpen, Disk, Item, Job, Journal, JournalReader, Order, Origin, Recording, Report, Settings,
    StagedDisk, Start, TrialClose, TrialRange, journals,
};
use tautrail::link::{DeviceIdx, FromLinks, HostClock, LinkEvent, LinkWhat};

pub const ARCHIVE: &str = "archive";
pub const DIR: &str = "archive/journal";
pub const ID: &str = "000001-abc123";
pub const TRIAL: &str = "000001-fedcba";
pub const MS: i64 = 1_000_000;
pub const STEP_NS: i64 = 10 * MS;
pub const OPENED_AT: u64 = 40;
pub const CLOSED_AT: u64 = 110;
pub const N_READS: u64 = 130;
pub const PRESENT: Present<'static> = Present { kernel_boot_id: "boot", rig_text: "invented" };
const NEVER_BEGUN: &str = "000000-000000-000001.tjl";
const READ_REPEATS: usize = 12;

/// A clock that steps and stalls move on.
#[derive(Debug, Clone, Default)]
pub struct Virtual(pub Arc<AtomicI64>);

impl HostClock for Virtual {
    fn monotonic_ns(&self) -> i64 {
        self.0.load(Ordering::SeqCst)
    }
}

/// What a run left behind.
pub struct Run {
    pub disk: StagedDisk,
    /// Numbers of the reads given to it.
    pub given: BTreeSet<u64>,
    pub reports: Vec<Report>,
    pub lost_events: u64,
    /// Records before this one were said to be on the disk.
    pub durable_before: u64,
}

/// What a reader finds.
#[derive(Debug, Default)]
pub struct Seen {
    /// Number of the read, by sequence; those of a second journal behind those of the first.
    pub reads: BTreeMap<u64, u64>,
    pub notices: Vec<String>,
    pub trials: Vec<TrialRange>,
    pub n_told_lost: u64,
}

pub fn settings() -> Settings {
    Settings {
        segment_bytes: 4096,
        reserve_bytes: 2048,
        tail_bytes_max: 1 << 16,
        budget_bytes: 1 << 20,
        ..Settings::default()
    }
}

pub fn devices() -> Vec<DeviceAtOpen> {
    vec![DeviceAtOpen { name: "winch-node".into(), port: "p".into(), describe_hex: String::new() }]
}

/// A disk on which an earlier run left a file that it never began.
pub fn stage(clock: &Virtual) -> StagedDisk {
    let disk = StagedDisk::new(Arc::clone(&clock.0));
    disk.create_new(&Path::new(DIR).join(NEVER_BEGUN)).expect("a file");
    disk.after_kill() // counts from here on
}

fn clocks() -> Clocks {
    Clocks { monotonic_ns: 1, monotonic_raw_ns: 2, boottime_ns: 3, realtime_ns: 4, wall_clock_set: false }
}

/// A first run from its first segment on; `None` when the journal refused to start.
pub fn record(disk: StagedDisk, clock: &Virtual, n_reads: u64) -> Option<Run> {
    let origin = Origin {
        journal_id: ID.into(),
        program_version: "0".into(),
        kernel_boot_id: PRESENT.kernel_boot_id.into(),
        rig_text: PRESENT.rig_text.into(),
        devices: devices(),
    };
    let (shared, now_ns) = (Arc::new(disk.clone()), clock.monotonic_ns());
    let mut journal = Journal::begin(shared, Path::new(DIR), origin, Start::fresh(), settings(), now_ns).ok()?;
    journal.forget(Path::new(DIR).join(NEVER_BEGUN));
    Some(drive(journal, disk, clock, 1..=n_reads))
}

/// What a daemon does when it starts, up to its first record; the error is why it refused.
pub fn start_again(disk: &StagedDisk, clock: &Virtual) -> Result<(Found, Journal), String> {
    let shared: Arc<dyn Disk> = Arc::new(disk.clone());
    let (archive, dir) = (Path::new(ARCHIVE), Path::new(DIR));
    shared.create_dir(archive).map_err(|error| error.to_string())?;
    tautrail::archive::clear_up(disk, archive).map_err(|error| error.to_string())?;
    let known = Known { is_sealed: &|_| false, settled: &|_| None };
    let found = look(&shared, archive, dir, PRESENT, known).map_err(|error| error.to_string())?;
    let now_ns = clock.monotonic_ns();
    let journal = begin_journal(&found, &shared, dir, PRESENT, devices(), settings(), now_ns);
    Ok((found, journal.map_err(|error| error.to_string())?))
}

/// Goes on after a start, with the orders that the daemon gives then.
pub fn go_on(found: &Found, journal: Journal, disk: StagedDisk, clock: &Virtual, n_reads: u64) -> Run {
    drive_with(journal, disk, clock, 1000..=999 + n_reads, |recording| {
        if let Some(trial) = found.resumed.as_ref().and_then(|resumed| resumed.open_trial.as_ref()) {
            recording.obey(Order::ResumeTrial { trial_id: trial.trial_id.clone(), first_seq: trial.first_seq });
        }
    })
}

fn drive(journal: Journal, disk: StagedDisk, clock: &Virtual, reads: std::ops::RangeInclusive<u64>) -> Run {
    drive_with(journal, disk, clock, reads, |_| {})
}

/// A read each 10 ms, a heartbeat each 20 ms; a job begun in one step ends in the next.
fn drive_with(
    journal: Journal,
    disk: StagedDisk,
    clock: &Virtual,
    reads: std::ops::RangeInclusive<u64>,
    first: impl FnOnce(&mut Recording),
) -> Run {
    let (told, reports) = bounded(4096);
    let mut recording = Recording::new(journal, Arc::new(clock.clone()), clocks, told);
    first(&mut recording);
    let (mut given, mut under_way) = (BTreeSet::new(), Vec::<Job>::new());
    for i in reads {
        clock.0.fetch_add(STEP_NS, Ordering::SeqCst);
        let host_ns = clock.monotonic_ns();
        let what = LinkWhat::Bytes(Bytes::from(i.to_le_bytes().repeat(READ_REPEATS)));
        recording.take(FromLinks::Event(LinkEvent { host_ns, device: DeviceIdx(0), what }));
        given.insert(i);
        if i.is_multiple_of(2) {
            recording.take(FromLinks::Heartbeat { host_ns });
        }
        order(i, host_ns).into_iter().for_each(|order| recording.obey(order));
        for job in std::mem::take(&mut under_way) {
            recording.job_done(job.run(&disk));
        }
        recording.turn(&mut |job| under_way.push(job));
    }
    let (durable_before, now) = (recording.durable_before(), recording.now());
    let (reports, lost_events) = (reports.try_iter().collect(), now.health.lost_events);
    Run { disk, given, reports, lost_events, durable_before }
}

fn order(i: u64, host_ns: i64) -> Option<Order> {
    let (trial_id, person) = (TRIAL.to_owned(), String::new());
    match i {
        OPENED_AT => {
            let (from_host_ns, reason) = (host_ns - 100 * MS, "sweep".into());
            Some(Order::OpenTrial { host_ns, from_host_ns, trial_id, reason, person, continues: None })
        }
        CLOSED_AT => {
            Some(Order::CloseTrial { host_ns, close: TrialClose { trial_id, reason: "sweep".into(), person } })
        }
        _ => None,
    }
}

/// Reads every journal; panics where it finds what was never written.
#[track_caller]
pub fn read(disk: &StagedDisk, what: &str) -> Seen {
    let mut seen = Seen::default();
    let ids = journals(disk, Path::new(DIR)).expect("the staged disk lists");
    let readers = ids.iter().filter_map(|id| JournalReader::open(Arc::new(disk.clone()), Path::new(DIR), id).ok());
    for (place, reader) in (0_u64..).zip(readers) {
        for item in reader.records() {
            let Item::Record(record) = item.expect("the staged disk reads") else { continue };
            match record.body {
                Body::Link(LinkWhat::Bytes(bytes)) => {
                    let i = u64::from_le_bytes(bytes[..8].try_into().expect("eight bytes"));
                    assert_eq!(bytes, i.to_le_bytes().repeat(READ_REPEATS), "{what}: record {}", record.seq);
                    seen.reads.insert((place << 40) + record.seq, i);
                }
                Body::Event(event) => seen.notices.push(event.text),
                Body::Lost(lost) => seen.n_told_lost += lost.n_events,
                _ => {}
            }
        }
        seen.trials.extend(reader.trials().expect("the staged disk reads"));
    }
    seen
}

impl Seen {
    pub fn numbers(&self) -> BTreeSet<u64> {
        self.reads.values().copied().collect()
    }

    pub fn trial_is_closed(&self) -> bool {
        self.trials.iter().any(|trial| trial.trial_id == TRIAL && trial.closed.is_some())
    }
}

impl Run {
    fn said_closed(&self) -> bool {
        self.reports.contains(&Report::TrialClosed { trial_id: TRIAL.into(), durable: true })
    }

    /// Everything given is read back after a kill, everything synced after a power cut, and nothing else.
    #[track_caller]
    pub fn check(&self, what: &str) {
        let after_kill = read(&self.disk.after_kill(), what);
        assert_eq!(after_kill.numbers(), self.given, "{what}: after a kill");
        self.check_seen(&after_kill, what);
        for seed in 0..3 {
            let seen = read(&self.disk.after_power_cut(&mut super::draws(seed)), what);
            for (seq, i) in after_kill.reads.range(..self.durable_before) {
                assert_eq!(seen.reads.get(seq), Some(i), "{what}: synced record {seq}, power cut {seed}");
            }
            assert!(seen.numbers().is_subset(&self.given), "{what}: power cut {seed}");
            assert!(seen.trial_is_closed() || !self.said_closed(), "{what}: said to be closed, power cut {seed}");
            self.check_seen(&seen, what);
        }
    }

    #[track_caller]
    fn check_seen(&self, seen: &Seen, what: &str) {
        for notice in &seen.notices {
            let told = Report::Notice(notice.clone());
            assert!(self.reports.contains(&told), "{what}: {notice:?} was never said");
        }
        for trial in &seen.trials {
            let last = seen.reads.keys().next_back().copied().unwrap_or(0);
            // Beside reads there are at most a few records of other kinds after the last one.
            assert!(trial.trial_id == TRIAL && trial.last_seq <= last + 8, "{what}: {trial:?}");
        }
    }
}

/// Every journal file there is, with its content.
pub fn journal_files(disk: &StagedDisk) -> BTreeMap<PathBuf, Vec<u8>> {
    let listed = disk.list(Path::new(DIR)).expect("the staged disk lists");
    let path = |name: &str| Path::new(DIR).join(name);
    listed.iter().filter_map(|file| Some((path(&file.name), disk.content(&path(&file.name))?))).collect()
}
