//! Values derived again from the counts of a trial file, by the very code that sealed it.
//!
//! Blocks go to the value pass in the order of their arrival, each device's descriptions before them. Memory: a buffer of
//! counts a channel, and what the reading is to see.

use std::collections::BTreeMap;

use jiff::civil::Date;
use thiserror::Error;

use super::derive;
use super::edges::edges_of;
use super::raw_pass::{Events, tared};
use super::value_pass::{ForReading, KEPT_SAMPLES_MAX, Source, ValuePass, ValueSink};
use crate::calibration::{Signal, on_day};
use crate::capture::{Block, ClockMethod, ClockPiece, Counts, DeviceDescription, Encoding, LeastSteps};
use crate::link::DeviceIdx;
use crate::reading::{Beside, Reading};
use crate::rig::Rig;
use crate::trial::{BlockRow, ClockRow, RawChannel, TrialError, TrialFile};

/// Counts read at once from a channel.
const BUFFER_SAMPLES: usize = 32 * 1024;

/// Why values can't be derived again.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum AgainError {
    #[error(transparent)]
    Trial(#[from] TrialError),
    #[error("{device}: block {block} names layout {layout}, which none of its {n_known} descriptions has")]
    NoDescription { device: String, block: usize, layout: u16, n_known: usize },
    #[error("{device}: block {block} has {n_samples} samples, of which channel {channel} holds fewer")]
    TooFewCounts { device: String, block: usize, n_samples: u32, channel: String },
}

/// A rig file as it held for a trial: the scales of its day, the zeros that were in force.
pub(super) fn in_force(trial: &TrialFile, rig: Rig) -> Result<(Rig, Option<Date>), TrialError> {
    let day = trial.header().day();
    Ok((tared(&trial.events()?, on_day(rig, day)), day))
}

/// The reading of a trial by a rig file, from its counts, as sealing makes it; `sink` hears of the values.
///
/// # Errors
/// [`AgainError`], and the sink's.
pub(super) fn read_again(trial: &TrialFile, rig: Rig, sink: &mut impl ValueSink) -> Result<Reading, AgainError> {
    let (rig, day) = in_force(trial, rig)?;
    let for_reading = values_again(trial, &rig, sink, KEPT_SAMPLES_MAX)?;
    let beside = Beside { edges: edges_of(trial)?, ..Beside::default() };
    Ok(derive::reading(&for_reading.signals, &beside, &rig, day))
}

/// All signals of a trial by another rig file, from its counts.
///
/// # Errors
/// [`AgainError`].
pub(super) fn signals_again(trial: &TrialFile, rig: Rig) -> Result<Vec<Signal>, AgainError> {
    let (rig, _) = in_force(trial, rig)?;
    Ok(values_again(trial, &rig, &mut Nowhere, usize::MAX)?.signals)
}

/// For values that only the reading is to see.
pub(super) struct Nowhere;

impl ValueSink for Nowhere {
    type Open = ();

    fn begin(&mut self, _signal: &Signal) -> Result<(), TrialError> {
        Ok(())
    }

    fn append(&mut self, (): (), _time_s: &[f64], _value: &[f64]) -> Result<(), TrialError> {
        Ok(())
    }
}

fn values_again(
    trial: &TrialFile,
    rig: &Rig,
    sink: &mut impl ValueSink,
    kept_max: usize,
) -> Result<ForReading, AgainError> {
    let names = trial.device_names()?;
    let (mut devices, mut sources) = (Vec::with_capacity(names.len()), Vec::with_capacity(names.len()));
    for name in names {
        sources.push(Source { steps: steps(trial, &name)?, name: name.clone() });
        devices.push(DeviceAgain::open(trial, &name)?);
    }
    let clocks: Vec<Vec<ClockPiece>> = devices.iter().map(|device| device.clock.clone()).collect();
    let mut values = ValuePass::new(sink, rig, &sources, &clocks, trial.header().zero_host_ns, kept_max);
    while let Some(next) = next_device(&devices) {
        let index = DeviceIdx(u16::try_from(next).unwrap_or(u16::MAX));
        if let Some(description) = devices[next].description_due()? {
            values.route(index, description);
        }
        let block = devices[next].next_block(trial)?;
        values.block(index, &block)?;
    }
    Ok(values.finish(&mut Events::default()))
}

