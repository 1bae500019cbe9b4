//! The daemon's main loop: what live sees becomes orders to the recorder, messages on the feed, and trials to seal.
//!
//! Never waits for a disk, a client or a child: orders that find the recorder's queue full are kept in order here.

use std::path::PathBuf;
use std::sync::Arc;
use std::time::{Duration, Instant};

use crossbeam_channel::{Receiver, never, select};

use crate::feed::message::{Event, Message};
use crate::feed::{FeedServer, Request};
use crate::journal::{Clocks, EventBody, Order, Recorder, RecorderNow, Report, TrialClose};
use crate::link::{FromLinks, HostClock, LinkEvent, LinkWhat, Links, Lost};
use crate::live::{Around, CordsNow, Happening, JournalNow, Live, TrialNow};

use super::cords::{CordCounter, Count};
use super::error::DaemonError;
use super::outgoing::Outgoing;
use super::ports::FirstOpenings;
use super::room::RoomWatch;
use super::sealing::{SealReport, Sealer, Settle};
use super::service::Service;
use super::trials::TrialBook;
use super::words;

/// Everything the loop owns.
pub struct Conductor {
    pub live: Live,
    pub feed: FeedServer,
    pub outgoing: Outgoing,
    pub recorder: Recorder,
    /// Taken when the ports are stopped.
    pub links: Option<Links>,
    pub sealer: Sealer,
    /// None where the rig file lists no cords.
    pub cords: Option<CordCounter>,
    pub book: TrialBook,
    pub clock: Arc<dyn HostClock>,
    pub on_event: Box<dyn FnMut(&Event)>,
    /// A trial that does not go on, as long as it may be the same tension: the next one says it continues it.
    pub unfinished: Option<String>,
    pub device_names: Vec<String>,
    pub dir: PathBuf,
    pub seal_patience: Duration,
    pub room: RoomWatch,
    /// A trial that was not opened for want of room, and how far it is to reach back.
    pub held_back_from_ns: Option<i64>,
    /// The disk had room for trials when it was last looked at.
    pub had_room: bool,
    /// When what is done with of the journal is noted again.
    pub settle_at_ns: i64,
    pub openings: FirstOpenings,
    /// Start and stay although every port is in use elsewhere.
    pub wait_for_ports: bool,
    pub service: Service,
}

/// Everything that reaches the loop.
#[derive(Debug)]
pub struct Inputs {
    pub live: Receiver<FromLinks>,
    pub requests: Receiver<Request>,
    pub reports: Receiver<Report>,
    pub sealed: Receiver<SealReport>,
    pub counted: Receiver<Count>,
    /// Why the daemon is to stop.
    pub shutdown: Receiver<String>,
}

/// 30 a second.
const SNAPSHOT_EVERY: Duration = Duration::from_nanos(33_333_333);
const SETTLE_EVERY_NS: i64 = 60_000_000_000;
const WATCH_EVERY: Duration = Duration::from_millis(200);
/// Taken in one go before anything else is looked at.
const BATCH: usize = 256;
/// How long the last orders may wait for the recorder.
const LAST_ORDERS: Duration = Duration::from_secs(10);

impl Conductor {
    /// Runs until told to stop, or until one of the threads ended by itself, then stops in the order in which data
    /// flow: what the threads that still run hold is on the disk before this returns.
    ///
    /// # Errors
    /// When a thread ended by itself, or the last records did not reach the disk.
    pub fn run(mut self, mut inputs: Inputs) -> Result<(), DaemonError> {
        match self.conduct(&mut inputs) {
            Ok(reason) => self.stop(&inputs, &reason),
            Err(fault) => {
                if let Err(more) = self.stop(&inputs, &fault.to_string()) {
                    tracing::error!("while stopping: {more}");
                }
                Err(fault)
            }
        }
    }

