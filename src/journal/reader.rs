//! Reads a journal back: its segments in order, its trials, any range of it.
//!
//! Never writes. Torn tails, missing segments and records that were never written are told as [`Damage`], between
//! the records that are sound; everything sound before a damage is handed out. Records that a segment repeats from
//! one that was given up are handed out once.

use std::collections::VecDeque;
use std::io::{self, BufReader, Read};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use crate::link::LinkWhat;

use super::body::{Body, FORMAT_VERSION, Record, SegmentOpen, TrialClose, TrialOpen};
use super::describes::DescribeKeeper;
use super::disk::{Disk, Listed};
use super::frame;

/// Records of lead-in wanted before a range, so that a frame cut by a segment's start is whole in the range.
const LEAD_IN_RECORDS: u64 = 1000;

#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum ReadError {
    #[error("cannot read {path}: {source}")]
    Io { path: PathBuf, source: io::Error },
    #[error("{path} is of journal format {found}, this program reads up to {FORMAT_VERSION}; use a later program")]
    LaterFormat { path: PathBuf, found: u32 },
    #[error("journal {journal_id} was never begun: its files in {dir} are empty")]
    NeverBegun { journal_id: String, dir: PathBuf },
    #[error("journal {journal_id} has no segment that opens, first among them {path}: {reason}")]
    NothingSound { journal_id: String, path: PathBuf, reason: String },
}

impl ReadError {
    /// The file or directory that it is about.
    pub fn path(&self) -> &Path {
        match self {
            Self::Io { path, .. } | Self::LaterFormat { path, .. } | Self::NothingSound { path, .. } => path,
            Self::NeverBegun { dir, .. } => dir,
        }
    }
}

/// One segment file that opens soundly.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct SegmentInfo {
    pub number: u32,
    pub path: PathBuf,
    pub bytes: u64,
    /// With what its writer reserved and did not give back.
    pub held_bytes: u64,
    pub opened_host_ns: i64,
    pub open: SegmentOpen,
}

/// Something between the records that is not as it should be.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Damage {
    /// The rest of a segment cannot be read: normal at the end of a killed daemon's last segment.
    Torn { segment: u32, at_byte: u64, reason: String },
    /// Records that are not there.
    Missing { first_seq: u64, n_records: u64 },
    /// A segment file whose first record is not sound.
    Unopenable { path: PathBuf, reason: String },
}

/// What reading yields, in order.
#[derive(Debug, Clone, PartialEq)]
pub enum Item {
    /// A segment begins. The first one handed out is where decoding starts: feed its describe frames.
    Opening {
        host_ns: i64,
        open: Box<SegmentOpen>,
    },
    Record(Record),
    Damage(Damage),
}

/// A trial as a range of the journal, both ends included.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct TrialRange {
    pub journal_id: String,
    pub trial_id: String,
    pub opened: TrialOpen,
    pub opened_host_ns: i64,
    /// `None`: the journal ends with the trial still open.
    pub closed: Option<TrialClose>,
    pub first_seq: u64,
    pub first_host_ns: i64,
    /// Sequence number of the closing record, or of the last sound record.
    pub last_seq: u64,
    pub last_host_ns: i64,
}

/// A journal opened for reading.
#[derive(Debug, Clone)]
pub struct JournalReader {
    disk: Arc<dyn Disk>,
    journal_id: String,
    segments: Vec<SegmentInfo>,
    unopenable: Vec<Damage>,
    highest_number: u32,
}

/// File name of a segment.
pub fn segment_name(journal_id: &str, number: u32) -> String {
    format!("{journal_id}-{number:06}.tjl")
}

/// Journal id and segment number of a file name; `None` when it is not a segment's.
pub fn parse_segment_name(name: &str) -> Option<(&str, u32)> {
    let (journal_id, number) = name.strip_suffix(".tjl")?.rsplit_once('-')?;
    (number.len() == 6).then_some(())?;
    Some((journal_id, number.parse().ok()?))
}

