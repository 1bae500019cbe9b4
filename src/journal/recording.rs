//! What the recorder's appending thread does, without the thread: the daemon runs it beside two threads for the disk, a
//! sweep runs the same code in virtual time.

use std::sync::Arc;

use crossbeam_channel::Sender;

use crate::link::{DeviceIdx, FromLinks, HostClock};

use super::job::{Job, Outcome};
use super::lately::Lately;
use super::recorder::{Order, RecorderNow, Report};
use super::writer::Journal;
use super::{Body, Clocks, EventBody, TrialOpen};

const CLOCKS_EVERY_NS: i64 = 1_000_000_000;

/// A journal being recorded to: takes what links and daemon give, hands out disk work, reports what became of it.
#[derive(Debug)]
pub struct Recording {
    journal: Journal,
    clock: Arc<dyn HostClock>,
    read_clocks: fn() -> Clocks,
    reports: Sender<Report>,
    queue: Lately<f64>,
    clocks_at_ns: i64,
    /// Trials whose closing record (by sequence) is not known to be on the disk yet.
    closing: Vec<(u64, String)>,
}

impl Recording {
    /// `read_clocks` is called once a second. Reports that find no room are dropped: the journal holds the facts.
    pub fn new(
        journal: Journal,
        clock: Arc<dyn HostClock>,
        read_clocks: fn() -> Clocks,
        reports: Sender<Report>,
    ) -> Self {
        Self { journal, clock, read_clocks, reports, queue: Lately::default(), clocks_at_ns: 0, closing: Vec::new() }
    }

    /// Notes how full the queue is that feeds this, relative to its bound.
    pub fn saw_queue(&mut self, filled: f64) {
        self.queue.add(self.clock.monotonic_ns(), filled);
    }

    pub fn take(&mut self, item: FromLinks) {
        match item {
            FromLinks::Event(event) => self.journal.append(event.host_ns, event.device, &Body::Link(event.what)),
            FromLinks::Lost { device, lost } => self.journal.append(lost.last_host_ns, device, &Body::Lost(lost)),
            FromLinks::Heartbeat { host_ns } => self.journal.append(host_ns, DeviceIdx(0), &Body::Heartbeat),
        };
    }

    pub fn obey(&mut self, order: Order) {
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

    /// What is done between any two receipts. Jobs go to `begin`: syncs to one thread, the others to a second one.
    pub fn turn(&mut self, begin: &mut dyn FnMut(Job)) {
        let now_ns = self.clock.monotonic_ns();
        if now_ns >= self.clocks_at_ns {
            self.clocks_at_ns = now_ns + CLOCKS_EVERY_NS;
            self.journal.append(now_ns, DeviceIdx(0), &Body::Clocks((self.read_clocks)()));
            self.journal.release();
        }
        self.journal.commit(now_ns);
        while let Some(job) = self.journal.next_job(now_ns) {
            begin(job);
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
    }

    /// A job that `turn` handed out has ended.
    pub fn job_done(&mut self, outcome: Outcome) {
        let now_ns = self.clock.monotonic_ns();
        self.journal.job_done(outcome, now_ns);
        let durable_before = self.journal.durable_before();
        let durable: Vec<_> = self.closing.extract_if(.., |(seq, _)| *seq < durable_before).collect();
        for (_, trial_id) in durable {
            self.report(Report::TrialClosed { trial_id, durable: true });
        }
    }

    pub fn now(&mut self) -> RecorderNow {
        let now_ns = self.clock.monotonic_ns();
        self.queue.forget_old(now_ns);
        RecorderNow {
            health: self.journal.health(now_ns),
            queue_high_water: self.queue.greatest().unwrap_or(0.0),
            refusing: self.journal.is_refusing(),
        }
    }

    /// Records before this sequence number are on the disk.
    pub fn durable_before(&self) -> u64 {
        self.journal.durable_before()
    }

    /// Everything taken is on the disk.
    pub fn is_durable(&self) -> bool {
        self.journal.is_clean()
    }

    /// Asks for a sync without waiting for the interval.
    pub fn sync_soon(&mut self) {
        self.journal.sync_soon();
    }

    /// The end: trials whose closing is not known to be durable are told so, and, where everything is, what was reserved
    /// goes back to the disk.
    pub fn end(mut self) {
        for (_, trial_id) in std::mem::take(&mut self.closing) {
            self.report(Report::TrialClosed { trial_id, durable: false });
        }
        if self.journal.is_clean() {
            self.journal.end();
        }
    }

    fn report(&self, report: Report) {
        // The daemon drains these all the time; one that finds no room is in the journal all the same.
        let _ = self.reports.try_send(report);
    }
}

#[cfg(test)]
mod tests {
    use super::super::{Item, JournalReader, Origin, Settings, StagedDisk, Start};
    use super::*;
    use std::path::Path;
    use std::sync::atomic::{AtomicI64, Ordering};

    const ID: &str = "000001-abc123";

    #[derive(Debug, Default)]
    struct Set(AtomicI64);

    impl HostClock for Set {
        fn monotonic_ns(&self) -> i64 {
            self.0.load(Ordering::SeqCst)
        }
    }

    fn recording(disk: &StagedDisk, clock: &Arc<Set>) -> Recording {
        let origin = Origin {
            journal_id: ID.into(),
            program_version: "0".into(),
            kernel_boot_id: "boot".into(),
            rig_text: String::new(),
            devices: Vec::new(),
        };
        let (shared, settings) = (Arc::new(disk.clone()), Settings::default());
        let journal = Journal::begin(shared, Path::new("j"), origin, Start::fresh(), settings, 0).unwrap();
        Recording::new(journal, Arc::clone(clock) as _, Clocks::read, crossbeam_channel::bounded(9).0)
    }

    #[test]
    fn a_queue_that_was_nearly_full_once_is_not_held_against_it_for_ever() {
        let clock = Arc::new(Set::default());
        let mut recording = recording(&StagedDisk::default(), &clock);
        let mut after_s = |s: i64, filled: f64| {
            clock.0.store(s * 1_000_000_000, Ordering::SeqCst);
            recording.saw_queue(filled);
            recording.now().queue_high_water
        };
        assert_eq!([after_s(0, 0.01), after_s(1, 0.9), after_s(2, 0.02)], [0.01, 0.9, 0.9]);
        assert_eq!([after_s(11, 0.01), after_s(12, 0.01)], [0.9, 0.02]);
    }

    #[test]
    fn the_four_clocks_are_read_once_a_second() {
        let (disk, clock) = (StagedDisk::default(), Arc::new(Set::default()));
        let mut recording = recording(&disk, &clock);
        for ms in (0..=3500).step_by(10) {
            clock.0.store(ms * 1_000_000, Ordering::SeqCst);
            recording.turn(&mut |_| {});
        }
        let reader = JournalReader::open(Arc::new(disk), Path::new("j"), ID).unwrap();
        let at_ns = reader.records().filter_map(|item| match item.unwrap() {
            Item::Record(record) if matches!(record.body, Body::Clocks(_)) => Some(record.host_ns),
            _ => None,
        });
        assert_eq!(at_ns.collect::<Vec<_>>(), [0, 1, 2, 3].map(|s| s * 1_000_000_000));
    }
}