    /// The loop; gives the reason to stop.
    fn conduct(&mut self, inputs: &mut Inputs) -> Result<String, DaemonError> {
        let (mut snapshot_at, mut watch_at) = (Instant::now(), Instant::now());
        let ended = |thread| Err(DaemonError::ThreadEnded { thread });
        loop {
            let wait = snapshot_at.saturating_duration_since(Instant::now());
            select! {
                recv(inputs.live) -> item => match item {
                    Ok(item) => self.take_all(item, &inputs.live)?,
                    Err(_) => return ended("links"),
                },
                recv(inputs.requests) -> request => match request {
                    Ok(request) => self.answer(request),
                    Err(_) => inputs.requests = never(),
                },
                recv(inputs.reports) -> report => match report {
                    Ok(report) => self.take_report(report),
                    Err(_) => return ended("journal"),
                },
                recv(inputs.sealed) -> report => match report {
                    Ok(report) => self.take_sealed(report),
                    Err(_) => return ended("sealing"),
                },
                recv(inputs.counted) -> count => match count {
                    Ok(count) => self.take_cords(count),
                    Err(_) => inputs.counted = never(),
                },
                recv(inputs.shutdown) -> reason => {
                    return Ok(reason.unwrap_or_else(|_| "its owner is gone".to_owned()));
                }
                default(wait) => {}
            }
            self.send_orders();
            let now = Instant::now();
            if now >= watch_at {
                watch_at = now + WATCH_EVERY;
                self.watch()?;
            }
            if now >= snapshot_at {
                snapshot_at = (snapshot_at + SNAPSHOT_EVERY).max(now);
                self.publish_snapshot();
            }
        }
    }

    fn take_all(&mut self, first: FromLinks, live: &Receiver<FromLinks>) -> Result<(), DaemonError> {
        let mut busy = self.all_ports_busy(&first);
        self.take(first);
        for item in live.try_iter().take(BATCH) {
            busy |= self.all_ports_busy(&item);
            self.take(item);
        }
        if busy && !self.wait_for_ports {
            Err(DaemonError::PortsBusy { n_ports: self.device_names.len() })
        } else {
            Ok(())
        }
    }

    fn all_ports_busy(&mut self, item: &FromLinks) -> bool {
        matches!(item, FromLinks::Event(event) if self.openings.all_are_busy(event.device, &event.what))
    }

    fn take(&mut self, item: FromLinks) {
        let happenings = match item {
            FromLinks::Heartbeat { host_ns } => {
                self.service.alive(host_ns);
                self.live.tick(host_ns)
            }
            FromLinks::Lost { device, lost } => {
                self.live.on_lost(device, lost.last_host_ns);
                let device = self.device_names.get(usize::from(device.0)).cloned().unwrap_or_default();
                self.note_live_loss(&device, lost);
                Vec::new()
            }
            FromLinks::Event(event) => {
                self.room.recorded(recorded_bytes(&event.what));
                self.tell_link(&event);
                self.live.on_link(&event)
            }
        };
        for happening in happenings {
            self.act(&happening);
        }
        if self.live.cords() == CordsNow::Slack {
            self.unfinished = None;
        }
    }

    fn tell_link(&mut self, event: &LinkEvent) {
        let device = self.device_names.get(usize::from(event.device.0)).map_or("?", String::as_str);
        let text = match &event.what {
            LinkWhat::Up { path, baud } => format!("{device}: {path} is open at {baud} baud"),
            LinkWhat::Down { reason } => format!("{device}: {reason}"),
            LinkWhat::Note { text } => format!("{device}: {text}"),
            LinkWhat::Bytes(_) | LinkWhat::TimeRequested { .. } => return,
        };
        // In the journal it is a record of its own already.
        self.publish(&words::event(event.host_ns, "link", "link", text));
    }

    fn note_live_loss(&mut self, device: &str, lost: Lost) {
        let text = format!("the live view missed {} reads of {device}; the journal has its own queue", lost.n_events);
        self.tell(words::event(lost.last_host_ns, "note", "daemon", text));
    }

    pub(super) fn act(&mut self, happening: &Happening) {
        match happening {
            Happening::OpenTrial { host_ns, preroll_from_host_ns } => {
                self.open_by_tension(*host_ns, *preroll_from_host_ns);
            }
            Happening::CloseTrial { host_ns, reason } => self.close_trial(*host_ns, reason, ""),
            // In the journal its bytes are records of their own already.
            Happening::Device { .. } => self.publish(&Event::of(happening)),
            other => drop(self.tell(Event::of(other))),
        }
    }

    /// False: no trial was opened, and the feed says why.
    pub(super) fn open_trial(&mut self, host_ns: i64, from_host_ns: i64, reason: &str, person: &str) -> bool {
        let trial_id = match self.book.begin(host_ns, self.room.n_bytes()) {
            Ok(trial_id) => trial_id,
            Err(error) => {
                self.complain(&format!("cannot open a trial: {error}"));
                return false;
            }
        };
        let continues = self.unfinished.take();
        let text = match &continues {
            Some(earlier) => format!("trial {trial_id} opens, goes on under the tension of {earlier}: {reason}"),
            None => format!("trial {trial_id} opens: {reason}"),
        };
        self.outgoing.push(Order::OpenTrial {
            host_ns,
            from_host_ns,
            trial_id,
            reason: reason.to_owned(),
            person: person.to_owned(),
            continues,
        });
        self.publish(&words::by(person, words::event(host_ns, "trial", "daemon", text)));
        self.tell_tares(host_ns);
        true
    }