/// Steps of the channels of a device that come as floats; where none does, nothing is read.
fn steps(trial: &TrialFile, name: &str) -> Result<LeastSteps, AgainError> {
    let mut steps = LeastSteps::default();
    if trial.raw_channels(name)?.iter().any(|channel| channel.encoding == Encoding::F32) {
        let mut device = DeviceAgain::open(trial, name)?;
        while device.at < device.blocks.len() {
            steps.take(&device.next_block(trial)?);
        }
    }
    Ok(steps)
}

/// The device whose next block arrived first.
fn next_device(devices: &[DeviceAgain]) -> Option<usize> {
    let next = |device: &DeviceAgain| device.blocks.get(device.at).map(|block| block.host_ns);
    let waiting = devices.iter().enumerate().filter_map(|(index, device)| Some((next(device)?, index)));
    waiting.min().map(|(_, index)| index)
}

struct ChannelAgain {
    channel: RawChannel,
    buffer: Counts,
    /// In the buffer, and in the dataset.
    at: usize,
    read_to: usize,
}

struct DeviceAgain {
    name: String,
    blocks: Vec<BlockRow>,
    at: usize,
    clock: Vec<ClockPiece>,
    descriptions: Vec<DeviceDescription>,
    /// Number of the layout of each description.
    layouts: Vec<u16>,
    /// Layout and boot that the values are routed by, and the description that was found for them.
    routed: Option<(u16, u32)>,
    description_id: u16,
    /// By layout and stream, in the order of the stream's channels.
    channels: BTreeMap<(u16, u8), Vec<ChannelAgain>>,
}

impl DeviceAgain {
    fn open(trial: &TrialFile, name: &str) -> Result<Self, AgainError> {
        let descriptions = trial.device(name)?.descriptions;
        let layouts = layouts(&descriptions);
        let mut known = trial.raw_channels(name)?;
        let mut channels: BTreeMap<(u16, u8), Vec<ChannelAgain>> = BTreeMap::new();
        for (description, layout) in descriptions.iter().zip(&layouts) {
            for stream in &description.streams {
                let of_stream = channels.entry((*layout, stream.stream)).or_default();
                if of_stream.len() == stream.channels.len() {
                    continue; // described before
                }
                of_stream.extend(stream.channels.iter().filter_map(|described| {
                    let is_it = |channel: &RawChannel| {
                        (channel.layout, channel.stream, &channel.name) == (*layout, stream.stream, &described.name)
                    };
                    let at = known.iter().position(is_it)?;
                    Some(ChannelAgain::new(known.remove(at)))
                }));
            }
        }
        let (pieces, _) = trial.clock(name)?;
        Ok(Self {
            name: name.to_owned(),
            blocks: trial.blocks(name)?,
            at: 0,
            clock: pieces.iter().map(piece).collect(),
            descriptions,
            layouts,
            routed: None,
            description_id: 0,
            channels,
        })
    }

    /// The description that the next block needs, where it is another than the last block's.
    fn description_due(&mut self) -> Result<Option<&DeviceDescription>, AgainError> {
        let Some(block) = self.blocks.get(self.at) else { return Ok(None) };
        let needs = (block.layout, block.boot_id);
        if self.routed == Some(needs) {
            return Ok(None);
        }
        let of_layout = || self.descriptions.iter().zip(&self.layouts).filter(|(_, layout)| **layout == needs.0);
        let of_boot = of_layout().find(|(description, _)| description.boot_id == needs.1);
        let found = of_boot.or_else(|| of_layout().next()).map(|(description, _)| description);
        self.routed = Some(needs);
        self.description_id = found.map_or(0, |description| description.description_id);
        found.map(Some).ok_or_else(|| AgainError::NoDescription {
            device: self.name.clone(),
            block: self.at,
            layout: needs.0,
            n_known: self.descriptions.len(),
        })
    }