/// The ids of the journals in `journal_dir`, oldest first; none when the directory is not there.
pub fn journals(disk: &dyn Disk, journal_dir: &Path) -> Result<Vec<String>, ReadError> {
    let listed = match disk.list(journal_dir) {
        Ok(listed) => listed,
        Err(error) if error.kind() == io::ErrorKind::NotFound => return Ok(Vec::new()),
        Err(source) => return Err(ReadError::Io { path: journal_dir.to_owned(), source }),
    };
    let mut ids: Vec<String> =
        listed.iter().filter_map(|file| parse_segment_name(&file.name)).map(|(id, _)| id.to_owned()).collect();
    ids.dedup();
    Ok(ids)
}

impl JournalReader {
    /// Opens the journal's segments, reading the first record of each.
    ///
    /// # Errors
    /// The disk's; a format from a later program; [`ReadError::NeverBegun`] or
    /// [`ReadError::NothingSound`] when not one segment opens.
    pub fn open(disk: Arc<dyn Disk>, journal_dir: &Path, journal_id: &str) -> Result<Self, ReadError> {
        let at = |path: &Path| {
            let path = path.to_owned();
            move |source| ReadError::Io { path, source }
        };
        let (mut segments, mut unopenable, mut highest_number) = (Vec::new(), Vec::new(), 0);
        for file in disk.list(journal_dir).map_err(at(journal_dir))? {
            let Some((id, number)) = parse_segment_name(&file.name) else { continue };
            if id != journal_id {
                continue;
            }
            highest_number = highest_number.max(number);
            if file.bytes == 0 {
                continue; // made ahead and not begun
            }
            let path = journal_dir.join(&file.name);
            let mut source = disk.open(&path).map_err(at(&path))?;
            match open_record(&mut source).map_err(at(&path))? {
                Ok(Opened { host_ns, open, .. }) if open.format_version <= FORMAT_VERSION => {
                    let Listed { bytes, held_bytes, .. } = file;
                    segments.push(SegmentInfo { number, path, bytes, held_bytes, opened_host_ns: host_ns, open });
                }
                Ok(Opened { open, .. }) => return Err(ReadError::LaterFormat { path, found: open.format_version }),
                Err(reason) => unopenable.push((path, reason)),
            }
        }
        if segments.is_empty() {
            let journal_id = journal_id.to_owned();
            return Err(match unopenable.into_iter().next() {
                Some((path, reason)) => ReadError::NothingSound { journal_id, path, reason },
                None => ReadError::NeverBegun { journal_id, dir: journal_dir.to_owned() },
            });
        }
        segments.sort_by_key(|segment| segment.number);
        let damage = |(path, reason)| Damage::Unopenable { path, reason };
        let unopenable = unopenable.into_iter().map(damage).collect();
        Ok(Self { disk, journal_id: journal_id.to_owned(), segments, unopenable, highest_number })
    }

    pub fn journal_id(&self) -> &str {
        &self.journal_id
    }

    /// The segments that open, in order; never empty.
    pub fn segments(&self) -> &[SegmentInfo] {
        &self.segments
    }

    /// Greatest segment number in use, also by files that do not open.
    pub fn highest_number(&self) -> u32 {
        self.highest_number
    }

    /// Segment files whose first record is not sound.
    pub fn unopenable(&self) -> &[Damage] {
        &self.unopenable
    }

    /// Everything, from the first segment on.
    pub fn records(&self) -> Records {
        self.starting_at(0)
    }

    /// From a segment's start, early enough that what is decoded is in step at `first_seq`.
    ///
    /// Records before `first_seq` are lead-in: feed them to the decoder and keep nothing of what comes out.
    pub fn records_from(&self, first_seq: u64) -> Records {
        let holds = |segment: &SegmentInfo| segment.open.first_seq.saturating_add(LEAD_IN_RECORDS) <= first_seq;
        self.starting_at(self.segments.iter().rposition(holds).unwrap_or(0))
    }

