//! First pass over a range: writes what was received as it was received, and gathers clocks and events.

use crate::calibration::Tare;
use crate::capture::{
    Captured, ClockPiece, ClockSamples, DeviceDescription, Edge, LeastSteps, N_DESCRIPTIONS, NominalClock, Reboot,
    piece_at,
};
use crate::journal::{Damage, SegmentOpen};
use crate::link::{DeviceIdx, Lost};
use crate::rig::{Attached, Rig, take_apart};
use crate::trial::{
    BlockRow, CarriedText, ClockRow, EventRow, ExchangeRow, HostClocksRow, LinkHealth, RawDevice, TextLine, TrialWriter,
};

use super::clock_finding::broken_tolerance;
use super::error::SealError;
use super::host_clock_steps::HostClockSteps;
use super::player::Told;
use super::value_pass::Source;

/// Events kept of one trial; what is beyond is counted and said.
const EVENTS_MAX: usize = 100_000;
/// Findings a device; the events have them all.
const FINDINGS_MAX: usize = 10;

/// A device after the first pass.
#[derive(Debug)]
pub(super) struct DevicePass {
    pub(super) name: String,
    handle: RawDevice,
    /// Layouts of the descriptions that blocks may name: boot id, description id, layout.
    layouts: Vec<(u32, u16, u16)>,
    clock: ClockSamples,
    nominal: Option<NominalClock>,
    pub(super) steps: LeastSteps,
    /// Edges that become events; as many as there may be events.
    pub(super) edges: Vec<Edge>,
    n_more_edges: u64,
    pub(super) n_samples: u64,
    pub(super) n_missing: u64,
    link: LinkHealth,
    last_read_ns: Option<i64>,
    rebooted_ns: Option<i64>,
    /// What a person should look at.
    pub(super) findings: Vec<String>,
}

impl DevicePass {
    pub(super) fn source(&self) -> Source {
        Source { name: self.name.clone(), steps: self.steps.clone() }
    }

    fn new(name: &str, handle: RawDevice) -> Self {
        Self {
            name: name.to_owned(),
            handle,
            layouts: Vec::new(),
            clock: ClockSamples::default(),
            nominal: None,
            steps: LeastSteps::default(),
            edges: Vec::new(),
            n_more_edges: 0,
            n_samples: 0,
            n_missing: 0,
            link: LinkHealth::default(),
            last_read_ns: None,
            rebooted_ns: None,
            findings: Vec::new(),
        }
    }

    fn layout(&self, boot_id: u32, description_id: u16) -> u16 {
        let mut newest_first = self.layouts.iter().rev();
        let named = newest_first.find(|(boot, id, _)| (*boot, *id) == (boot_id, description_id));
        named.or(self.layouts.last()).map_or(0, |(.., layout)| *layout)
    }

    fn read(&mut self, host_ns: i64, n_bytes: u64, n_lost_frames: u64) {
        self.link.n_lost_frames += n_lost_frames;
        self.link.n_reads += 1;
        self.link.n_bytes += n_bytes;
        let stalled_s = self.last_read_ns.map_or(0.0, |last_ns| seconds_between(last_ns, host_ns));
        self.link.longest_stall_s = self.link.longest_stall_s.max(stalled_s);
        self.last_read_ns = Some(host_ns);
    }

    /// Time without a link is no stall.
    fn link_changed(&mut self, down: bool) {
        self.link.n_link_losses += u64::from(down && self.last_read_ns.is_some());
        self.last_read_ns = None;
    }
}

/// The rig with the zeros that were in force when the trial opened. A tare within the trial holds for the next one.
pub(super) fn tared(events: &[EventRow], mut rig: Rig) -> Rig {
    let in_force = events.iter().filter(|row| row.kind == "tare" && row.source == "daemon");
    let tares = in_force.filter_map(|row| row.text.strip_prefix(Tare::IN_FORCE)?.parse::<Tare>().ok());
    for tare in tares {
        if let Some(channel) = rig.channels.iter_mut().find(|channel| channel.name == tare.channel) {
            channel.calibration.zero_counts = tare.new_counts;
        }
    }
    rig
}

#[derive(Debug)]
pub(super) struct RawPass<'w> {
    writer: &'w mut TrialWriter,
    zero_host_ns: i64,
    devices: Vec<DevicePass>,
    rig_text: Option<String>,
    host_clocks: HostClockSteps,
    events: Events,
}

/// Events in order of arrival; sorted by time when written.
#[derive(Debug, Default)]
pub(super) struct Events {
    rows: Vec<EventRow>,
    n_more: usize,
}

