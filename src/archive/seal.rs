//! Turns a range of a journal into a trial file, for good.
//!
//! Two passes over the range, blocks streaming through: first everything as received, then values on the trial's time
//! axis through clocks fitted to both sides. The file is written under a temporary name, flushed, closed, read back and
//! proved, synced, renamed without replacing; only then does it exist. Any failure removes it and keeps the journal.
//! Reads no clock and draws no numbers: sealing a range twice gives the same bytes.

use std::path::{Path, PathBuf};
use std::sync::Arc;

use jiff::civil::Date;

use crate::calibration;
use crate::journal::{Clocks, Disk, Item, JournalReader, SegmentOpen, TrialRange};
use crate::reading::Beside;
use crate::rig::Rig;
use crate::trial::{Condition, Header, ResultSet, TrialFile, TrialWriter, text_sha256};

use super::derive;
use super::edges::edges_seen;
use super::error::SealError;
use super::keep::{is_kept, keep, needed};
use super::player::{Told, play};
use super::publish::{Part, Published};
use super::raw_pass::{DevicePass, Events, RawPass};
use super::value_pass::{ForReading, KEPT_SAMPLES_MAX, Source, ValuePass};

/// Room that a trial file is given, as a multiple of the journal it is sealed from: it holds values as well as counts,
/// compressed. Measured on the virtual rig, four channels at 10 kHz, trials of 3 to 80 s (journals of 0.4 to 10.6 MiB): 1.83
/// times the journal and 2.1 MiB beside it, within 3 %. Given is a fifth more.
pub const FILE_SHARE: f64 = 2.2;
/// Beside that: the launch at full rate, texts, tables.
const FILE_BASE_BYTES: u64 = 4 << 20;

/// Room that the file of a trial is given which takes this much of the journal. The daemon's watch over the disk reckons
/// with the same.
pub fn file_room_bytes(journal_bytes: u64) -> u64 {
    ((journal_bytes as f64 * FILE_SHARE).ceil() as u64).saturating_add(FILE_BASE_BYTES)
}

/// Outcome word where the reading could not be made at all.
const UNREAD: &str = "unread";

/// What sealing gave.
#[derive(Debug, Clone, PartialEq)]
pub struct Sealed {
    pub path: PathBuf,
    pub trial_id: String,
    pub outcome: String,
    /// False: the very same file was there already.
    pub is_new: bool,
    pub n_samples: u64,
    /// Samples that the devices' own indices show to be missing.
    pub n_missing: u64,
    /// SHA-256 over all raw groups.
    pub raw_sha256: String,
    /// The journal stays until a person lets it go.
    pub journal_kept: bool,
}

/// What is known before the range is played.
struct Ahead {
    open: SegmentOpen,
    clocks: Option<Clocks>,
}

/// Seals `range` into `dir/trial-<id>.h5`; the journal of an abnormal outcome is kept for a person, and any that says of
/// itself that it is to be.
///
/// # Errors
/// [`SealError`]; nothing half-made stays behind and the journal is untouched.
pub fn seal(reader: &JournalReader, range: &TrialRange, dir: &Path, disk: &Arc<dyn Disk>) -> Result<Sealed, SealError> {
    let stem = file_stem(&range.trial_id)?;
    expect_room(reader, range, dir, &**disk)?;
    let part = Part::new(&**disk, dir, &stem)?;
    let ahead = look_ahead(reader, range)?;
    let made = write(reader, range, &ahead, part.path())?;
    let proof = prove(part.path(), &made)?;
    let target = free_target(dir, &stem, range)?;
    let kept = is_kept(reader, range, &made.outcome) && !target.exists();
    if kept {
        keep(reader, range, dir)?;
    }
    let published = part.publish(&target)?;
    Ok(Sealed {
        path: target,
        trial_id: range.trial_id.clone(),
        outcome: made.outcome,
        is_new: published == Published::New,
        n_samples: made.n_samples,
        n_missing: made.n_missing,
        raw_sha256: proof,
        journal_kept: kept,
    })
}

/// The file a trial's range is sealed into.
///
/// # Errors
/// [`SealError::TrialId`] for an id that could leave the directory.
pub fn trial_path(dir: &Path, trial_id: &str) -> Result<PathBuf, SealError> {
    Ok(dir.join(format!("{}.h5", file_stem(trial_id)?)))
}

fn file_stem(trial_id: &str) -> Result<String, SealError> {
    let plain = |c: char| c.is_ascii_alphanumeric() || c == '-';
    if trial_id.is_empty() || trial_id.len() > 100 || !trial_id.chars().all(plain) {
        return Err(SealError::TrialId { trial_id: trial_id.to_owned() });
    }
    Ok(format!("trial-{trial_id}"))
}

