//! The recorder: the thread that appends, the thread beside it that syncs, and one for the disk's chores.
//!
//! Everything that waits is appended and handed to the kernel at once; the slow work of the disk is done beside it, so a
//! slow sync never holds up an append. Ends when the links' queue and the orders are both closed and drained, after
//! a last sync.

use std::io;
use std::sync::{Arc, Mutex, MutexGuard, PoisonError};
use std::thread::JoinHandle;
use std::time::Duration;

use crossbeam_channel::{Receiver, Sender, bounded, never, select};

use crate::link::{DeviceIdx, FromLinks, HostClock};

use super::disk::Disk;
use super::job::{Job, Outcome};
use super::writer::Journal;
use super::{Body, Clocks, EventBody, Health, TrialClose, TrialOpen};

/// What the daemon asks of the recorder.
#[derive(Debug, Clone, PartialEq)]
pub enum Order {
    /// Opens a trial that reaches back to `from_host_ns`, as far as the journal does.
    OpenTrial {
        host_ns: i64,
        from_host_ns: i64,
        trial_id: String,
        reason: String,
        person: String,
        continues: Option<String>,
    },
    /// Goes on with a trial that an earlier run opened: its segments stay pinned from `first_seq` on.
    ResumeTrial {
        trial_id: String,
        first_seq: u64,
    },
    CloseTrial {
        host_ns: i64,
        close: TrialClose,
    },
    Event {
        host_ns: i64,
        event: EventBody,
    },
    /// The first record that an unsealed trial needs; `None` when there is none.
    Pin {
        first_seq: Option<u64>,
    },
}

/// What the recorder tells the daemon.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Report {
    TrialOpened {
        trial_id: String,
        first_seq: u64,
    },
    /// The closing record is on the disk, or the disk takes no more: then the next start finds the trial open.
    TrialClosed {
        trial_id: String,
        durable: bool,
    },
    /// A sentence about the journal itself.
    Notice(String),
}

/// The recorder's state, as of the last tenth of a second.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct RecorderNow {
    pub health: Health,
    /// Most that waited in the queue since the start, relative to its bound.
    pub queue_high_water: f64,
    /// Ordinary records find no room.
    pub refusing: bool,
}

/// How the recorder ended.
#[derive(Debug, Clone, PartialEq)]
pub struct Farewell {
    /// Everything appended is on the disk.
    pub durable: bool,
    pub health: Health,
}

/// The running recorder.
#[derive(Debug)]
pub struct Recorder {
    now: Arc<Mutex<RecorderNow>>,
    appending: JoinHandle<Farewell>,
    beside: [JoinHandle<()>; 2],
}

/// A thread of the recorder panicked.
#[derive(Debug, thiserror::Error)]
#[error("the recorder panicked; this is a fault of the program, the journal holds what it was given before")]
pub struct RecorderPanicked;

/// What the recorder takes from and gives to.
#[derive(Debug)]
pub struct Ends {
    pub links: Receiver<FromLinks>,
    pub orders: Receiver<Order>,
    pub reports: Sender<Report>,
}

/// Appended in one go; then the kernel gets it.
const BATCH: usize = 512;
/// Longest wait for something to do.
const IDLE: Duration = Duration::from_millis(10);
const CLOCKS_EVERY_NS: i64 = 1_000_000_000;
const SHOW_EVERY_NS: i64 = 100_000_000;
/// How long the last sync may take before the end is declared not durable.
const LAST_SYNC_NS: i64 = 10_000_000_000;

impl Recorder {
    /// Starts the threads. `read_clocks` is called once a second.
    pub fn spawn(
        journal: Journal,
        disk: Arc<dyn Disk>,
        ends: Ends,
        clock: Arc<dyn HostClock>,
        read_clocks: fn() -> Clocks,
    ) -> io::Result<Self> {
        let (outcomes, outcomes_end) = bounded::<Outcome>(2);
        let (syncs, sync_thread) = beside("journal-sync", Arc::clone(&disk), outcomes.clone())?;
        let (chores, chore_thread) = beside("journal-chores", disk, outcomes)?;
        let now = Arc::new(Mutex::new(RecorderNow::default()));
        let appender = Appender {
            journal,
            clock,
            read_clocks,
            reports: ends.reports,
            syncs,
            chores,
            outcomes: outcomes_end,
            shown: Arc::clone(&now),
            queue_high_water: 0.0,
            clocks_at_ns: 0,
            show_at_ns: 0,
            closing: Vec::new(),
        };
        let (links, orders) = (ends.links, ends.orders);
        let appending =
            std::thread::Builder::new().name("journal".to_owned()).spawn(move || appender.run(links, orders))?;
        Ok(Self { now, appending, beside: [sync_thread, chore_thread] })
    }

