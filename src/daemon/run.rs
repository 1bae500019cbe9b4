//! Starts everything in order, and hands over to the conductor.

use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::time::Duration;

use crossbeam_channel::{Receiver, bounded};

use crate::archive;
use crate::calibration;
use crate::feed::FeedServer;
use crate::feed::message::{Event, Hello};
use crate::journal::{
    ArchiveLock, Clocks, DeviceAtOpen, Disk, Ends, Order, RealDisk, Recorder, Settings, TrialRange, journals,
};
use crate::link::{self, HostClock, PortSpec, Sinks, SystemClock, spawn_links};
use crate::live::Live;
use crate::rig::Rig;

use super::begin::begin_journal;
use super::conductor::{Conductor, Inputs};
use super::cords::CordCounter;
use super::error::DaemonError;
use super::found::{self, Found, Known, Present, Resumed};
use super::machine::{kernel_boot_id, random_part};
use super::outgoing::Outgoing;
use super::ports::FirstOpenings;
use super::room::RoomWatch;
use super::sealing::{SealCommand, Sealer, Settle};
use super::service::{Service, ServiceManager};
use super::trials::TrialBook;
use super::words;

/// How a daemon is to run.
#[derive(Debug, Clone)]
pub struct Options {
    /// The archive: trial files, and `journal/` below it.
    pub dir: PathBuf,
    /// Where the feed is served.
    pub socket: PathBuf,
    /// Start although a port is not there, and wait for it.
    pub wait_for_ports: bool,
    /// For all journal segments together, unsealed trials apart.
    pub budget_bytes: u64,
    /// Room is kept on the disk for a hold of this long.
    pub longest_hold: Duration,
    /// Keep the journal of every trial recorded by this run until a person lets it go, whoever seals it.
    pub keep_journal: bool,
    /// How long the end waits for sealing.
    pub seal_patience: Duration,
    /// The program that seals, called with `seal-child`; this one, unless a test says otherwise.
    pub program: PathBuf,
    /// Who is to be told that it runs, if anybody.
    pub service_manager: ServiceManager,
}

/// Reads a second of one device at the shortest: USB hands bytes over each millisecond.
const READS_PER_S: usize = 1000;
/// The journal's queue holds this long of every device's reads, with room for heartbeats.
const QUEUE_S: usize = 12;
const ORDERS: usize = 1024;
const REPORTS: usize = 4096;

/// Runs the daemon until `shutdown` says why it is to stop. `on_event` hears of everything that the feed tells at once.
///
/// # Errors
/// What keeps it from starting, or from ending with everything on the disk.
pub fn run(
    rig: &Rig,
    options: &Options,
    shutdown: Receiver<String>,
    on_event: Box<dyn FnMut(&Event)>,
) -> Result<(), DaemonError> {
    let clock: Arc<dyn HostClock> = Arc::new(SystemClock);
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let unmakeable = |source| DaemonError::Directory { dir: options.dir.clone(), source };
    disk.create_dir(&options.dir).map_err(unmakeable)?;
    let _lock = ArchiveLock::take(&options.dir, &holder(rig))?;
    archive::clear_up(&*disk, &options.dir).map_err(unmakeable)?;
    if !options.wait_for_ports {
        look_for_ports(rig)?;
    }
    let boot_id = kernel_boot_id().map_err(|source| DaemonError::Machine { what: "boot id", source })?;
    let present = Present { kernel_boot_id: &boot_id, rig_text: &rig.text };
    let mut found = look(&disk, &options.dir, present)?;
    let (settings, journal_dir) = (settings(options), archive::journal_dir(&options.dir));
    let now_ns = clock.monotonic_ns();
    let journal = begin_journal(&found, &disk, &journal_dir, present, devices_unknown(rig), settings, now_ns)?;
    let journal_id = journal.journal_id().to_owned();

    let (feed, requests) = FeedServer::start(&options.socket, Hello::of(rig))?;
    let machine = |source| DaemonError::Machine { what: "thread", source };
    let (orders, orders_end) = bounded(ORDERS);
    let (reports_in, reports) = bounded(REPORTS);
    let queue = QUEUE_S * READS_PER_S * rig.devices.len() + QUEUE_S * 50;
    let ((to_journal, journal_end), (to_live, live)) = (bounded(queue), bounded(queue));
    let ends = Ends { links: journal_end, orders: orders_end, reports: reports_in };
    let recorder =
        Recorder::spawn(journal, Arc::clone(&disk), ends, Arc::clone(&clock), Clocks::read).map_err(machine)?;
    let seal_command = SealCommand::new(options.program.clone(), options.dir.clone());
    let (sealer, sealed) = Sealer::spawn(seal_command).map_err(machine)?;
    let (cords, counted) = if rig.details.cord_items.is_empty() {
        (None, crossbeam_channel::never())
    } else {
        let (counter, counted) = CordCounter::spawn(options.program.clone(), options.dir.clone()).map_err(machine)?;
        counter.count();
        (Some(counter), counted)
    };
    let sinks = Sinks { journal: to_journal, live: to_live };
    let seed = random_part().map_err(|source| DaemonError::Machine { what: "random numbers", source })?;
    let links = spawn_links(ports(rig), sinks, Arc::clone(&clock), u64::from(seed)).map_err(machine)?;

    for journal_id in std::mem::take(&mut found.done_with) {
        sealer.settle(Settle::Whole { journal_id, trial_number: found.next_trial_number.saturating_sub(1) });
    }
    let waiting = std::mem::take(&mut found.unsealed);
    waiting.iter().for_each(|unsealed| sealer.seal(unsealed.clone()));
    let mut conductor = Conductor {
        live: Live::new(rig),
        feed,
        outgoing: Outgoing::new(orders),
        recorder,
        links: Some(links),
        sealer,
        cords,
        book: TrialBook::new(journal_id.clone(), found.next_trial_number, waiting),
        clock,
        on_event,
        unfinished: found.unfinished.take(),
        device_names: rig.devices.iter().map(|device| device.name.clone()).collect(),
        dir: options.dir.clone(),
        seal_patience: options.seal_patience,
        room: RoomWatch::new(options.longest_hold, declared_bytes_per_s(rig)),
        held_back_from_ns: None,
        had_room: true,
        settle_at_ns: 0,
        openings: FirstOpenings::of(rig),
        wait_for_ports: options.wait_for_ports,
        service: Service::reach(&options.service_manager),
    };
    conductor.say_hello(rig, &found, &options.socket, &journal_id);
    conductor.service.ready();
    conductor.run(Inputs { live, requests, reports, sealed, counted, shutdown })
}