impl Events {
    pub(super) fn add(&mut self, time_s: f64, kind: &str, source: &str, person: Option<String>, text: String) {
        if self.rows.len() == EVENTS_MAX {
            self.n_more += 1;
            return;
        }
        let (kind, source, person) = (kind.to_owned(), source.to_owned(), person.unwrap_or_default());
        self.rows.push(EventRow { time_s, kind, source, person, text });
    }

    pub(super) fn tared(&self, rig: Rig) -> Rig {
        tared(&self.rows, rig)
    }

    pub(super) fn write(mut self, writer: &mut TrialWriter) -> Result<(), SealError> {
        self.rows.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
        if self.n_more > 0 {
            let time_s = self.rows.last().map_or(0.0, |row| row.time_s);
            let text = format!("{} more events are in the journal only", self.n_more);
            let (kind, source) = ("seal".to_owned(), "seal".to_owned());
            self.rows.push(EventRow { time_s, kind, source, person: String::new(), text });
        }
        Ok(self.rows.iter().try_for_each(|row| writer.append_event(row))?)
    }
}

/// What the second pass and the reading need of the first.
#[derive(Debug)]
pub(super) struct Gathered {
    pub(super) devices: Vec<DevicePass>,
    /// Clock map of each device; empty where there is none.
    pub(super) clocks: Vec<Vec<ClockPiece>>,
    pub(super) events: Events,
}

impl<'w> RawPass<'w> {
    pub(super) fn new(writer: &'w mut TrialWriter, zero_host_ns: i64) -> Self {
        let (devices, host_clocks, events) = (Vec::new(), HostClockSteps::default(), Events::default());
        Self { writer, zero_host_ns, devices, rig_text: None, host_clocks, events }
    }

    fn time_s(&self, host_ns: i64) -> f64 {
        seconds_between(self.zero_host_ns, host_ns)
    }

    pub(super) fn take(&mut self, told: Told) -> Result<(), SealError> {
        match told {
            Told::Opening { host_ns, open } => self.opening(host_ns, *open),
            Told::Known(device, description) => self.describe(device, &description),
            Told::Captured(device, captured) => self.captured(device, captured),
            Told::TimeRequested { device, host_ns, token } => {
                self.devices[usize::from(device.0)].clock.requested(host_ns, token);
                Ok(())
            }
            Told::Clocks(clocks) => {
                for text in self.host_clocks.take(&clocks) {
                    self.events.add(self.time_s(clocks.monotonic_ns), "clock", "seal", None, text);
                }
                Ok(self.writer.append_host_clocks(&HostClocksRow {
                    monotonic_ns: clocks.monotonic_ns,
                    monotonic_raw_ns: clocks.monotonic_raw_ns,
                    boottime_ns: clocks.boottime_ns,
                    realtime_ns: clocks.realtime_ns,
                })?)
            }
            Told::Read { device, host_ns, n_bytes, n_lost_frames } => {
                self.devices[usize::from(device.0)].read(host_ns, n_bytes, n_lost_frames);
                Ok(())
            }
            other => {
                self.event(other);
                Ok(())
            }
        }
    }

    fn event(&mut self, told: Told) {
        match told {
            Told::Link { device, host_ns, text, down } => {
                self.devices[usize::from(device.0)].link_changed(down);
                let (time_s, source) = (self.time_s(host_ns), self.devices[usize::from(device.0)].name.clone());
                self.events.add(time_s, "link", &source, None, text);
            }
            Told::Event { host_ns, event } => {
                self.events.add(self.time_s(host_ns), &event.kind, &event.source, event.person, event.text);
            }
            Told::Lost { device, host_ns, lost } => {
                let (time_s, source) = (self.time_s(host_ns), self.devices[usize::from(device.0)].name.clone());
                self.events.add(time_s, "lost", &source, None, self.lost_sentence(&lost));
            }
            Told::Damage { host_ns, damage } => {
                self.events.add(self.time_s(host_ns), "journal", "journal", None, damage_sentence(&damage));
            }
            Told::Opening { .. }
            | Told::Known(..)
            | Told::Captured(..)
            | Told::Read { .. }
            | Told::TimeRequested { .. }
            | Told::Clocks(_) => {}
        }
    }

    fn lost_sentence(&self, lost: &Lost) -> String {
        let (from_s, to_s) = (self.time_s(lost.first_host_ns), self.time_s(lost.last_host_ns));
        let Lost { n_events, n_bytes, .. } = lost;
        format!("{n_events} reads with {n_bytes} bytes were not recorded between {from_s:.3} s and {to_s:.3} s")
    }