    pub(super) fn close_trial(&mut self, host_ns: i64, reason: &str, person: &str) {
        let Some(trial_id) = self.book.close(self.room.n_bytes()) else { return };
        let text = format!("trial {trial_id} closes: {reason}");
        let close = TrialClose { trial_id, reason: reason.to_owned(), person: person.to_owned() };
        self.outgoing.push(Order::CloseTrial { host_ns, close });
        self.publish(&words::by(person, words::event(host_ns, "trial", "daemon", text)));
    }

    fn take_report(&mut self, report: Report) {
        match report {
            Report::TrialOpened { trial_id, first_seq } => self.book.opened(&trial_id, first_seq),
            Report::TrialClosed { trial_id, durable: true } => {
                if let Some(unsealed) = self.book.find_waiting(&trial_id) {
                    self.sealer.seal(unsealed.clone());
                }
            }
            Report::TrialClosed { trial_id, durable: false } => self.complain(&format!(
                "the closing record of trial {trial_id} did not reach the disk; `tautrail recover` seals it"
            )),
            // The recorder has it in the journal.
            Report::Notice(text) => self.publish(&words::event(self.clock.monotonic_ns(), "journal", "journal", text)),
        }
    }

    /// Has it noted what of the journal the next start need not read.
    fn settle(&self, host_ns: i64) {
        let pinned_from_seq = self.book.pinned_from();
        if pinned_from_seq == Some(0) {
            return; // not known for an instant
        }
        let (journal_id, trial_number) = (self.book.journal_id().to_owned(), self.book.last_number());
        self.sealer.settle(Settle::Until { journal_id, host_ns, pinned_from_seq, trial_number });
    }

    fn take_sealed(&mut self, report: SealReport) {
        if report.result.is_ok() {
            self.book.sealed(&report.trial_id);
            self.outgoing.push(Order::Pin { first_seq: self.book.pinned_from() });
            if let Some(cords) = &self.cords {
                cords.count();
            }
        }
        self.tell(words::sealed(self.clock.monotonic_ns(), &report));
    }

    /// What the cords have served by now: those that are to come off are alarms.
    fn take_cords(&mut self, count: Count) {
        let now_ns = self.clock.monotonic_ns();
        match count {
            Ok(served) => {
                for happening in self.live.judge_cords(now_ns, &served, words::today()) {
                    self.act(&happening);
                }
            }
            Err(why) => self.complain(&format!("what the cords have served is not known: {why}")),
        }
    }

    /// Puts an event into the journal and on the feed.
    ///
    /// False: the journal takes nothing and so much waits that this event is on the feed only, and counted.
    pub(super) fn tell(&mut self, event: Event) -> bool {
        let recorded = self.outgoing.push(recorded_event(&event));
        self.publish(&event);
        recorded
    }

    /// The same of an event that a trial cannot do without: never left out.
    pub(super) fn tell_needed(&mut self, event: Event) {
        self.outgoing.push_needed(recorded_event(&event));
        self.publish(&event);
    }

    pub(super) fn complain(&mut self, sentence: &str) {
        self.tell(words::event(self.clock.monotonic_ns(), "alarm", "daemon", sentence.to_owned()));
    }

    fn publish(&mut self, event: &Event) {
        (self.on_event)(event);
        self.feed.publish(&Message::Event(event.clone()));
    }

    fn send_orders(&mut self) {
        if let Some(n_left_out) = self.outgoing.send() {
            self.complain(&format!(
                "{n_left_out} events and marks are not in the journal: it took nothing for too long and too many waited"
            ));
        }
    }

