//! Writes a trial file in one stream: header, devices with their blocks, signals, then what was found in them.
//!
//! Guarantees: default library bounds (superblock 2), no object timestamps, no clock read, so that the same calls give
//! the same bytes. Any error is final for the file: drop the writer and delete what it left. An error of `flush` is
//! believed, success of `close` is not (the library reports none): open the file again before you trust it.
//! Refuses to replace a file that exists. Memory: one chunk a dataset, however long the trial.

use std::collections::BTreeMap;
use std::mem::ManuallyDrop;
use std::path::{Path, PathBuf};

use hdf5::{File, Group};

use super::attribute::{new_group, put_number, put_number_dataset, put_text, put_text_dataset};
use super::content::{
    BlockRow, CarriedText, ClockRow, Condition, DerivedSignal, EventRow, ExchangeRow, Header, HostClocksRow, ResultSet,
    TextLine,
};
use super::device_writer::DeviceWriter;
use super::digest::{devices_digest, text_sha256};
use super::error::{Doing, TrialError};
use super::link_health::LinkHealth;
use super::names::free_member_name;
use super::results_writer;
use super::schema::{ClockTable, EventTable, ExchangeTable, FORMAT_NAME, FORMAT_VERSION, HostClocksTable};
use super::signals_writer::{OpenSignal, SignalsWriter};
use super::table::Table;
use crate::calibration::Signal;
use crate::capture::{Counts, DeviceDescription, Edge, Gap, Rejected, Status};

/// A device opened for writing.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord)]
pub struct RawDevice(usize);

struct Groups {
    raw: Group,
    clock: Group,
    events: Group,
    rig: Group,
    result: Group,
    notes: Group,
    conditions: Group,
}

/// The stream into one trial file.
pub struct TrialWriter {
    /// Closed only after a flush that worked; see [`super::column`].
    file: ManuallyDrop<File>,
    path: PathBuf,
    groups: Groups,
    devices: Vec<(String, DeviceWriter)>,
    signals: SignalsWriter,
    members: BTreeMap<&'static str, Vec<String>>,
    host_clocks: HostClocksTable,
    events: EventTable,
}

impl std::fmt::Debug for TrialWriter {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        f.debug_struct("TrialWriter").field("path", &self.path).finish_non_exhaustive()
    }
}

impl TrialWriter {
    /// Creates the file and writes the header.
    ///
    /// # Errors
    /// If the path exists or cannot be created.
    pub fn create(path: &Path, header: &Header) -> Result<Self, TrialError> {
        let mut options = File::with_options();
        // No lock: nobody else knows the temporary name, and a lock outlives the file in a child that is just starting.
        options.with_fcpl(|fcpl| fcpl.obj_track_times(false)).with_fapl(|fapl| fapl.file_locking(false));
        let created = options.create_excl(path);
        let file = ManuallyDrop::new(created.doing("creating", path.display().to_string())?);
        write_header(&file, header)?;
        let top = |name: &str, class: &str| new_group(&file, name, class);
        let notes = top("notes", "NXcollection")?;
        let groups = Groups {
            raw: top("raw", "NXcollection")?,
            clock: top("clock", "NXcollection")?,
            events: top("events", "NXcollection")?,
            rig: top("rig", "NXcollection")?,
            result: top("result", "NXcollection")?,
            conditions: new_group(&notes, "conditions", "NXcollection")?,
            notes,
        };
        let signals = SignalsWriter::new(top("signals", "NXentry")?);
        let host_clocks = HostClocksTable::create(&new_group(&groups.clock, "host", "NXcollection")?)?;
        let events = EventTable::create(&groups.events)?;
        Ok(Self {
            path: path.to_owned(),
            file,
            groups,
            devices: Vec::new(),
            signals,
            members: BTreeMap::from([("clock", vec!["host".to_owned()]), ("notes", vec!["conditions".to_owned()])]),
            host_clocks,
            events,
        })
    }

    /// Carries a text whole, with its SHA-256, in `/rig`.
    pub fn add_text(&mut self, text: &CarriedText) -> Result<(), TrialError> {
        let member = self.take_member("rig", &text.name);
        let dataset = put_text_dataset(&self.groups.rig, &member, &text.text)?;
        put_text(&dataset, "name", &text.name)?;
        put_text(&dataset, "sha256", &text_sha256(&text.text))
    }

    /// Opens a device's raw group. A device that sent nothing is opened too: its silence is part of the record.
    pub fn add_device(&mut self, name: &str) -> Result<RawDevice, TrialError> {
        let member = self.take_member("raw", name);
        let device = DeviceWriter::create(&self.groups.raw, &member, name)?;
        self.devices.push((member, device));
        Ok(RawDevice(self.devices.len() - 1))
    }

    /// Keeps a device's description; its blocks carry the layout number returned ([`BlockRow::layout`]).
    pub fn describe(&mut self, device: RawDevice, description: &DeviceDescription) -> Result<u16, TrialError> {
        self.devices[device.0].1.describe(description)
    }

    /// Appends a block: one entry of `counts` a channel of the block's stream, in the order of the description.
    pub fn append_block(&mut self, device: RawDevice, row: &BlockRow, counts: &[Counts]) -> Result<(), TrialError> {
        self.devices[device.0].1.block(row, counts)
    }

    pub fn append_gap(&mut self, device: RawDevice, gap: &Gap) -> Result<(), TrialError> {
        self.devices[device.0].1.gap(gap)
    }

    pub fn append_edge(&mut self, device: RawDevice, edge: &Edge) -> Result<(), TrialError> {
        self.devices[device.0].1.edge(edge)
    }