    pub fn now(&self) -> RecorderNow {
        lock(&self.now).clone()
    }

    pub fn is_running(&self) -> bool {
        !self.appending.is_finished() && !self.beside.iter().any(JoinHandle::is_finished)
    }

    /// Waits for the end, which comes after the queues were closed.
    ///
    /// # Errors
    /// When a thread panicked.
    pub fn join(self) -> Result<Farewell, RecorderPanicked> {
        let farewell = self.appending.join().map_err(|_| RecorderPanicked)?;
        if farewell.durable {
            for thread in self.beside {
                thread.join().map_err(|_| RecorderPanicked)?;
            }
        } // else it hangs in the disk: the process ends without it
        Ok(farewell)
    }
}

/// A thread that does one job after the other.
fn beside(name: &str, disk: Arc<dyn Disk>, outcomes: Sender<Outcome>) -> io::Result<(Sender<Job>, JoinHandle<()>)> {
    let (jobs, jobs_end) = bounded::<Job>(1);
    let thread = std::thread::Builder::new().name(name.to_owned()).spawn(move || {
        for job in jobs_end {
            if outcomes.send(job.run(&*disk)).is_err() {
                return; // the appending thread is gone
            }
        }
    })?;
    Ok((jobs, thread))
}

struct Appender {
    journal: Journal,
    clock: Arc<dyn HostClock>,
    read_clocks: fn() -> Clocks,
    reports: Sender<Report>,
    syncs: Sender<Job>,
    chores: Sender<Job>,
    outcomes: Receiver<Outcome>,
    shown: Arc<Mutex<RecorderNow>>,
    queue_high_water: f64,
    clocks_at_ns: i64,
    show_at_ns: i64,
    /// Trials whose closing record (by sequence) is not known to be on the disk yet.
    closing: Vec<(u64, String)>,
}

impl Appender {
    fn run(mut self, mut links: Receiver<FromLinks>, mut orders: Receiver<Order>) -> Farewell {
        let (mut links_open, mut orders_open) = (true, true);
        while links_open || orders_open {
            select! {
                recv(links) -> item => match item {
                    Ok(item) => self.take_all(item, &links),
                    Err(_) => (links, links_open) = (never(), false),
                },
                recv(orders) -> order => match order {
                    Ok(order) => self.obey(order),
                    Err(_) => (orders, orders_open) = (never(), false),
                },
                recv(self.outcomes) -> outcome => self.take_outcome(outcome.ok()),
                default(IDLE) => {}
            }
            self.turn();
        }
        self.finish()
    }

    fn take_all(&mut self, first: FromLinks, links: &Receiver<FromLinks>) {
        let waiting = links.len() as f64 / links.capacity().unwrap_or(usize::MAX) as f64;
        self.queue_high_water = self.queue_high_water.max(waiting);
        self.take(first);
        links.try_iter().take(BATCH).for_each(|item| self.take(item));
    }

    fn take(&mut self, item: FromLinks) {
        match item {
            FromLinks::Event(event) => self.journal.append(event.host_ns, event.device, &Body::Link(event.what)),
            FromLinks::Lost { device, lost } => self.journal.append(lost.last_host_ns, device, &Body::Lost(lost)),
            FromLinks::Heartbeat { host_ns } => self.journal.append(host_ns, DeviceIdx(0), &Body::Heartbeat),
        };
    }

