//! Opens trial files, ours or not: every object is checked for link, type, shape and size before it is read.
//!
//! Refuses what leads out of the file, what claims more than it stores, and every format newer than this program.
//! Nothing is read before it is asked for; a window of a signal costs a window.

use std::io::Read;
use std::path::Path;

use hdf5::File;

use super::attribute::{get_list, get_number, get_optional_number, get_text, read_number, read_text};
use super::column::SAMPLES_PER_CHUNK;
use super::content::{
    CarriedText, ClockRow, Condition, DerivedSignal, EventRow, ExchangeRow, Header, HostClocksRow, ResultEntry,
    ResultSet, SealedText,
};
use super::error::TrialError;
use super::heaps::{self, SIGNATURE};
use super::members::Members;
use super::schema::{
    AbsentTable, ClockTable, EVIDENCE, EventTable, ExchangeTable, FINDINGS, FORMAT_NAME, FORMAT_VERSION,
    HostClocksTable, InstantTable, RESULT_RESERVED,
};
use super::table::Table;
use crate::calibration::Signal;
use crate::rig::Role;

/// A trial file opened for reading.
pub struct TrialFile {
    root: Members,
    header: Header,
    outcome: String,
}

impl std::fmt::Debug for TrialFile {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("TrialFile").field("header", &self.header).finish_non_exhaustive()
    }
}

/// Refuses what is no HDF5 file as far as it goes, and what the library would never come back from.
fn expect_hdf5(path: &Path) -> Result<(), TrialError> {
    let io = |source| TrialError::Io { path: path.to_owned(), source };
    let file = std::fs::File::open(path).map_err(io)?;
    let mut found = Vec::new();
    (&file).take(SIGNATURE.len() as u64).read_to_end(&mut found).map_err(io)?;
    if !SIGNATURE.starts_with(&found) {
        return Err(TrialError::OtherKind { path: path.to_owned() });
    }
    match heaps::look(&file).map_err(io)? {
        Some(what) => Err(TrialError::Damaged { path: path.to_owned(), what }),
        None => Ok(()),
    }
}

impl TrialFile {
    /// Opens the file and reads its header.
    ///
    /// # Errors
    /// [`TrialError::Io`] if it cannot be opened at all, [`TrialError::OtherKind`] if it is not HDF5, [`TrialError::Damaged`] if the library could not come back from it, [`TrialError::NotHdf5`] if it is cut short or damaged,
    /// [`TrialError::NotATrial`] and [`TrialError::TooNew`] if it is something else.
    pub fn open(path: &Path) -> Result<Self, TrialError> {
        expect_hdf5(path)?;
        let not_hdf5 = |source| TrialError::NotHdf5 { path: path.to_owned(), source };
        // A sealed file is never written again, and network disks often cannot lock.
        let file = File::with_options().with_fapl(|fapl| fapl.file_locking(false)).open(path).map_err(not_hdf5)?;
        let root = Members::of(file.group("/").map_err(not_hdf5)?)?;
        check_format(path, &root)?;
        let header = read_header(&root)?;
        let outcome = get_text(root.group(), "outcome")?;
        Ok(Self { root, header, outcome })
    }

    pub fn header(&self) -> &Header {
        &self.header
    }

    pub fn outcome(&self) -> &str {
        &self.outcome
    }

    /// Names of the measured signals.
    pub fn signal_names(&self) -> Result<Vec<String>, TrialError> {
        self.signals_of_origin("measured")
    }

    /// Names of the signals that the reading derived.
    pub fn derived_names(&self) -> Result<Vec<String>, TrialError> {
        self.signals_of_origin("derived")
    }

    fn signals_of_origin(&self, origin: &str) -> Result<Vec<String>, TrialError> {
        let signals = self.root.child("signals")?;
        let mut names = Vec::new();
        for member in signals.names() {
            let group = signals.child(member)?;
            if get_text(group.group(), "origin")? == origin {
                names.push(get_text(group.group(), "name")?);
            }
        }
        Ok(names)
    }

    /// All measured signals, whole.
    pub fn signals(&self) -> Result<Vec<Signal>, TrialError> {
        self.signal_names()?.iter().map(|name| self.signal(name)).collect()
    }

    /// A measured signal, whole.
    pub fn signal(&self, name: &str) -> Result<Signal, TrialError> {
        self.signal_between(name, f64::NEG_INFINITY, f64::INFINITY)
    }