    fn next_block(&mut self, trial: &TrialFile) -> Result<Block, AgainError> {
        let row = self.blocks[self.at];
        let mut counts = Vec::new();
        for channel in self.channels.entry((row.layout, row.stream)).or_default() {
            let too_few = |channel: &RawChannel| AgainError::TooFewCounts {
                device: self.name.clone(),
                block: self.at,
                n_samples: row.n_samples,
                channel: channel.name.clone(),
            };
            let part = channel.take(trial, row.n_samples as usize)?;
            counts.push(part.ok_or_else(|| too_few(&channel.channel))?);
        }
        self.at += 1;
        Ok(Block {
            host_ns: row.host_ns,
            boot_id: row.boot_id,
            description_id: self.description_id,
            stream: row.stream,
            sequence: row.sequence,
            crc: row.crc,
            first_index: row.first_index,
            first_tick: row.first_tick,
            sent_tick: row.sent_tick,
            overruns: row.overruns,
            n_samples: row.n_samples,
            counts,
        })
    }
}

impl ChannelAgain {
    fn new(channel: RawChannel) -> Self {
        let buffer = match channel.encoding {
            Encoding::F32 => Counts::Float(Vec::new()),
            _ => Counts::Integer(Vec::new()),
        };
        Self { channel, buffer, at: 0, read_to: 0 }
    }

    /// The next counts; `None` where the dataset ends before.
    fn take(&mut self, trial: &TrialFile, n: usize) -> Result<Option<Counts>, TrialError> {
        if self.at + n > self.len() {
            let kept = self.len() - self.at;
            let from = self.read_to - kept;
            self.buffer = trial.counts(&self.channel, from, from + n.max(BUFFER_SAMPLES))?;
            (self.at, self.read_to) = (0, from + self.len());
        }
        let range = self.at..self.at + n;
        let part = match &self.buffer {
            Counts::Integer(counts) => counts.get(range).map(|part| Counts::Integer(part.to_vec())),
            Counts::Float(counts) => counts.get(range).map(|part| Counts::Float(part.to_vec())),
        };
        self.at += if part.is_some() { n } else { 0 };
        Ok(part)
    }

    fn len(&self) -> usize {
        match &self.buffer {
            Counts::Integer(counts) => counts.len(),
            Counts::Float(counts) => counts.len(),
        }
    }
}

/// Layouts as the writer numbers them: by first appearance of a list of channels.
fn layouts(descriptions: &[DeviceDescription]) -> Vec<u16> {
    let layout = |description: &DeviceDescription| -> Vec<(u8, String, Encoding)> {
        let streams = description.streams.iter();
        streams.flat_map(|s| s.channels.iter().map(|c| (s.stream, c.name.clone(), c.encoding))).collect()
    };
    let mut known: Vec<Vec<(u8, String, Encoding)>> = Vec::new();
    let mut numbers = Vec::with_capacity(descriptions.len());
    for description in descriptions {
        let wanted = layout(description);
        let number = known.iter().position(|other| *other == wanted).unwrap_or(known.len());
        if number == known.len() {
            known.push(wanted);
        }
        numbers.push(u16::try_from(number).unwrap_or(u16::MAX));
    }
    numbers
}

fn piece(row: &ClockRow) -> ClockPiece {
    ClockPiece {
        boot_id: row.boot_id,
        first_tick: row.first_tick,
        last_tick: row.last_tick,
        origin_tick: row.origin_tick,
        host_ns_at_origin: row.host_ns_at_origin,
        ns_per_tick: row.ns_per_tick,
        u_ns: row.standard_uncertainty_ns,
        asymmetry_ns: row.asymmetry_ns,
        method: if row.two_way { ClockMethod::Exchanges } else { ClockMethod::Arrivals },
    }
}
