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

use crate::link::{FromLinks, HostClock};

use super::disk::Disk;
use super::job::{Job, Outcome};
use super::recording::Recording;
use super::writer::Journal;
use super::{Clocks, EventBody, Health, TrialClose};

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
    /// Most that waited in the queue in the last ten seconds, relative to its bound.
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
            recording: Recording::new(journal, Arc::clone(&clock), read_clocks, ends.reports),
            clock,
            syncs,
            chores,
            outcomes: outcomes_end,
            shown: Arc::clone(&now),
            show_at_ns: 0,
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
    recording: Recording,
    clock: Arc<dyn HostClock>,
    syncs: Sender<Job>,
    chores: Sender<Job>,
    outcomes: Receiver<Outcome>,
    shown: Arc<Mutex<RecorderNow>>,
    show_at_ns: i64,
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
                    Ok(order) => self.recording.obey(order),
                    Err(_) => (orders, orders_open) = (never(), false),
                },
                recv(self.outcomes) -> outcome => match outcome {
                    Ok(outcome) => self.recording.job_done(outcome),
                    Err(_) => self.outcomes = never(),
                },
                default(IDLE) => {}
            }
            self.turn();
        }
        self.finish()
    }

    fn take_all(&mut self, first: FromLinks, links: &Receiver<FromLinks>) {
        self.recording.saw_queue(links.len() as f64 / links.capacity().unwrap_or(usize::MAX) as f64);
        self.recording.take(first);
        links.try_iter().take(BATCH).for_each(|item| self.recording.take(item));
    }

    fn turn(&mut self) {
        let (syncs, chores) = (&self.syncs, &self.chores);
        self.recording.turn(&mut |job| {
            let beside = if job.is_sync() { syncs } else { chores };
            // One job of each kind is under way at most, so it fits; without its thread `is_running` says so.
            let _ = beside.try_send(job);
        });
        let now_ns = self.clock.monotonic_ns();
        if now_ns >= self.show_at_ns {
            self.show_at_ns = now_ns + SHOW_EVERY_NS;
            *lock(&self.shown) = self.recording.now();
        }
    }

    fn finish(mut self) -> Farewell {
        let begun_ns = self.clock.monotonic_ns();
        self.recording.sync_soon();
        while !self.recording.is_durable() && self.clock.monotonic_ns() - begun_ns < LAST_SYNC_NS {
            self.turn();
            if let Ok(outcome) = self.outcomes.recv_timeout(IDLE) {
                self.recording.job_done(outcome);
            }
            self.recording.sync_soon();
        }
        let now = self.recording.now();
        *lock(&self.shown) = now.clone();
        let durable = self.recording.is_durable();
        self.recording.end();
        Farewell { durable, health: now.health }
    }
}

fn lock(now: &Mutex<RecorderNow>) -> MutexGuard<'_, RecorderNow> {
    now.lock().unwrap_or_else(PoisonError::into_inner)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::journal::{Body, Fault, JournalReader, Operation, Origin, Settings, StagedDisk, Start};
    use crate::link::{DeviceIdx, LinkEvent, LinkWhat, SystemClock};
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