    fn opening(&mut self, host_ns: i64, open: SegmentOpen) -> Result<(), SealError> {
        for device in open.devices.iter().skip(self.devices.len()) {
            let handle = self.writer.add_device(&device.name)?;
            self.devices.push(DevicePass::new(&device.name, handle));
        }
        if self.rig_text.as_ref() != Some(&open.rig_text) {
            if self.rig_text.is_some() {
                let text = "the daemon was started with another rig file; values use the first".to_owned();
                self.events.add(self.time_s(host_ns), "rig", "daemon", None, text);
            }
            self.writer.add_text(&CarriedText { name: "rig.toml".to_owned(), text: open.rig_text.clone() })?;
            for Attached { name, text } in take_apart(&open.rig_text).1 {
                self.writer.add_text(&CarriedText { name, text })?;
            }
            self.rig_text = Some(open.rig_text);
        }
        Ok(())
    }

    fn describe(&mut self, device: DeviceIdx, description: &DeviceDescription) -> Result<(), SealError> {
        let device = &mut self.devices[usize::from(device.0)];
        device.clock.captured(&Captured::Description(description.clone()));
        device.nominal = Some(description.into());
        let layout = self.writer.describe(device.handle, description)?;
        let (boot_id, id) = (description.boot_id, description.description_id);
        device.layouts.retain(|(boot, known, _)| *boot == boot_id && *known != id);
        if device.layouts.len() == N_DESCRIPTIONS {
            device.layouts.remove(0);
        }
        device.layouts.push((boot_id, id, layout));
        Ok(())
    }

    /// A description that came within the range is an event as well.
    fn described(&mut self, device: DeviceIdx, description: &DeviceDescription) -> Result<(), SealError> {
        // It has no stamp of its own: after the read before it, and after the reboot that it follows.
        let pass = &self.devices[usize::from(device.0)];
        let after_ns = pass.last_read_ns.max(pass.rebooted_ns).unwrap_or(self.zero_host_ns);
        let (time_s, name) = (self.time_s(after_ns), pass.name.clone());
        self.events.add(time_s, "device", &name, None, description.to_string());
        self.describe(device, description)
    }

    fn rebooted(&mut self, device: DeviceIdx, reboot: &Reboot) {
        let time_s = self.time_s(reboot.host_ns);
        self.devices[usize::from(device.0)].rebooted_ns = Some(reboot.host_ns);
        let device = &mut self.devices[usize::from(device.0)];
        self.events.add(time_s, "device", &device.name, None, reboot.to_string());
        if device.findings.len() < FINDINGS_MAX {
            device.findings.push(format!("{} at {time_s:.3} s {reboot}", device.name));
        }
    }

    fn captured(&mut self, device: DeviceIdx, captured: Captured) -> Result<(), SealError> {
        if let Captured::Description(description) = &captured {
            return self.described(device, description);
        }
        if let Captured::Reboot(reboot) = &captured {
            self.rebooted(device, reboot);
            return Ok(());
        }
        let device = &mut self.devices[usize::from(device.0)];
        device.clock.captured(&captured);
        let (writer, handle) = (&mut *self.writer, device.handle);
        match captured {
            Captured::Block(block) => {
                let row = BlockRow {
                    first_index: block.first_index,
                    first_tick: block.first_tick,
                    sent_tick: block.sent_tick,
                    host_ns: block.host_ns,
                    boot_id: block.boot_id,
                    sequence: block.sequence,
                    n_samples: block.n_samples,
                    overruns: block.overruns,
                    crc: block.crc,
                    layout: device.layout(block.boot_id, block.description_id),
                    stream: block.stream,
                };
                device.n_samples += u64::from(block.n_samples);
                device.steps.take(&block);
                writer.append_block(handle, &row, &block.counts)?;
            }
            Captured::Gap(gap) => {
                device.n_missing = device.n_missing.saturating_add(gap.n_missing);
                device.link.n_gaps += 1;
                device.link.n_missing_samples = device.n_missing;
                writer.append_gap(handle, &gap)?;
            }
            Captured::Edge(edge) => {
                if device.edges.len() < EVENTS_MAX {
                    device.edges.push(edge);
                } else {
                    device.n_more_edges += 1;
                }
                writer.append_edge(handle, &edge)?;
            }
            Captured::Status(status) => writer.append_status(handle, &status)?,
            Captured::Text { host_ns, text } => writer.append_text_line(handle, &TextLine { host_ns, text })?,
            Captured::Rejected(rejected) => {
                *device.link.refused.entry(rejected.reason.to_owned()).or_default() += 1;
                writer.append_rejected(handle, &rejected)?;
            }
            Captured::TimeReply(_) | Captured::Description(_) | Captured::Reboot(_) => {}
        }
        Ok(())
    }