    /// The samples of a measured signal with `from_s <= time < to_s`; reads only the part of the value it needs.
    pub fn signal_between(&self, name: &str, from_s: f64, to_s: f64) -> Result<Signal, TrialError> {
        let group = self.named_signal(name)?;
        let at = group.group();
        let word = get_text(at, "role")?;
        let role = Role::ALL.into_iter().find(|role| role.word() == word);
        let role = role.ok_or_else(|| TrialError::UnknownWord { object: format!("{}/role", at.name()), word })?;
        let (time, value) = (group.column::<f64>("time")?, group.column::<f64>("value")?);
        group.expect_even(&[(time.len(), "time"), (value.len(), "value")])?;
        let mut time_s = time.read_all()?;
        let (first, last) = (time_s.partition_point(|t| *t < from_s), time_s.partition_point(|t| *t < to_s));
        time_s.truncate(last);
        time_s.drain(..first.min(last));
        let range = get_optional_number(at, "range_min")?.zip(get_optional_number(at, "range_max")?);
        Ok(Signal {
            name: get_text(at, "name")?,
            role,
            value: value.read(first, last)?,
            time_s,
            zero_uncertainty: get_number(at, "zero_uncertainty")?,
            scale_relative_uncertainty: get_number(at, "scale_relative_uncertainty")?,
            time_uncertainty_s: get_number(at, "time_uncertainty_s")?,
            nominal_rate_hz: get_number(at, "nominal_rate_hz")?,
            bandwidth_hz: get_optional_number(at, "bandwidth_hz")?,
            resolution: get_number(at, "resolution")?,
            range,
        })
    }

    /// Times and values of a signal's samples `from..to`, as far as it has them; reads only these.
    pub fn signal_samples(&self, name: &str, from: usize, to: usize) -> Result<(Vec<f64>, Vec<f64>), TrialError> {
        let group = self.named_signal(name)?;
        let (time, value) = (group.column::<f64>("time")?, group.column::<f64>("value")?);
        group.expect_even(&[(time.len(), "time"), (value.len(), "value")])?;
        Ok((time.read(from, to)?, value.read(from, to)?))
    }

    /// How many samples a signal has.
    pub fn signal_len(&self, name: &str) -> Result<usize, TrialError> {
        Ok(self.named_signal(name)?.column::<f64>("value")?.len())
    }

    /// A derived signal, whole.
    pub fn derived(&self, name: &str) -> Result<DerivedSignal, TrialError> {
        let group = self.named_signal(name)?;
        let value = group.dataset("value")?;
        let signal = DerivedSignal {
            name: get_text(group.group(), "name")?,
            unit: get_text(&value, "units")?,
            method: get_text(group.group(), "method")?,
            time_s: group.column::<f64>("time")?.read_all()?,
            value: group.column::<f64>("value")?.read_all()?,
            standard_uncertainty: group.column::<f64>("value_errors")?.read_all()?,
        };
        let errors = (signal.standard_uncertainty.len(), "value_errors");
        group.expect_even(&[(signal.time_s.len(), "time"), (signal.value.len(), "value"), errors])?;
        Ok(signal)
    }

    /// Reads every measured signal once, a part at a time: lengths equal, time moves on, nothing unreadable.
    ///
    /// # Errors
    /// [`TrialError::TimeStands`] and whatever the library says of damaged chunks.
    pub fn prove_signals(&self) -> Result<(), TrialError> {
        self.signal_names()?.iter().try_for_each(|name| prove_signal(&self.named_signal(name)?))
    }

    fn named_signal(&self, name: &str) -> Result<Members, TrialError> {
        let signals = self.root.child("signals")?;
        for member in signals.names() {
            let group = signals.child(member)?;
            if get_text(group.group(), "name")? == name {
                return Ok(group);
            }
        }
        Err(TrialError::NoSuch { object: format!("signal {name:?}"), n_known: signals.names().count() })
    }

    pub fn events(&self) -> Result<Vec<EventRow>, TrialError> {
        EventTable::read(&self.root.child("events")?)
    }

    /// Rig file, cards and records, whole.
    pub fn texts(&self) -> Result<Vec<CarriedText>, TrialError> {
        let rig = self.root.child("rig")?;
        rig.names().map(|member| named_text(&rig.dataset(member)?)).collect()
    }

    /// The same with the SHA-256 each was sealed with.
    pub fn texts_with_digests(&self) -> Result<Vec<SealedText>, TrialError> {
        let rig = self.root.child("rig")?;
        let text = |member: &str| {
            let dataset = rig.dataset(member)?;
            Ok(SealedText { text: named_text(&dataset)?, sealed: get_text(&dataset, "sha256")? })
        };
        rig.names().map(text).collect()
    }

    /// Notes and inspection answers, whole.
    pub fn notes(&self) -> Result<Vec<CarriedText>, TrialError> {
        let notes = self.root.child("notes")?;
        let members = notes.names().filter(|name| *name != "conditions");
        members.map(|member| named_text(&notes.dataset(member)?)).collect()
    }

    pub fn conditions(&self) -> Result<Vec<Condition>, TrialError> {
        let conditions = self.root.child("notes")?.child("conditions")?;
        conditions.names().map(|member| read_condition(&conditions.dataset(member)?)).collect()
    }