    fn watch(&mut self) -> Result<(), DaemonError> {
        if self.links.as_ref().is_some_and(|links| !links.is_running()) {
            return Err(DaemonError::ThreadEnded { thread: "links" });
        }
        if !self.recorder.is_running() {
            return Err(DaemonError::ThreadEnded { thread: "journal" });
        }
        let recorder = self.recorder.now();
        let now_ns = self.clock.monotonic_ns();
        self.room.look(now_ns);
        let room = self.room_now(&recorder);
        let disk = words::disk_trouble(&recorder).or_else(|| room.sentence().map(ToOwned::to_owned));
        let slow = words::slow(&recorder);
        if now_ns >= self.settle_at_ns {
            self.settle_at_ns = now_ns + SETTLE_EVERY_NS;
            self.settle(now_ns);
        }
        let disk = self.live.disk_trouble(now_ns, disk.as_deref());
        let slow = self.live.journal_trouble(now_ns, slow.as_deref());
        disk.iter().chain(&slow).for_each(|happening| self.act(happening));
        self.act_on_room(&recorder, &room, now_ns);
        Ok(())
    }

    fn publish_snapshot(&mut self) {
        if self.feed.n_clients() == 0 {
            return;
        }
        let now_ns = self.clock.monotonic_ns();
        let trial = self
            .book
            .open()
            .map(|open| TrialNow { id: open.trial_id.clone(), open_s: (now_ns - open.opened_ns) as f64 * 1e-9 });
        let around =
            Around { wall: words::wall(&Clocks::read()), journal: Some(journal_now(&self.recorder.now())), trial };
        let snapshot = self.live.snapshot(now_ns, around);
        self.feed.publish(&Message::Snapshot(Box::new(snapshot)));
        for raw in self.live.take_raw(now_ns) {
            self.feed.publish(&Message::Raw(raw));
        }
    }

    /// Ports, then what they left in the queues, then the closing record and the last sync, then the sealing, then the
    /// clients. Each step is done whatever became of the one before; the first thing that went wrong is told.
    fn stop(mut self, inputs: &Inputs, reason: &str) -> Result<(), DaemonError> {
        self.service.stopping();
        self.tell(words::event(self.clock.monotonic_ns(), "daemon", "daemon", format!("stops: {reason}")));
        let links = self.links.take().map_or(Ok(()), Links::stop);
        inputs.live.iter().for_each(|item| self.take(item)); // ends: the links have let go of their end
        self.close_or_leave_open();
        let Self { outgoing, recorder, sealer, feed, book, dir, seal_patience, clock, mut on_event, .. } = self;
        outgoing.send_last(Instant::now() + LAST_ORDERS);
        let farewell = recorder.join();
        for report in inputs.reports.try_iter() {
            if let Report::TrialClosed { trial_id, durable: true } = report
                && let Some(unsealed) = book.find_waiting(&trial_id)
            {
                sealer.seal(unsealed.clone());
            }
        }
        drop(sealer);
        let now_ns = clock.monotonic_ns();
        words::tell_sealing_until(Instant::now() + seal_patience, &inputs.sealed, now_ns, &mut |event| {
            on_event(&event);
            feed.publish(&Message::Event(event));
        });
        feed.close(reason);
        links?;
        if farewell?.durable { Ok(()) } else { Err(DaemonError::NotDurable { dir }) }
    }

    /// A trial is closed at the end only where the cords are known to be slack.
    fn close_or_leave_open(&mut self) {
        let now_ns = self.clock.monotonic_ns();
        let Some(open) = self.book.open() else { return };
        if self.live.cords() == CordsNow::Slack {
            return self.close_trial(now_ns, "the daemon was stopped, cords slack", "");
        }
        let text = format!(
            "trial {} stays open, the cords are not known to be slack: treat them as loaded; the next start goes on \
             with it, `tautrail recover` seals what there is",
            open.trial_id
        );
        self.tell(words::event(now_ns, "trial", "daemon", text));
    }
}

fn recorded_event(event: &Event) -> Order {
    let Event { host_ns, kind, source, person, text } = event.clone();
    Order::Event { host_ns, event: EventBody { kind, source, person, text } }
}

/// On disk: the read and its record's frame.
fn recorded_bytes(what: &LinkWhat) -> usize {
    const FRAME: usize = 28;
    match what {
        LinkWhat::Bytes(bytes) => bytes.len() + FRAME,
        LinkWhat::Up { .. } | LinkWhat::Down { .. } | LinkWhat::Note { .. } | LinkWhat::TimeRequested { .. } => FRAME,
    }
}

fn journal_now(now: &RecorderNow) -> JournalNow {
    JournalNow {
        bytes: now.health.own_bytes,
        free_bytes: now.health.free_bytes,
        sync_interval_s: now.health.exposure_ns_lately() as f64 * 1e-9,
        queue_high_water: now.queue_high_water,
        lost_events: now.health.lost_events,
        trouble: words::disk_trouble(now).or_else(|| words::slow(now)),
    }
}

#[cfg(test)]
mod tests;
