//! One text device's bytes to what they say.

use super::line::{LineReader, LineSplitter, Piece, Refusal};
use super::reader::{self, STREAM};
use super::time::{Placed, PrintedTime};
use crate::capture::decoder::Counters;
use crate::capture::sample::{Block, Captured, Counts, DeviceDescription, Gap, HostNs, Rejected};
use crate::rig::{Device, TextInstrument};

const FIRST: Refusal = "first line after the link came up, perhaps cut";
const OVERLONG: Refusal = "too long for a line";
const CUT_OFF: Refusal = "cut off when the link was lost";

/// Decodes one text device's bytes.
#[derive(Debug)]
pub struct TextDecoder {
    splitter: LineSplitter,
    reader: LineReader,
    skip_prefix: Option<Vec<u8>>,
    header_lines: u32,
    /// Lines to come that are part of the header; the first line after the link came up counts as one.
    header_left: u32,
    /// The next line is whole.
    in_step: bool,
    byte_ns: f64,
    interval_ns: f64,
    time: Option<(PrintedTime, f64)>,
    description: DeviceDescription,
    told: bool,
    next_index: u64,
    last: Option<Last>,
    /// Lines refused since the last reading: each may have been one.
    n_refused: u64,
    /// The bytes since the last reading did not follow the ones before.
    broken_off: bool,
    counters: Counters,
}

/// The last reading.
#[derive(Debug, Clone, Copy)]
struct Last {
    tick: u64,
    boot_id: u32,
}

/// A line as it was read.
enum Heard {
    Reading { line: Vec<u8>, values: Vec<f32>, time: Option<f64> },
    NoReading(Vec<u8>),
    Refused(Refusal, Vec<u8>),
}

impl TextDecoder {
    pub fn new(device: &Device, instrument: &TextInstrument) -> Self {
        let time = instrument.time.map(|time| {
            let ns_per_unit = time.unit_s * 1e9;
            let wrap_ns = time.wrap.map(|wrap| (wrap * ns_per_unit).round() as u64);
            (PrintedTime::wrapping_at(wrap_ns), ns_per_unit)
        });
        Self {
            splitter: LineSplitter::default(),
            reader: reader::line_reader(instrument),
            skip_prefix: instrument.skip_prefix.as_ref().map(|prefix| prefix.as_bytes().to_vec()),
            header_lines: instrument.header_lines,
            header_left: instrument.header_lines,
            in_step: false,
            byte_ns: reader::byte_ns(device),
            interval_ns: instrument.interval_s * 1e9,
            time,
            description: reader::description(device, instrument, 1),
            told: false,
            next_index: 0,
            last: None,
            n_refused: 0,
            broken_off: false,
            counters: Counters::default(),
        }
    }

    pub fn feed(&mut self, host_ns: HostNs, bytes: &[u8], sink: &mut impl FnMut(Captured)) {
        self.counters.bytes += bytes.len() as u64;
        if !self.told {
            self.told = true;
            sink(Captured::Description(self.description.clone()));
        }
        let mut heard = Vec::new();
        let mut splitter = std::mem::take(&mut self.splitter);
        splitter.feed(bytes, &mut |piece| heard.push(self.hear(piece)));
        self.splitter = splitter;
        let is_reading = |heard: &Heard| matches!(heard, Heard::Reading { .. });
        let mut n_later = heard.iter().filter(|heard| is_reading(heard)).count() as u64;
        for heard in heard {
            n_later -= u64::from(is_reading(&heard));
            self.tell(host_ns, heard, n_later, sink);
        }
    }

    pub fn link_lost(&mut self, host_ns: HostNs, sink: &mut impl FnMut(Captured)) {
        let partial = self.splitter.take_partial();
        if !partial.is_empty() {
            self.reject(host_ns, CUT_OFF, partial, sink);
        }
        (self.in_step, self.header_left) = (false, self.header_lines);
        self.broken_off = true;
    }

    pub fn description(&self) -> &DeviceDescription {
        &self.description
    }

    pub fn counters(&self) -> &Counters {
        &self.counters
    }

    /// What a piece of the stream is, by itself.
    fn hear(&mut self, piece: Piece<'_>) -> Heard {
        let line = match piece {
            Piece::Junk(junk) => {
                self.in_step = true;
                return Heard::Refused(OVERLONG, junk.to_vec());
            }
            Piece::Line(line) => line.to_vec(),
        };
        self.counters.frames += 1;
        let first = !std::mem::replace(&mut self.in_step, true);
        if self.header_left > 0 {
            self.header_left -= 1;
            return Heard::NoReading(line);
        }
        if self.skip_prefix.as_ref().is_some_and(|prefix| line.starts_with(prefix)) {
            return Heard::NoReading(line);
        }
        if first {
            return Heard::Refused(FIRST, line);
        }
        match self.reader.read(&line) {
            Ok(read) => Heard::Reading { line, values: read.values, time: read.time },
            Err(reason) => Heard::Refused(reason, line),
        }
    }

