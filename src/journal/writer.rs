//! Writes the journal: appends at once, rolls segments, says what to sync, gives up a segment whose disk failed.
//!
//! Has no thread and no clock: the caller passes the time and runs the [`Job`]s it is handed, on a thread of its own
//! or, in a sweep, inline. Everything since the last good sync is also held in memory, within a bound, so that a
//! segment given up is repeated in the next one. A sync that failed is never tried again.

mod disk_work;
mod segments;

use std::collections::VecDeque;
use std::io;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use crate::link::{DeviceIdx, LinkWhat, Lost};

use super::DeviceAtOpen;
use super::body::{Body, FORMAT_VERSION, Record, SegmentOpen};
use super::describes::DescribeKeeper;
use super::disk::{AppendFile, Disk};
use super::frame;
use super::health::{Health, Loss};
use super::job::{Job, Outcome, Reserved, make};
use super::reader::{SegmentInfo, segment_name};
use super::retention::Retention;

/// Sizes and times of a journal, and whether it is to be kept.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Settings {
    /// A segment is rolled when it holds this much, or
    pub segment_bytes: u64,
    /// when it has been open this long.
    pub segment_ns: i64,
    /// Kept free in every segment for closing records and events.
    pub reserve_bytes: u64,
    /// A sync is begun when the oldest record that needs one is this old.
    pub sync_every_ns: i64,
    /// Most that is held in memory while the disk takes nothing.
    pub tail_bytes_max: usize,
    /// All segments together; beyond it the oldest that no trial needs is removed.
    pub budget_bytes: u64,
    /// The journal of every trial stays until a person lets it go: written into each segment, for whoever seals.
    pub keep: bool,
}

impl Default for Settings {
    fn default() -> Self {
        Self {
            segment_bytes: 32 << 20,
            segment_ns: 60_000_000_000,
            reserve_bytes: 256 << 10,
            sync_every_ns: 50_000_000,
            tail_bytes_max: 16 << 20,
            budget_bytes: 1 << 30,
            keep: false,
        }
    }
}

/// What every segment's opening repeats.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Origin {
    pub journal_id: String,
    pub program_version: String,
    pub kernel_boot_id: String,
    pub rig_text: String,
    /// With the describe frames an earlier segment knew, if any.
    pub devices: Vec<DeviceAtOpen>,
}

/// Where a journal goes on.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Start {
    pub segment: u32,
    pub seq: u64,
    pub open_trial: Option<String>,
    /// Why the segment before ended without being finished, if it did.
    pub previous_given_up: Option<String>,
}

impl Start {
    /// Of a journal that begins.
    pub fn fresh() -> Self {
        Self { segment: 1, seq: 1, open_trial: None, previous_given_up: None }
    }
}

#[derive(Debug, thiserror::Error)]
#[error("cannot start the journal in {dir}: {source}; give a directory on a disk with room that this user may write")]
pub struct StartError {
    pub dir: PathBuf,
    pub source: io::Error,
}

/// A journal being written.
#[derive(Debug)]
pub struct Journal {
    disk: Arc<dyn Disk>,
    dir: PathBuf,
    settings: Settings,
    origin: Origin,
    describes: Vec<DescribeKeeper>,
    open_trial: Option<String>,
    next_seq: u64,
    next_number: u32,
    /// Of the last segment begun; 0 before the first.
    begun_number: u32,
    segment: Option<Segment>,
    ahead: Option<Ahead>,
    /// Encoded records since the last good sync; the last `n_unwritten` bytes are not with the kernel yet.
    tail: Vec<u8>,
    n_unwritten: usize,
    /// Segments with unsynced bytes, in the order of the tail.
    dirty: VecDeque<Dirty>,
    sync_in_flight: bool,
    chore_in_flight: bool,
    /// The sync in flight is of a segment given up meanwhile: its outcome says nothing any more.
    sync_is_void: bool,
    /// When the oldest record was written that a segment given up left to be repeated.
    exposed_since_ns: Option<i64>,
    /// Finished segments that still hold room they do not need.
    to_trim: Vec<Arc<dyn AppendFile>>,
    urgent: bool,
    /// Not before this time is a new segment tried after one could not be made.
    retry_ns: i64,
    given_up: Option<String>,
    ask_room_ns: i64,
    recent: VecDeque<(i64, u64)>,
    losses: Vec<Loss>,
    retention: Retention,
    pinned_from_seq: Option<u64>,
    health: Health,
    notices: Vec<String>,
}