/// A trial sealed while it was still open (a crash, then `recover`) and gone on with later has a longer range: that one
/// gets a name of its own, `trial-<id>-2.h5`, since a sealed file is never replaced.
fn free_target(dir: &Path, stem: &str, range: &TrialRange) -> Result<PathBuf, SealError> {
    for k in 1_u32.. {
        let name = if k == 1 { format!("{stem}.h5") } else { format!("{stem}-{k}.h5") };
        let path = dir.join(name);
        if !path.exists() || !is_shorter(&path, range)? {
            return Ok(path);
        }
    }
    Ok(dir.join(format!("{stem}.h5")))
}

fn is_shorter(path: &Path, range: &TrialRange) -> Result<bool, SealError> {
    let header = TrialFile::open(path)?.header().clone();
    let same_trial = (&header.trial_id, &header.journal_id) == (&range.trial_id, &range.journal_id);
    Ok(same_trial && header.first_seq == range.first_seq && header.last_seq < range.last_seq)
}

fn expect_room(reader: &JournalReader, range: &TrialRange, dir: &Path, disk: &dyn Disk) -> Result<(), SealError> {
    let io = |source| SealError::Io { doing: "ask for the free space of", path: dir.to_owned(), source };
    let free_bytes = disk.free_bytes(dir).map_err(io)?;
    let n_bytes: u64 = needed(reader.segments(), range).iter().map(|segment| segment.bytes).sum();
    let needed_bytes = file_room_bytes(n_bytes);
    if free_bytes < needed_bytes {
        return Err(SealError::NoRoom { dir: dir.to_owned(), needed_bytes, free_bytes });
    }
    Ok(())
}

/// Finds the opening in force at the range's start, and the first reading of the four clocks within the range.
fn look_ahead(reader: &JournalReader, range: &TrialRange) -> Result<Ahead, SealError> {
    let (mut opening, mut any, mut clocks) = (None, false, None);
    for item in reader.records_from(range.first_seq) {
        match item? {
            Item::Opening { open, .. } if !any => opening = Some(*open),
            Item::Record(record) if record.seq > range.last_seq => break,
            Item::Record(record) if record.seq >= range.first_seq => {
                any = true;
                if let crate::journal::Body::Clocks(read) = record.body {
                    clocks = Some(read);
                    break;
                }
            }
            _ => {}
        }
    }
    let (journal_id, first_seq, last_seq) = (range.journal_id.clone(), range.first_seq, range.last_seq);
    let open = opening.filter(|_| any).ok_or(SealError::NothingThere { journal_id, first_seq, last_seq })?;
    Ok(Ahead { open, clocks })
}

/// What was written, to be proved by reading it back.
struct Made {
    header: Header,
    outcome: String,
    n_samples: u64,
    n_missing: u64,
}

fn write(reader: &JournalReader, range: &TrialRange, ahead: &Ahead, path: &Path) -> Result<Made, SealError> {
    let rig = crate::rig::parse(&ahead.open.rig_text).map_err(|error| error.to_string());
    let header = header(range, ahead, rig.as_ref().ok());
    let day = header.day();
    let rig = rig.map(|rig| calibration::on_day(rig, day));
    let mut writer = TrialWriter::create(path, &header)?;
    let mut raw = RawPass::new(&mut writer, header.zero_host_ns);
    play(reader, range, &mut |told| raw.take(told))?;
    let mut gathered = raw.finish()?;
    let rig = rig.map(|rig| gathered.events.tared(rig));
    let results = match &rig {
        Ok(rig) => {
            let sources: Vec<Source> = gathered.devices.iter().map(DevicePass::source).collect();
            let (devices, clocks) = (&sources, &gathered.clocks);
            let mut values = ValuePass::new(&mut writer, rig, devices, clocks, header.zero_host_ns, KEPT_SAMPLES_MAX);
            play(reader, range, &mut |told: Told| values.take(&told))?;
            let mut for_reading = values.finish(&mut gathered.events);
            for_reading.findings.splice(..0, gathered.devices.iter().flat_map(|device| device.findings.clone()));
            conditions(rig).iter().try_for_each(|condition| writer.add_condition(condition))?;
            let edges = edges_seen(&gathered.devices, &gathered.clocks, header.zero_host_ns);
            let beside = Beside { edges, ..Beside::default() };
            read(&mut writer, rig, range, day, (for_reading, beside), &mut gathered.events)?
        }
        Err(why) => unread(why),
    };
    writer.write_results(&results)?;
    gathered.events.write(&mut writer)?;
    writer.finish()?;
    let sum = |count: fn(&DevicePass) -> u64| gathered.devices.iter().map(count).fold(0, u64::saturating_add);
    let (n_samples, n_missing) = (sum(|device| device.n_samples), sum(|device| device.n_missing));
    Ok(Made { header, outcome: results.outcome, n_samples, n_missing })
}