/// What the archive holds; what an earlier run noted as done with is not read again.
fn look(disk: &Arc<dyn Disk>, dir: &Path, present: Present<'_>) -> Result<Found, DaemonError> {
    let journal_dir = archive::journal_dir(dir);
    archive::forget_settled(dir, &journals(&**disk, &journal_dir)?)
        .map_err(|source| DaemonError::Directory { dir: journal_dir.clone(), source })?;
    let is_sealed = |range: &TrialRange| matches!(archive::sealed_file(range, dir), Ok(Some(_)));
    let settled = |journal_id: &str| archive::settled(dir, journal_id);
    let known = Known { is_sealed: &is_sealed, settled: &settled };
    Ok(found::look(disk, dir, &journal_dir, present, known)?)
}

fn holder(rig: &Rig) -> String {
    let since = words::wall(&Clocks::read());
    format!("process {}, rig {}, since {}", std::process::id(), rig.name, if since.is_empty() { "?" } else { &since })
}

fn look_for_ports(rig: &Rig) -> Result<(), DaemonError> {
    for device in &rig.devices {
        link::look(Path::new(&device.port))
            .map_err(|source| DaemonError::Port { device: device.name.clone(), source })?;
    }
    Ok(())
}

/// Ten bits a byte on the wire.
fn declared_bytes_per_s(rig: &Rig) -> f64 {
    rig.devices.iter().map(|device| f64::from(device.baud) / 10.0).sum()
}

fn ports(rig: &Rig) -> Vec<PortSpec> {
    (0..).zip(&rig.devices).map(|(idx, device)| PortSpec::of(idx, device)).collect()
}

/// Segments are small against the budget, so that letting go of the oldest gives back a part of it only.
fn settings(options: &Options) -> Settings {
    let (usual, budget_bytes) = (Settings::default(), options.budget_bytes);
    let segment_bytes = (budget_bytes / 16).clamp(usual.reserve_bytes, usual.segment_bytes);
    Settings { budget_bytes, segment_bytes, keep: options.keep_journal, ..usual }
}

fn devices_unknown(rig: &Rig) -> Vec<DeviceAtOpen> {
    let unknown = |device: &crate::rig::Device| DeviceAtOpen {
        name: device.name.clone(),
        port: device.port.clone(),
        describe_hex: String::new(),
    };
    rig.devices.iter().map(unknown).collect()
}

impl Conductor {
    /// Tells what was found and that recording has begun.
    fn say_hello(&mut self, rig: &Rig, found: &Found, socket: &Path, journal_id: &str) {
        let now_ns = self.clock.monotonic_ns();
        for remark in &found.remarks {
            self.tell(words::event(now_ns, "journal", "daemon", remark.clone()));
        }
        for error in &found.unreadable {
            self.complain(&format!(
                "{error}; its trials are not sealed now, recording begins all the same. Where the \
                 disk is at fault, copy the file to a sound one; `tautrail recover` tries it again"
            ));
        }
        if let Some(resumed) = &found.resumed {
            self.say_resumed(resumed, now_ns);
        }
        for unsealed in self.book.waiting().to_vec() {
            let text = format!("trial {} has no file yet and is sealed now", unsealed.trial_id);
            self.tell(words::event(now_ns, "seal", "daemon", text));
        }
        let doubts = calibration::doubts(rig, words::today());
        let mut standing = self.live.calibration_doubts(now_ns, &doubts);
        standing.extend(self.live.judge_proof(now_ns));
        for happening in standing {
            self.act(&happening);
        }
        self.outgoing.push(Order::Pin { first_seq: self.book.pinned_from() });
        let text = format!("recording to journal {journal_id}, feed at {}", socket.display());
        self.tell(words::event(now_ns, "daemon", "daemon", text));
    }

    fn say_resumed(&mut self, resumed: &Resumed, now_ns: i64) {
        let away_s = (now_ns - resumed.last_host_ns) as f64 * 1e-9;
        let text = match &resumed.open_trial {
            Some(trial) => {
                self.live.resume_trial();
                self.book.resume(trial.trial_id.clone(), trial.first_seq, trial.opened_host_ns, resumed.open_bytes);
                self.outgoing.push(Order::ResumeTrial { trial_id: trial.trial_id.clone(), first_seq: trial.first_seq });
                format!("trial {} was under way and goes on; nothing was recorded for {away_s:.3} s", trial.trial_id)
            }
            None => format!("the journal goes on; nothing was recorded for {away_s:.3} s"),
        };
        self.tell(words::event(now_ns, "journal", "daemon", text));
    }
}