#[derive(Debug)]
struct Segment {
    path: PathBuf,
    file: Arc<dyn AppendFile>,
    n_bytes: u64,
    opened_ns: i64,
}

#[derive(Debug)]
struct Ahead {
    number: u32,
    path: PathBuf,
    file: Arc<dyn AppendFile>,
}

#[derive(Debug)]
struct Dirty {
    file: Arc<dyn AppendFile>,
    /// The directory, until the file's name is synced.
    new_in: Option<PathBuf>,
    n_bytes: usize,
    /// The first of them, handed to a sync that has not ended.
    in_sync: InSync,
    /// When the first byte was written that is not in a sync; of no meaning when there is none.
    oldest_ns: i64,
    finished: bool,
}

#[derive(Debug, Clone, Copy, Default)]
struct InSync {
    n_bytes: usize,
    oldest_ns: i64,
}

/// How far back a trial may be opened.
const RECENT_NS: i64 = 60_000_000_000;
const RECENT_STEP_NS: i64 = 5_000_000;
const RETRY_OPEN_NS: i64 = 50_000_000;
const RETRY_AHEAD_NS: i64 = 100_000_000;
const ASK_ROOM_EVERY_NS: i64 = 2_000_000_000;
const WRITE_ATTEMPTS: usize = 3;

impl Journal {
    /// Opens the first segment, synced with its name before this returns.
    ///
    /// # Errors
    /// When the directory or the segment cannot be made.
    pub fn begin(
        disk: Arc<dyn Disk>,
        dir: &Path,
        origin: Origin,
        start: Start,
        settings: Settings,
        now_ns: i64,
    ) -> Result<Self, StartError> {
        let failed = |source| StartError { dir: dir.to_owned(), source };
        disk.create_dir(dir).map_err(failed)?;
        let mut journal = Self {
            dir: dir.to_owned(),
            settings,
            describes: origin.devices.iter().map(DescribeKeeper::at_open).collect(),
            losses: origin.devices.iter().map(|_| Loss::default()).collect(),
            origin,
            open_trial: start.open_trial,
            next_seq: start.seq,
            next_number: start.segment,
            begun_number: 0,
            segment: None,
            ahead: None,
            tail: Vec::new(),
            n_unwritten: 0,
            dirty: VecDeque::new(),
            sync_in_flight: false,
            chore_in_flight: false,
            sync_is_void: false,
            exposed_since_ns: None,
            to_trim: Vec::new(),
            urgent: true,
            retry_ns: now_ns,
            given_up: start.previous_given_up,
            ask_room_ns: now_ns,
            recent: VecDeque::new(),
            retention: Retention::default(),
            pinned_from_seq: None,
            health: Health::default(),
            notices: Vec::new(),
            disk,
        };
        journal.open_segment(now_ns).map_err(failed)?;
        journal.disk.sync_dir(dir).map_err(failed)?;
        Ok(journal)
    }

    pub fn journal_id(&self) -> &str {
        &self.origin.journal_id
    }

    /// Takes one record. It goes to the kernel at the next [`Self::commit`], which callers do at once after draining
    /// what is waiting. What cannot be taken is counted, and told in a `lost` record as soon as there is room.
    pub fn append(&mut self, host_ns: i64, device: DeviceIdx, body: &Body) -> Option<u64> {
        self.watch(device, body);
        if !self.has_room_for(body) {
            self.count_lost(host_ns, device, body);
            return None;
        }
        self.tell_losses();
        Some(self.put(host_ns, device, body))
    }

    /// Hands what was appended to the kernel, rolling the segment when it is due.
    pub fn commit(&mut self, now_ns: i64) {
        if self.n_unwritten == 0 {
            return;
        }
        if self.is_full(now_ns) && self.ahead.is_some() {
            self.finish_segment();
        }
        if self.segment.is_none() && self.ahead.is_none() && now_ns < self.retry_ns {
            return; // the tail waits in memory
        }
        for _ in 0..WRITE_ATTEMPTS {
            match self.write_tail(now_ns) {
                Ok(()) => return,
                Err(error) => self.give_up(&format!("writing failed: {error}")),
            }
        }
        self.retry_ns = now_ns + RETRY_OPEN_NS;
    }

    /// The newest record at or before `host_ns`, as far back as is known: where a pre-roll begins.
    pub fn seq_at(&self, host_ns: i64) -> (u64, i64) {
        let index = self.recent.partition_point(|&(at_ns, _)| at_ns <= host_ns);
        let found = self.recent.get(index.saturating_sub(1));
        found.map_or((self.next_seq, host_ns), |&(at_ns, seq)| (seq, at_ns))
    }