fn header(range: &TrialRange, ahead: &Ahead, rig: Option<&Rig>) -> Header {
    let started_ns = ahead.clocks.map(|clocks| {
        i128::from(clocks.realtime_ns) - i128::from(clocks.monotonic_ns) + i128::from(range.first_host_ns)
    });
    let started = started_ns.and_then(|ns| jiff::Timestamp::from_nanosecond(ns).ok());
    let quality = match ahead.clocks {
        Some(clocks) if clocks.wall_clock_set => "set",
        Some(_) => "never set",
        None => "unknown",
    };
    Header {
        trial_id: range.trial_id.clone(),
        journal_id: range.journal_id.clone(),
        first_seq: range.first_seq,
        last_seq: range.last_seq,
        rig: rig.map(|rig| rig.name.clone()).unwrap_or_default(),
        started: started.map(|timestamp| timestamp.to_string()).unwrap_or_default(),
        started_quality: quality.to_owned(),
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        configuration_hash: text_sha256(&ahead.open.rig_text),
        series: String::new(),
        zero_host_ns: range.first_host_ns,
    }
}

fn conditions(rig: &Rig) -> [Condition; 2] {
    let condition = |name: &str, value: f64, unit: &str| Condition {
        name: name.to_owned(),
        value,
        unit: unit.to_owned(),
        source: "rig file".to_owned(),
    };
    [
        condition("air_density", rig.site.air_density_kg_per_m3, "kg/m^3"),
        condition("head_wind", rig.site.head_wind_mps, "m/s"),
    ]
}

fn read(
    writer: &mut TrialWriter,
    rig: &Rig,
    range: &TrialRange,
    day: Option<Date>,
    (for_reading, beside): (ForReading, Beside),
    events: &mut Events,
) -> Result<ResultSet, SealError> {
    if let Some(from_s) = for_reading.whole_from_s {
        let text =
            format!("the trial is long: before {from_s:.1} s the reading sees means over 10 ms, then every sample");
        events.add(from_s, "seal", "seal", None, text);
    }
    if let Some(from_s) = for_reading.from_s {
        let text = format!("the trial is too long to be read whole: the reading sees it from {from_s:.1} s on");
        events.add(from_s, "seal", "seal", None, text);
    }
    let mut reading = derive::reading(&for_reading.signals, &beside, rig, day);
    reading.findings.extend_from_slice(&for_reading.findings);
    if let Some(motion) = &reading.motion {
        derive::motion_signals(motion).iter().try_for_each(|signal| writer.write_derived(signal))?;
    }
    let truncated = range.closed.is_none().then(|| "the journal ends with the trial open".to_owned());
    Ok(derive::result_set(&reading, truncated))
}

fn unread(why: &str) -> ResultSet {
    let evidence = format!("the rig file in the journal is refused by this program, so there are counts only: {why}");
    ResultSet { outcome: UNREAD.to_owned(), outcome_evidence: vec![evidence], ..ResultSet::default() }
}

/// Reads the closed file back: header, digests, every signal's axis. Gives the digest over all raw groups.
fn prove(path: &Path, made: &Made) -> Result<String, SealError> {
    let not = |what: String| SealError::NotVerified { path: path.to_owned(), what };
    let unreadable = |error: crate::trial::TrialError| not(format!("cannot be read: {error}"));
    let trial = TrialFile::open(path).map_err(unreadable)?;
    if *trial.header() != made.header {
        return Err(not("has another header than was written".to_owned()));
    }
    let mut n_samples = 0;
    for digest in trial.raw_digests().map_err(unreadable)? {
        if digest.sealed != digest.found {
            return Err(not(format!("the counts of {} are not those written", digest.device)));
        }
        let blocks = trial.blocks(&digest.device).map_err(unreadable)?;
        n_samples += blocks.iter().map(|block| u64::from(block.n_samples)).sum::<u64>();
    }
    if n_samples != made.n_samples {
        return Err(not(format!("holds {n_samples} samples of {}", made.n_samples)));
    }
    trial.prove_signals().map_err(unreadable)?;
    trial.sealed_raw_digest().map_err(unreadable)
}