    /// Fits the clocks, writes them and turns edges into events.
    pub(super) fn finish(mut self) -> Result<Gathered, SealError> {
        let mut clocks = Vec::with_capacity(self.devices.len());
        for device in &mut self.devices {
            let pieces = device.clock.fit();
            let nominal = device.nominal;
            let broken = nominal.and_then(|nominal| broken_tolerance(&device.name, nominal, &device.clock.arrivals));
            device.findings.extend(broken);
            write_clock(self.writer, device, &pieces)?;
            self.writer.write_link_health(device.handle, &device.link)?;
            for edge in &device.edges {
                let time_s = edge_time_s(edge, &pieces, self.zero_host_ns);
                let direction = if edge.rising { "rising" } else { "falling" };
                self.events.add(time_s, "edge", &device.name, None, format!("input {} {direction}", edge.input));
            }
            if let Some(last) = device.edges.last().filter(|_| device.n_more_edges > 0) {
                let time_s = edge_time_s(last, &pieces, self.zero_host_ns);
                let text = format!("{} more edges are in the raw data only", device.n_more_edges);
                self.events.add(time_s, "edge", &device.name, None, text);
            }
            clocks.push(pieces);
        }
        Ok(Gathered { devices: self.devices, clocks, events: self.events })
    }
}

fn write_clock(writer: &mut TrialWriter, device: &DevicePass, pieces: &[ClockPiece]) -> Result<(), SealError> {
    let rows: Vec<ClockRow> = pieces.iter().map(clock_row).collect();
    let exchanges: Vec<ExchangeRow> = device
        .clock
        .exchanges
        .iter()
        .map(|exchange| {
            let at = |tick| piece_at(pieces, exchange.boot_id, tick).map(|piece| piece.host_ns(tick));
            let middle = at(exchange.received_tick).zip(at(exchange.sent_tick)).map(|(a, b)| f64::midpoint(a, b));
            let host = f64::midpoint(exchange.requested_host_ns as f64, exchange.replied_host_ns as f64);
            ExchangeRow {
                requested_host_ns: exchange.requested_host_ns,
                replied_host_ns: exchange.replied_host_ns,
                received_tick: exchange.received_tick,
                sent_tick: exchange.sent_tick,
                boot_id: exchange.boot_id,
                residual_ns: middle.map_or(f64::NAN, |middle| host - middle),
            }
        })
        .collect();
    Ok(writer.write_clock(&device.name, &rows, &exchanges)?)
}

fn clock_row(piece: &ClockPiece) -> ClockRow {
    ClockRow {
        origin_tick: piece.origin_tick,
        host_ns_at_origin: piece.host_ns_at_origin,
        ns_per_tick: piece.ns_per_tick,
        standard_uncertainty_ns: piece.u_ns,
        asymmetry_ns: piece.asymmetry_ns,
        boot_id: piece.boot_id,
        first_tick: piece.first_tick,
        last_tick: piece.last_tick,
        two_way: piece.method == crate::capture::ClockMethod::Exchanges,
    }
}

/// By the device's clock; by the read's stamp where there is no map.
fn edge_time_s(edge: &Edge, pieces: &[ClockPiece], zero_host_ns: i64) -> f64 {
    match piece_at(pieces, edge.boot_id, edge.tick) {
        Some(piece) => (piece.host_ns(edge.tick) - zero_host_ns as f64) * 1e-9,
        None => seconds_between(zero_host_ns, edge.host_ns),
    }
}

pub(super) fn seconds_between(from_ns: i64, to_ns: i64) -> f64 {
    to_ns.saturating_sub(from_ns) as f64 * 1e-9
}

fn damage_sentence(damage: &Damage) -> String {
    match damage {
        Damage::Torn { segment, at_byte, reason } => {
            format!("journal segment {segment} cannot be read beyond byte {at_byte}: {reason}")
        }
        Damage::Missing { first_seq, n_records } => {
            format!("{n_records} journal records from {first_seq} on are not there")
        }
        Damage::Unopenable { path, reason } => {
            let name = path.file_name().unwrap_or_default().to_string_lossy();
            format!("journal segment {name} cannot be read: {reason}")
        }
    }
}