    fn starting_at(&self, index: usize) -> Records {
        Records {
            disk: Arc::clone(&self.disk),
            coming: self.segments[index..].iter().cloned().collect(),
            current: None,
            next_seq: None,
            pending: None,
        }
    }

    /// Every trial that was opened, oldest first. Reads the whole journal.
    pub fn trials(&self) -> Result<Vec<TrialRange>, ReadError> {
        Ok(self.survey()?.trials)
    }

    /// The journal's trials and its end, in one pass.
    pub fn survey(&self) -> Result<Survey, ReadError> {
        self.survey_from(0)
    }

    /// The same from a segment on: of the trials only those that were opened in it or later. The last segment is always
    /// read.
    pub fn survey_from(&self, segment_number: u32) -> Result<Survey, ReadError> {
        let mut survey = Survey::default();
        let mut describes: Vec<DescribeKeeper> = Vec::new();
        let first = self.segments.partition_point(|segment| segment.number < segment_number);
        for item in self.starting_at(first.min(self.segments.len() - 1)) {
            match item? {
                Item::Opening { open, .. } => {
                    survey.begin_segment(&open);
                    describes = open.devices.iter().map(DescribeKeeper::at_open).collect();
                }
                Item::Record(record) => {
                    if let (Body::Link(LinkWhat::Bytes(bytes)), Some(describe)) =
                        (&record.body, describes.get_mut(usize::from(record.device.0)))
                    {
                        describe.feed(bytes);
                    }
                    survey.take(&self.journal_id, record);
                }
                Item::Damage(damage) => survey.damages.push(damage),
            }
        }
        survey.describes_hex = describes.iter().map(DescribeKeeper::describe_hex).collect();
        Ok(survey)
    }
}

/// What one pass over a journal shows.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct Survey {
    pub trials: Vec<TrialRange>,
    /// `None`: segments without a single record.
    pub last_seq: Option<u64>,
    pub last_host_ns: i64,
    pub damages: Vec<Damage>,
    /// Per device, the last frame that described it, as in segment openings.
    pub describes_hex: Vec<String>,
    /// A later segment says that the last trial was not under way any more: it ends there, without a close.
    last_has_ended: bool,
}

impl Survey {
    /// The trial that was under way when the journal ended.
    pub fn open_trial(&self) -> Option<&TrialRange> {
        self.trials.last().filter(|trial| trial.closed.is_none() && !self.last_has_ended)
    }

    fn begin_segment(&mut self, open: &SegmentOpen) {
        let last = self.trials.last();
        self.last_has_ended |= last.is_some_and(|trial| open.open_trial.as_ref() != Some(&trial.trial_id));
    }

    fn take(&mut self, journal_id: &str, record: Record) {
        self.last_seq = Some(record.seq);
        self.last_host_ns = record.host_ns;
        if let Body::TrialOpen(opened) = record.body {
            self.trials.push(TrialRange {
                journal_id: journal_id.to_owned(),
                trial_id: opened.trial_id.clone(),
                opened_host_ns: record.host_ns,
                closed: None,
                first_seq: opened.first_seq,
                first_host_ns: opened.first_host_ns,
                last_seq: record.seq,
                last_host_ns: record.host_ns,
                opened,
            });
            self.last_has_ended = false;
            return;
        }
        let Some(trial) = self.trials.last_mut().filter(|trial| trial.closed.is_none()) else { return };
        // Its close may stand in a segment that repeats what a given-up one held, behind the opening.
        let closed = match record.body {
            Body::TrialClose(closed) if closed.trial_id == trial.trial_id => Some(closed),
            _ if self.last_has_ended => return,
            _ => None,
        };
        trial.last_seq = record.seq;
        trial.last_host_ns = record.host_ns;
        trial.closed = closed;
    }
}