    pub fn next_seq(&self) -> u64 {
        self.next_seq
    }

    /// The trial under way as segments' openings name it.
    pub fn set_open_trial(&mut self, trial_id: Option<String>) {
        self.open_trial = trial_id;
    }

    /// True while ordinary records find no room: the disk is full or gone.
    pub fn is_refusing(&self) -> bool {
        !self.has_room_for(&Body::Heartbeat)
    }

    /// True when everything appended is durable.
    pub fn is_clean(&self) -> bool {
        self.tail.is_empty() && !self.sync_in_flight
    }

    /// Asks for a sync without waiting for the interval.
    pub fn sync_soon(&mut self) {
        self.urgent = true;
    }

    pub fn health(&mut self, now_ns: i64) -> Health {
        self.health.own_bytes = self.segment.as_ref().map_or(0, |segment| segment.n_bytes) + self.retention.n_bytes();
        self.health.lost_events = self.losses.iter().map(|loss| loss.n_events_ever).sum();
        self.health.forget_old(now_ns);
        self.health.exposure_ns_now = self.oldest_unsynced_ns().map_or(0, |oldest_ns| now_ns - oldest_ns);
        self.health.exposure_ns_max = self.health.exposure_ns_max.max(self.health.exposure_ns_now);
        self.health.clone()
    }

    /// Sentences about the journal itself since the last call, for the event log and the feed.
    pub fn take_notices(&mut self) -> Vec<String> {
        std::mem::take(&mut self.notices)
    }

    /// Takes charge of a finished segment of an earlier run: of this journal, with the number after its last record,
    /// or of an older journal in which no trial waits for sealing.
    pub fn adopt(&mut self, segment: &SegmentInfo, end_seq: u64) {
        let end_seq = (segment.open.journal_id == self.origin.journal_id).then_some(end_seq);
        self.retention.adopt(segment.path.clone(), segment.held_bytes, end_seq);
    }

    /// Removes a file that an earlier run made ahead and never began.
    pub fn forget(&mut self, path: PathBuf) {
        self.retention.doom(path);
    }

    /// Keeps what is needed from this record on; an earlier pin stands.
    pub fn pin(&mut self, first_seq: u64) {
        self.pinned_from_seq = Some(self.pinned_from_seq.map_or(first_seq, |pinned| pinned.min(first_seq)));
    }

    /// Keeps what is needed from this record on, or nothing in particular.
    pub fn set_pin(&mut self, first_seq: Option<u64>) {
        self.pinned_from_seq = first_seq;
    }

    /// The end, with everything synced: what was reserved and is not needed any more goes back to the disk.
    pub fn end(mut self) {
        let files = self.dirty.drain(..).map(|dirty| dirty.file).chain(self.to_trim.drain(..));
        for file in files.chain(self.ahead.take().map(|ahead| ahead.file)) {
            // Left reserved, it is counted against the budget by the next start.
            let _ = file.trim();
        }
    }

    /// Lets go of the oldest segments that nothing pinned needs, down to the budget.
    pub fn release(&mut self) {
        let own_bytes = self.segment.as_ref().map_or(0, |segment| segment.n_bytes);
        self.retention.release(self.pinned_from_seq, self.settings.budget_bytes.saturating_sub(own_bytes));
    }

    /// Records before this sequence number are on the disk.
    pub fn durable_before(&self) -> u64 {
        seq_of(&self.tail).unwrap_or(self.next_seq)
    }

    fn oldest_unsynced_ns(&self) -> Option<i64> {
        let written = self.dirty.iter().filter_map(Dirty::oldest_unsynced_ns);
        written.chain(self.exposed_since_ns).min()
    }

    fn put(&mut self, host_ns: i64, device: DeviceIdx, body: &Body) -> u64 {
        let seq = self.next_seq;
        self.next_seq += 1;
        let before = self.tail.len();
        frame_into(&mut self.tail, seq, host_ns, device, body);
        self.n_unwritten += self.tail.len() - before;
        self.urgent |= body.is_urgent();
        if self.recent.back().is_none_or(|&(last_ns, _)| host_ns >= last_ns + RECENT_STEP_NS) {
            self.recent.push_back((host_ns, seq));
            while self.recent.front().is_some_and(|&(first_ns, _)| first_ns < host_ns - RECENT_NS) {
                self.recent.pop_front();
            }
        }
        seq
    }