    fn obey(&mut self, order: Order) {
        match order {
            Order::OpenTrial { host_ns, from_host_ns, trial_id, reason, person, continues } => {
                let (first_seq, first_host_ns) = self.journal.seq_at(from_host_ns);
                let open =
                    TrialOpen { trial_id: trial_id.clone(), first_seq, first_host_ns, reason, person, continues };
                self.journal.append(host_ns, DeviceIdx(0), &Body::TrialOpen(open));
                self.journal.set_open_trial(Some(trial_id.clone()));
                self.journal.pin(first_seq);
                self.report(Report::TrialOpened { trial_id, first_seq });
            }
            Order::ResumeTrial { trial_id, first_seq } => {
                self.journal.set_open_trial(Some(trial_id));
                self.journal.pin(first_seq);
            }
            Order::CloseTrial { host_ns, close } => {
                let trial_id = close.trial_id.clone();
                let seq = self.journal.append(host_ns, DeviceIdx(0), &Body::TrialClose(close));
                self.journal.set_open_trial(None);
                match seq {
                    Some(seq) => self.closing.push((seq, trial_id)),
                    None => self.report(Report::TrialClosed { trial_id, durable: false }),
                }
            }
            Order::Event { host_ns, event } => {
                self.journal.append(host_ns, DeviceIdx(0), &Body::Event(event));
            }
            Order::Pin { first_seq } => self.journal.set_pin(first_seq),
        }
    }

    /// What is done between any two receipts.
    fn turn(&mut self) {
        let now_ns = self.clock.monotonic_ns();
        if now_ns >= self.clocks_at_ns {
            self.clocks_at_ns = now_ns + CLOCKS_EVERY_NS;
            self.journal.append(now_ns, DeviceIdx(0), &Body::Clocks((self.read_clocks)()));
            self.journal.release();
        }
        self.journal.commit(now_ns);
        while let Some(job) = self.journal.next_job(now_ns) {
            let beside = if job.is_sync() { &self.syncs } else { &self.chores };
            // One job of each kind is under way at most, so it fits; without its thread `is_running` says so.
            let _ = beside.try_send(job);
        }
        for sentence in self.journal.take_notices() {
            let event = EventBody {
                kind: "journal".to_owned(),
                source: "journal".to_owned(),
                person: None,
                text: sentence.clone(),
            };
            self.journal.append(now_ns, DeviceIdx(0), &Body::Event(event));
            self.report(Report::Notice(sentence));
        }
        if now_ns >= self.show_at_ns {
            self.show_at_ns = now_ns + SHOW_EVERY_NS;
            self.show(now_ns);
        }
    }

    fn take_outcome(&mut self, outcome: Option<Outcome>) {
        let now_ns = self.clock.monotonic_ns();
        match outcome {
            Some(outcome) => self.journal.job_done(outcome, now_ns),
            None => self.outcomes = never(),
        }
        let durable_before = self.journal.durable_before();
        let durable: Vec<_> = self.closing.extract_if(.., |(seq, _)| *seq < durable_before).collect();
        for (_, trial_id) in durable {
            self.report(Report::TrialClosed { trial_id, durable: true });
        }
    }

    fn show(&mut self, now_ns: i64) {
        let now = RecorderNow {
            health: self.journal.health(now_ns),
            queue_high_water: self.queue_high_water,
            refusing: self.journal.is_refusing(),
        };
        *lock(&self.shown) = now;
    }

    fn report(&self, report: Report) {
        // The daemon drains these all the time; one that finds no room is in the journal all the same.
        let _ = self.reports.try_send(report);
    }

    fn finish(mut self) -> Farewell {
        let begun_ns = self.clock.monotonic_ns();
        self.journal.sync_soon();
        while !self.journal.is_clean() && self.clock.monotonic_ns() - begun_ns < LAST_SYNC_NS {
            self.turn();
            if let Ok(outcome) = self.outcomes.recv_timeout(IDLE) {
                self.take_outcome(Some(outcome));
            }
            self.journal.sync_soon();
        }
        let durable = self.journal.is_clean();
        for (_, trial_id) in std::mem::take(&mut self.closing) {
            self.report(Report::TrialClosed { trial_id, durable: false });
        }
        let now_ns = self.clock.monotonic_ns();
        self.show(now_ns);
        let health = self.journal.health(now_ns);
        if durable {
            self.journal.end();
        }
        Farewell { durable, health }
    }
}