    pub fn append_status(&mut self, device: RawDevice, status: &Status) -> Result<(), TrialError> {
        self.devices[device.0].1.status(status)
    }

    pub fn append_text_line(&mut self, device: RawDevice, line: &TextLine) -> Result<(), TrialError> {
        self.devices[device.0].1.text_line(line)
    }

    /// Keeps refused bytes up to 1 MiB and 10 000 refusals a device; counts what is beyond.
    pub fn append_rejected(&mut self, device: RawDevice, rejected: &Rejected) -> Result<(), TrialError> {
        self.devices[device.0].1.rejected(rejected)
    }

    pub fn write_link_health(&mut self, device: RawDevice, health: &LinkHealth) -> Result<(), TrialError> {
        self.devices[device.0].1.link_health(health)
    }

    pub fn append_host_clocks(&mut self, row: &HostClocksRow) -> Result<(), TrialError> {
        self.host_clocks.push(row)
    }

    /// Writes a device's clock map and the exchanges it was fitted to.
    pub fn write_clock(
        &mut self,
        device: &str,
        pieces: &[ClockRow],
        exchanges: &[ExchangeRow],
    ) -> Result<(), TrialError> {
        let member = self.take_member("clock", device);
        let group = new_group(&self.groups.clock, &member, "NXcollection")?;
        put_text(&group, "device", device)?;
        let mut map = ClockTable::create(&new_group(&group, "map", "NXcollection")?)?;
        pieces.iter().try_for_each(|row| map.push(row))?;
        map.finish("map")?;
        let mut table = ExchangeTable::create(&new_group(&group, "exchanges", "NXcollection")?)?;
        exchanges.iter().try_for_each(|row| table.push(row))?;
        table.finish("exchanges")?;
        Ok(())
    }

    /// Opens a measured signal with what samples `signal` already has; append the rest.
    pub fn begin_signal(&mut self, signal: &Signal) -> Result<OpenSignal, TrialError> {
        let member = self.take_member("signals", &signal.name);
        self.signals.begin(member, signal)
    }

    pub fn append_signal(&mut self, signal: OpenSignal, time_s: &[f64], value: &[f64]) -> Result<(), TrialError> {
        self.signals.append(signal, time_s, value)
    }

    pub fn write_derived(&mut self, signal: &DerivedSignal) -> Result<(), TrialError> {
        let member = self.take_member("signals", &signal.name);
        self.signals.derived(member, signal)
    }

    /// Appends an event; call in order of time.
    pub fn append_event(&mut self, event: &EventRow) -> Result<(), TrialError> {
        self.events.push(event)
    }

    /// Notes and inspection answers, whole, in `/notes`.
    pub fn add_note(&mut self, note: &CarriedText) -> Result<(), TrialError> {
        let member = self.take_member("notes", &note.name);
        let dataset = put_text_dataset(&self.groups.notes, &member, &note.text)?;
        put_text(&dataset, "name", &note.name)
    }

    pub fn add_condition(&mut self, condition: &Condition) -> Result<(), TrialError> {
        let member = self.take_member("conditions", &condition.name);
        let dataset = put_number_dataset(&self.groups.conditions, &member, condition.value)?;
        put_text(&dataset, "name", &condition.name)?;
        put_text(&dataset, "units", &condition.unit)?;
        put_text(&dataset, "source", &condition.source)
    }

    pub fn write_results(&mut self, results: &ResultSet) -> Result<(), TrialError> {
        put_text(&self.file, "outcome", &results.outcome)?;
        results_writer::write(&self.groups.result, results)
    }

    /// Ends every dataset, writes digests and default plot, flushes and closes.
    ///
    /// # Errors
    /// Any write or flush the library refused; the file is then worthless.
    pub fn finish(mut self) -> Result<(), TrialError> {
        self.devices.sort_by(|a, b| a.0.cmp(&b.0));
        let mut parts: Vec<(String, String)> = Vec::new();
        for (member, device) in self.devices {
            let digest = device.finish()?;
            parts.push((member, digest));
        }
        put_text(
            &self.groups.raw,
            "sha256",
            &devices_digest(parts.iter().map(|(member, digest)| (member.as_str(), digest.as_str()))),
        )?;
        self.signals.finish()?;
        self.host_clocks.finish("host")?;
        self.events.finish_on_axis()?;
        drop(self.groups);
        self.file.flush().doing("flushing", self.path.display().to_string())?;
        ManuallyDrop::into_inner(self.file).close().doing("closing", self.path.display().to_string())
    }

    /// A member name of `group` that nothing has taken yet, derived from a name that came from outside.
    fn take_member(&mut self, group: &'static str, name: &str) -> String {
        let taken = self.members.entry(group).or_default();
        let member = free_member_name(name, |candidate| taken.iter().any(|other| other == candidate));
        taken.push(member.clone());
        member
    }
}

fn write_header(file: &File, header: &Header) -> Result<(), TrialError> {
    let texts = [
        ("NX_class", "NXroot"),
        ("default", "signals"),
        ("format", FORMAT_NAME),
        ("trial_id", &header.trial_id),
        ("journal_id", &header.journal_id),
        ("rig", &header.rig),
        ("started", &header.started),
        ("started_quality", &header.started_quality),
        ("program_version", &header.program_version),
        ("configuration_hash", &header.configuration_hash),
        ("series", &header.series),
    ];
    texts.iter().try_for_each(|(name, text)| put_text(file, name, text))?;
    put_number(file, "format_version", FORMAT_VERSION)?;
    put_number(file, "zero_host_ns", header.zero_host_ns)?;
    put_number(file, "first_seq", header.first_seq)?;
    put_number(file, "last_seq", header.last_seq)
}