    pub fn results(&self) -> Result<ResultSet, TrialError> {
        let result = self.root.child("result")?;
        let mut entries = Vec::new();
        for member in result.names().filter(|name| !RESULT_RESERVED.contains(name)) {
            entries.push(read_entry(&result.dataset(member)?)?);
        }
        Ok(ResultSet {
            outcome: get_text(result.group(), "outcome")?,
            outcome_evidence: result.column::<String>(EVIDENCE)?.read_all()?,
            findings: result.column::<String>(FINDINGS)?.read_all()?,
            entries,
            instants: InstantTable::read(&result.child("instants")?)?,
            absent: AbsentTable::read(&result.child("absent")?)?,
        })
    }

    /// A device's clock map and the exchanges it was fitted to.
    pub fn clock(&self, device: &str) -> Result<(Vec<ClockRow>, Vec<ExchangeRow>), TrialError> {
        let clock = self.root.child("clock")?;
        for member in clock.names().filter(|name| *name != "host") {
            let group = clock.child(member)?;
            if get_text(group.group(), "device")? == device {
                let exchanges = ExchangeTable::read(&group.child("exchanges")?)?;
                return Ok((ClockTable::read(&group.child("map")?)?, exchanges));
            }
        }
        Err(TrialError::NoSuch {
            object: format!("clock of device {device:?}"),
            n_known: clock.names().count().saturating_sub(1),
        })
    }

    pub fn host_clocks(&self) -> Result<Vec<HostClocksRow>, TrialError> {
        HostClocksTable::read(&self.root.child("clock")?.child("host")?)
    }

    pub(super) fn raw(&self) -> Result<Members, TrialError> {
        self.root.child("raw")
    }
}

fn check_format(path: &Path, root: &Members) -> Result<(), TrialError> {
    let not_a_trial = |what: String| TrialError::NotATrial { path: path.to_owned(), what };
    match get_text(root.group(), "format") {
        Ok(format) if format == FORMAT_NAME => {}
        Ok(other) => return Err(not_a_trial(format!("its format attribute says {other:?}"))),
        Err(_) => return Err(not_a_trial("it has no format attribute".to_owned())),
    }
    let found: u32 = get_number(root.group(), "format_version")?;
    if found > FORMAT_VERSION {
        return Err(TrialError::TooNew { path: path.to_owned(), found, supported: FORMAT_VERSION });
    }
    Ok(())
}

fn read_header(root: &Members) -> Result<Header, TrialError> {
    let text = |name| get_text(root.group(), name);
    Ok(Header {
        trial_id: text("trial_id")?,
        journal_id: text("journal_id")?,
        first_seq: get_number(root.group(), "first_seq")?,
        last_seq: get_number(root.group(), "last_seq")?,
        rig: text("rig")?,
        started: text("started")?,
        started_quality: text("started_quality")?,
        program_version: text("program_version")?,
        configuration_hash: text("configuration_hash")?,
        series: text("series")?,
        zero_host_ns: get_number(root.group(), "zero_host_ns")?,
    })
}

fn read_entry(dataset: &hdf5::Dataset) -> Result<ResultEntry, TrialError> {
    Ok(ResultEntry {
        name: get_text(dataset, "name")?,
        value: read_number(dataset)?,
        unit: get_text(dataset, "units")?,
        standard_uncertainty: get_number(dataset, "standard_uncertainty")?,
        low: get_number(dataset, "coverage_low")?,
        high: get_number(dataset, "coverage_high")?,
        method: get_text(dataset, "method")?,
        budget: get_list::<String>(dataset, "budget_sources")?
            .into_iter()
            .zip(get_list::<f64>(dataset, "budget_standard_uncertainties")?)
            .collect(),
    })
}

fn named_text(dataset: &hdf5::Dataset) -> Result<CarriedText, TrialError> {
    Ok(CarriedText { name: get_text(dataset, "name")?, text: read_text(dataset)? })
}

fn read_condition(dataset: &hdf5::Dataset) -> Result<Condition, TrialError> {
    Ok(Condition {
        name: get_text(dataset, "name")?,
        value: read_number(dataset)?,
        unit: get_text(dataset, "units")?,
        source: get_text(dataset, "source")?,
    })
}

fn prove_signal(group: &Members) -> Result<(), TrialError> {
    let (time, value) = (group.column::<f64>("time")?, group.column::<f64>("value")?);
    group.expect_even(&[(time.len(), "time"), (value.len(), "value")])?;
    let mut last_s = f64::NEG_INFINITY;
    for from in (0..time.len()).step_by(SAMPLES_PER_CHUNK) {
        let part = time.read(from, from + SAMPLES_PER_CHUNK)?;
        for (index, time_s) in part.iter().enumerate() {
            // Not a number does not move on either.
            if time_s.partial_cmp(&last_s) != Some(std::cmp::Ordering::Greater) {
                return Err(TrialError::TimeStands { object: group.group().name(), sample: from + index });
            }
            last_s = *time_s;
        }
        value.read(from, from + SAMPLES_PER_CHUNK)?;
    }
    Ok(())
}