    fn watch(&mut self, device: DeviceIdx, body: &Body) {
        let Some(describe) = self.describes.get_mut(usize::from(device.0)) else { return };
        match body {
            Body::Link(LinkWhat::Bytes(bytes)) => describe.feed(bytes),
            Body::Link(LinkWhat::Down { .. }) => describe.link_lost(),
            _ => {}
        }
    }

    fn has_room_for(&self, body: &Body) -> bool {
        let most = match body {
            Body::TrialClose(_) => self.settings.reserve_bytes,
            body if body.is_urgent() => self.settings.reserve_bytes / 2,
            _ => 0,
        };
        if self.tail.len() > self.settings.tail_bytes_max + most as usize {
            return false;
        }
        let Some(segment) = &self.segment else { return true };
        let stuck = self.ahead.is_none() && self.health.trouble.is_some();
        !stuck || segment.n_bytes + (self.n_unwritten as u64) < self.settings.segment_bytes + most
    }

    fn count_lost(&mut self, host_ns: i64, device: DeviceIdx, body: &Body) {
        let n_bytes = match body {
            Body::Link(LinkWhat::Bytes(bytes)) => bytes.len() as u64,
            Body::Heartbeat | Body::Clocks(_) => return,
            _ => 0,
        };
        if let Some(loss) = self.losses.get_mut(usize::from(device.0)) {
            loss.add(Lost { n_events: 1, n_bytes, first_host_ns: host_ns, last_host_ns: host_ns });
        }
    }

    fn tell_losses(&mut self) {
        for index in 0..self.losses.len() {
            if !self.is_refusing()
                && let Some(lost) = self.losses[index].take()
            {
                self.put(lost.last_host_ns, DeviceIdx(index as u16), &Body::Lost(lost));
            }
        }
    }

    fn is_full(&self, now_ns: i64) -> bool {
        self.segment.as_ref().is_some_and(|segment| {
            segment.n_bytes + self.n_unwritten as u64 > self.settings.segment_bytes
                || now_ns - segment.opened_ns >= self.settings.segment_ns
        })
    }

    fn trouble(&mut self, sentence: String) {
        if self.health.trouble.as_ref() != Some(&sentence) {
            self.notices.push(sentence.clone());
        }
        self.health.trouble = Some(sentence);
    }

    /// Writes what is not written yet, to a new segment where there is none.
    fn write_tail(&mut self, now_ns: i64) -> io::Result<()> {
        if self.segment.is_none() {
            self.open_segment(now_ns)?;
        }
        let (Some(segment), Some(dirty)) = (&mut self.segment, self.dirty.back_mut()) else { return Ok(()) };
        let unwritten = &self.tail[self.tail.len() - self.n_unwritten..];
        write_whole(&*segment.file, unwritten)?;
        if dirty.n_bytes == dirty.in_sync.n_bytes {
            dirty.oldest_ns = self.exposed_since_ns.take().unwrap_or(now_ns);
        }
        segment.n_bytes += self.n_unwritten as u64;
        dirty.n_bytes += self.n_unwritten;
        self.n_unwritten = 0;
        Ok(())
    }
}

impl Dirty {
    /// When the oldest byte was written that is not known to be durable.
    fn oldest_unsynced_ns(&self) -> Option<i64> {
        let in_sync = (self.in_sync.n_bytes > 0).then_some(self.in_sync.oldest_ns);
        in_sync.or_else(|| (self.n_bytes > 0).then_some(self.oldest_ns))
    }

    fn needs_sync(&self) -> bool {
        self.n_bytes > 0 || self.new_in.is_some()
    }
}

fn frame_into(out: &mut Vec<u8>, seq: u64, host_ns: i64, device: DeviceIdx, body: &Body) {
    if let Body::Link(LinkWhat::Bytes(bytes)) = body {
        frame::encode(super::body::kind::BYTES, device.0, seq, host_ns, bytes, out); // spares the common case a copy
    } else {
        Record { seq, host_ns, device, body: body.clone() }.encode(out);
    }
}

/// Sequence number of the record that `bytes` begin with.
fn seq_of(bytes: &[u8]) -> Option<u64> {
    bytes.get(8..16).map(|field| u64::from_le_bytes(frame::array(field)))
}

/// Appends all of `bytes`; the disk may take them in pieces.
fn write_whole(file: &dyn AppendFile, mut bytes: &[u8]) -> io::Result<()> {
    while !bytes.is_empty() {
        match file.append(bytes) {
            Ok(0) => return Err(io::ErrorKind::WriteZero.into()),
            Ok(n) => bytes = &bytes[n..],
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(())
}

#[cfg(test)]
mod tests;