fn lock(now: &Mutex<RecorderNow>) -> MutexGuard<'_, RecorderNow> {
    now.lock().unwrap_or_else(PoisonError::into_inner)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::journal::{Fault, JournalReader, Operation, Origin, Settings, StagedDisk, Start};
    use crate::link::{LinkEvent, LinkWhat, SystemClock};
    use bytes::Bytes;
    use std::path::Path;

    struct Rig {
        disk: StagedDisk,
        links: Sender<FromLinks>,
        orders: Sender<Order>,
        reports: Receiver<Report>,
        recorder: Recorder,
    }

    fn start() -> Rig {
        let disk = StagedDisk::default();
        let origin = Origin {
            journal_id: "000001-abc123".into(),
            program_version: "0".into(),
            kernel_boot_id: "boot".into(),
            rig_text: String::new(),
            devices: Vec::new(),
        };
        let clock = Arc::new(SystemClock);
        let journal = Journal::begin(
            Arc::new(disk.clone()),
            Path::new("j"),
            origin,
            Start::fresh(),
            Settings { segment_bytes: 20_000, ..Settings::default() },
            clock.monotonic_ns(),
        )
        .unwrap();
        let ((links, links_end), (orders, orders_end), (reports_in, reports)) =
            (bounded(1000), bounded(10), bounded(99));
        let ends = Ends { links: links_end, orders: orders_end, reports: reports_in };
        let recorder = Recorder::spawn(journal, Arc::new(disk.clone()), ends, clock, Clocks::read).unwrap();
        Rig { disk, links, orders, reports, recorder }
    }

    fn bytes(i: u32) -> FromLinks {
        let what = LinkWhat::Bytes(Bytes::copy_from_slice(&i.to_le_bytes()));
        FromLinks::Event(LinkEvent { host_ns: SystemClock.monotonic_ns(), device: DeviceIdx(0), what })
    }

    #[test]
    fn a_trial_is_a_range_that_reaches_back_and_its_closing_is_durable_when_told() {
        let rig = start();
        let from_host_ns = SystemClock.monotonic_ns();
        (0..500).for_each(|i| rig.links.send(bytes(i)).unwrap());
        std::thread::sleep(Duration::from_millis(30));
        let host_ns = SystemClock.monotonic_ns();
        let trial_id = "000001-aaaaaa".to_owned();
        rig.orders
            .send(Order::OpenTrial {
                host_ns,
                from_host_ns,
                trial_id: trial_id.clone(),
                reason: "tension".into(),
                person: String::new(),
                continues: None,
            })
            .unwrap();
        let close = TrialClose { trial_id: trial_id.clone(), reason: "rest".into(), person: String::new() };
        rig.orders.send(Order::CloseTrial { host_ns, close: close.clone() }).unwrap();
        let closed = loop {
            match rig.reports.recv_timeout(Duration::from_secs(5)).unwrap() {
                Report::TrialClosed { durable, .. } => break durable,
                other => assert!(matches!(other, Report::TrialOpened { .. }), "{other:?}"),
            }
        };
        assert!(closed);
        let after = rig.disk.after_power_cut(&mut || 1);
        let reader = JournalReader::open(Arc::new(after), Path::new("j"), "000001-abc123").unwrap();
        let trials = reader.trials().unwrap();
        assert_eq!(trials[0].closed, Some(close));
        assert!(trials[0].first_seq <= 2, "reaches back to the first record: {:?}", trials[0]);
        drop((rig.links, rig.orders));
        assert!(rig.recorder.join().unwrap().durable);
    }

    #[test]
    fn everything_in_the_queue_is_durable_before_the_recorder_ends() {
        let rig = start();
        (0..900).for_each(|i| rig.links.send(bytes(i)).unwrap());
        drop((rig.links, rig.orders));
        assert!(rig.recorder.join().unwrap().durable);
        let after = rig.disk.after_power_cut(&mut || 1);
        let reader = JournalReader::open(Arc::new(after), Path::new("j"), "000001-abc123").unwrap();
        let n = reader.records().filter(
            |item| matches!(item, Ok(super::super::Item::Record(record)) if matches!(record.body, Body::Link(_))),
        );
        assert_eq!(n.count(), 900);
    }

    #[test]
    fn a_failed_sync_is_told() {
        let rig = start();
        rig.disk.fail(Operation::Sync, 2, Fault::Error(5));
        rig.links.send(bytes(1)).unwrap();
        let told = rig.reports.recv_timeout(Duration::from_secs(5)).unwrap();
        assert!(matches!(&told, Report::Notice(sentence) if sentence.contains("syncing failed")), "{told:?}");
    }
}