    fn tell(&mut self, host_ns: HostNs, heard: Heard, n_later: u64, sink: &mut impl FnMut(Captured)) {
        let (line, values, time) = match heard {
            Heard::Reading { line, values, time } => (line, values, time),
            Heard::NoReading(line) => return sink(text(host_ns, &line)),
            Heard::Refused(reason, line) => return self.reject(host_ns, reason, line, sink),
        };
        match self.tick(host_ns, time, n_later) {
            Ok(tick) => self.reading(host_ns, tick, &line, values, sink),
            Err(reason) => self.reject(host_ns, reason, line, sink),
        }
    }

    fn reject(&mut self, host_ns: HostNs, reason: Refusal, bytes: Vec<u8>, sink: &mut impl FnMut(Captured)) {
        self.n_refused += u64::from(reason != FIRST);
        *self.counters.refused.entry(reason).or_default() += 1;
        sink(Captured::Rejected(Rejected { host_ns, reason, detail: String::new(), bytes }));
    }

    /// The reading's tick, by its own time or by its arrival; a device that began again gets a new boot.
    fn tick(&mut self, host_ns: HostNs, time: Option<f64>, n_later: u64) -> Result<u64, Refusal> {
        let Some(((printed, ns_per_unit), time)) = self.time.as_mut().zip(time) else {
            return Ok(self.tick_of_arrival(host_ns, n_later));
        };
        match printed.place((time * *ns_per_unit).round().max(0.0) as u64, host_ns) {
            Placed::Tick(tick) => Ok(tick),
            Placed::NewBoot(tick) => {
                self.description.boot_id = self.description.boot_id.wrapping_add(1);
                self.next_index = 0;
                Ok(tick)
            }
            Placed::Refused(reason) => Err(reason),
        }
    }

    /// Lines of one read are an interval apart, and later than the line before them.
    fn tick_of_arrival(&self, host_ns: HostNs, n_later: u64) -> u64 {
        let arrived = u64::try_from(host_ns).unwrap_or(0);
        let tick = arrived.saturating_sub((n_later as f64 * self.interval_ns) as u64);
        let Some(last) = self.last.filter(|last| last.tick >= tick) else { return tick };
        let between = arrived.saturating_sub(last.tick) / (n_later + 1);
        last.tick + between.max(1)
    }

    fn reading(&mut self, host_ns: HostNs, tick: u64, line: &[u8], values: Vec<f32>, sink: &mut impl FnMut(Captured)) {
        let boot_id = self.description.boot_id;
        let begun_again = self.last.is_some_and(|last| last.boot_id != boot_id);
        if begun_again {
            sink(Captured::Description(self.description.clone()));
        }
        let n_missing = if begun_again { 0 } else { self.n_missing(tick) };
        if n_missing > 0 {
            self.counters.missing = self.counters.missing.saturating_add(n_missing);
            self.counters.gaps += 1;
            let first_missing_index = self.next_index;
            sink(Captured::Gap(Gap { host_ns, boot_id, stream: STREAM, first_missing_index, n_missing }));
            self.next_index += n_missing;
        }
        let wire_ns = 0.5 * (line.len() + 2) as f64 * self.byte_ns;
        let sent_tick = if self.time.is_some() { tick.saturating_add(wire_ns as u64) } else { tick };
        sink(text(host_ns, line));
        sink(Captured::Block(Block {
            host_ns,
            boot_id,
            description_id: self.description.description_id,
            stream: STREAM,
            sequence: self.next_index as u32,
            first_index: self.next_index,
            first_tick: tick,
            sent_tick,
            n_samples: 1,
            overruns: 0,
            crc: crc32c::crc32c(line),
            counts: values.into_iter().map(|value| Counts::Float(vec![value])).collect(),
        }));
        self.next_index += 1;
        self.counters.blocks += 1;
        self.last = Some(Last { tick, boot_id });
        (self.n_refused, self.broken_off) = (0, false);
    }

    /// Readings missing before this one. Arrivals alone tell only where the link was broken off: bytes that merely came
    /// late come all the same, and an instrument that was switched off took no readings.
    fn n_missing(&self, tick: u64) -> u64 {
        let Some(last) = self.last else { return 0 };
        let intervals = tick.saturating_sub(last.tick) as f64 / self.interval_ns;
        let by_time = if intervals > 1.5 { intervals.round() as u64 - 1 } else { 0 };
        match (&self.time, self.broken_off) {
            (Some(_), _) => by_time,
            (None, true) => by_time.max(self.n_refused),
            (None, false) => self.n_refused,
        }
    }
}

/// Bytes that are no text were refused before.
fn text(host_ns: HostNs, line: &[u8]) -> Captured {
    Captured::Text { host_ns, text: String::from_utf8_lossy(line).into_owned() }
}