/// Iterator over a journal's items.
#[derive(Debug)]
pub struct Records {
    disk: Arc<dyn Disk>,
    coming: VecDeque<SegmentInfo>,
    current: Option<OpenSegment>,
    next_seq: Option<u64>,
    pending: Option<Record>,
}

struct OpenSegment {
    number: u32,
    source: BufReader<Box<dyn Read + Send>>,
    at_byte: u64,
    path: PathBuf,
}

impl std::fmt::Debug for OpenSegment {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("OpenSegment").field("path", &self.path).field("at_byte", &self.at_byte).finish()
    }
}

impl Iterator for Records {
    type Item = Result<Item, ReadError>;

    fn next(&mut self) -> Option<Self::Item> {
        if let Some(record) = self.pending.take() {
            return Some(Ok(Item::Record(record)));
        }
        loop {
            let Some(segment) = &mut self.current else {
                return self.open_next().transpose();
            };
            let step = match frame::read(&mut segment.source) {
                Ok(step) => step,
                Err(source) => {
                    let path = segment.path.clone();
                    self.current = None;
                    return Some(Err(ReadError::Io { path, source }));
                }
            };
            match step {
                None => self.current = None,
                Some(Err(unsound)) => {
                    let (segment, at_byte) = (segment.number, segment.at_byte);
                    self.current = None;
                    let reason = unsound.to_string();
                    return Some(Ok(Item::Damage(Damage::Torn { segment, at_byte, reason })));
                }
                Some(Ok(raw)) => {
                    segment.at_byte += frame::record_bytes(raw.payload.len()) as u64;
                    if let Some(item) = self.in_order(Record::from_raw(raw)) {
                        return Some(Ok(item));
                    }
                }
            }
        }
    }
}

impl Records {
    fn open_next(&mut self) -> Result<Option<Item>, ReadError> {
        let Some(info) = self.coming.pop_front() else { return Ok(None) };
        let at = |source| ReadError::Io { path: info.path.clone(), source };
        let mut source = BufReader::with_capacity(1 << 16, self.disk.open(&info.path).map_err(at)?);
        match open_record(&mut source).map_err(at)? {
            Ok(Opened { host_ns, open, n_bytes }) => {
                self.current = Some(OpenSegment { number: info.number, source, at_byte: n_bytes, path: info.path });
                Ok(Some(Item::Opening { host_ns, open: Box::new(open) }))
            }
            Err(reason) => Ok(Some(Item::Damage(Damage::Unopenable { path: info.path, reason }))),
        }
    }

    /// Leaves out what was handed out before; tells of what is missing before handing out what follows it.
    fn in_order(&mut self, record: Record) -> Option<Item> {
        let expected = self.next_seq.unwrap_or(record.seq);
        if record.seq < expected {
            return None;
        }
        self.next_seq = Some(record.seq.saturating_add(1));
        if record.seq > expected {
            let damage = Damage::Missing { first_seq: expected, n_records: record.seq - expected };
            self.pending = Some(record);
            return Some(Item::Damage(damage));
        }
        Some(Item::Record(record))
    }
}

struct Opened {
    host_ns: i64,
    open: SegmentOpen,
    n_bytes: u64,
}

/// The first record of a segment, or why it is not one.
fn open_record(source: &mut impl Read) -> io::Result<Result<Opened, String>> {
    let raw = match frame::read(source)? {
        None => return Ok(Err("the file is empty".to_owned())),
        Some(Err(unsound)) => return Ok(Err(unsound.to_string())),
        Some(Ok(raw)) => raw,
    };
    let n_bytes = frame::record_bytes(raw.payload.len()) as u64;
    let (kind, host_ns) = (raw.kind, raw.host_ns);
    Ok(match Record::from_raw(raw).body {
        Body::SegmentOpen(open) => Ok(Opened { host_ns, open: *open, n_bytes }),
        _ => Err(format!("the first record is of kind {kind}, not a segment's opening")),
    })
}

#[cfg(test)]
mod tests;
