//! Second pass over a range: counts to values on the trial's time axis, through the clock maps of the first.
//!
//! Samples that cannot become values (no clock map, not a number, time that does not move on) stay in the raw groups and
//! are absent here; how many and why becomes an event. Nothing is filled. Memory: one block, and what the reading is
//! to see ([`KEPT_SAMPLES_MAX`]).

use std::collections::BTreeMap;
use std::ops::RangeInclusive;

use crate::calibration::{Sampling, Signal, signal_from_counts, to_value};
use crate::capture::{
    Block, Captured, ClockPiece, Counts, DeviceDescription, LeastSteps, N_DESCRIPTIONS, StreamDescription, piece_at,
};
use crate::link::DeviceIdx;
use crate::rig::{Channel, Rig};
use crate::trial::{OpenSignal, TrialError, TrialWriter};

use super::error::SealError;
use super::kept_samples::KeptSamples;
use super::player::Told;
use super::raw_pass::{Events, seconds_between};

/// Samples whose ticks put them further from their arrival stay raw: one such block would stop the axis for good.
const BELIEVED_WITHIN_S: f64 = 60.0;

/// Samples handed to the reading whole, all signals together (16 bytes each): the last 105 s of four channels at 10 kHz.
/// Of what comes before, the reading sees means over 10 ms.
pub(super) const KEPT_SAMPLES_MAX: usize = 1 << 22;
/// Means handed to the reading, all signals together: five hours of four channels.
const MEANS_MAX: usize = 1 << 23;

/// A device that blocks come from.
#[derive(Debug, Clone)]
pub(super) struct Source {
    pub(super) name: String,
    /// Steps of the channels that come as floats, over the whole trial.
    pub(super) steps: LeastSteps,
}

/// Where the values go, part by part: into a trial file, or beside one that is there.
pub(super) trait ValueSink {
    type Open: Copy;
    /// A signal begins with its first samples.
    fn begin(&mut self, signal: &Signal) -> Result<Self::Open, TrialError>;
    fn append(&mut self, signal: Self::Open, time_s: &[f64], value: &[f64]) -> Result<(), TrialError>;
}

impl ValueSink for TrialWriter {
    type Open = OpenSignal;

    fn begin(&mut self, signal: &Signal) -> Result<OpenSignal, TrialError> {
        self.begin_signal(signal)
    }

    fn append(&mut self, signal: OpenSignal, time_s: &[f64], value: &[f64]) -> Result<(), TrialError> {
        self.append_signal(signal, time_s, value)
    }
}

struct SignalPass<O> {
    channel: Channel,
    open: Option<O>,
    kept: Option<KeptSamples>,
    last_time_s: f64,
    /// Samples without a value, by reason.
    refused: BTreeMap<String, u64>,
    refused_host_ns: i64,
}

/// Where a channel of a stream goes.
struct Route {
    place: usize,
    signal: usize,
    sampling: Sampling,
    /// Counts at which the device says that it saturates.
    saturates: RangeInclusive<f64>,
    group_delay_s: f64,
    ticks_per_sample: u32,
}

/// Of one description that blocks may name.
#[derive(Default)]
struct DeviceRoutes {
    boot_id: u32,
    description_id: u16,
    by_stream: BTreeMap<u8, Vec<Route>>,
}

impl DeviceRoutes {
    fn are_of(&self, boot_id: u32, description_id: u16) -> bool {
        (self.boot_id, self.description_id) == (boot_id, description_id)
    }
}

pub(super) struct ValuePass<'a, S: ValueSink> {
    sink: &'a mut S,
    rig: &'a Rig,
    devices: &'a [Source],
    clocks: &'a [Vec<ClockPiece>],
    zero_host_ns: i64,
    /// Per device, those of the descriptions of its present boot.
    routes: Vec<Vec<DeviceRoutes>>,
    signals: Vec<SignalPass<S::Open>>,
    n_kept: usize,
    kept_max: usize,
}

/// What the reading is given.
#[derive(Debug, Default)]
pub(super) struct ForReading {
    pub(super) signals: Vec<Signal>,
    /// Before this the reading sees means over 10 ms, from here on every sample.
    pub(super) whole_from_s: Option<f64>,
    /// The reading sees the trial from here on, where it was too long to be held whole.
    pub(super) from_s: Option<f64>,
    /// What has no value, and why.
    pub(super) findings: Vec<String>,
}

impl<'a, S: ValueSink> ValuePass<'a, S> {
    pub(super) fn new(
        sink: &'a mut S,
        rig: &'a Rig,
        devices: &'a [Source],
        clocks: &'a [Vec<ClockPiece>],
        zero_host_ns: i64,
        kept_max: usize,
    ) -> Self {
        let signals = rig.channels.iter().map(|channel| SignalPass::new(channel.clone())).collect();
        let routes = devices.iter().map(|_| Vec::new()).collect();
        Self { sink, rig, devices, clocks, zero_host_ns, routes, signals, n_kept: 0, kept_max }
    }

    pub(super) fn take(&mut self, told: &Told) -> Result<(), SealError> {
        match told {
            Told::Known(device, description) | Told::Captured(device, Captured::Description(description)) => {
                self.route(*device, description);
                Ok(())
            }
            Told::Captured(device, Captured::Block(block)) => Ok(self.block(*device, block)?),
            _ => Ok(()),
        }
    }

    pub(super) fn route(&mut self, device: DeviceIdx, description: &DeviceDescription) {
        let index = usize::from(device.0);
        let name = &self.devices[index].name;
        let u_ns = self.clocks[index].iter().map(|piece| piece.u_ns).fold(0.0, f64::max);
        let (boot_id, description_id) = (description.boot_id, description.description_id);
        let mut routes = DeviceRoutes { boot_id, description_id, ..DeviceRoutes::default() };
        for stream in &description.streams {
            for (place, described) in stream.channels.iter().enumerate() {
                let wanted = |channel: &Channel| channel.device == *name && channel.device_channel == described.name;
                let Some(signal) = self.rig.channels.iter().position(wanted) else { continue };
                let sampling = Sampling {
                    nominal_rate_hz: rate_hz(description, stream),
                    bandwidth_hz: described.bandwidth_hz,
                    time_uncertainty_s: u_ns * 1e-9,
                    counts_range: described.encoding.range(),
                    count_step: self.devices[index].steps.of(stream.stream, place),
                };
                let (group_delay_s, ticks_per_sample) = (described.group_delay_s, stream.ticks_per_sample);
                let saturates = described.nominal_min..=described.nominal_max;
                let route = Route { place, signal, sampling, saturates, group_delay_s, ticks_per_sample };
                routes.by_stream.entry(stream.stream).or_default().push(route);
            }
        }
        let of_device = &mut self.routes[index];
        of_device.retain(|known| known.boot_id == boot_id && known.description_id != description_id);
        if of_device.len() == N_DESCRIPTIONS {
            of_device.remove(0);
        }
        of_device.push(routes);
    }

    pub(super) fn block(&mut self, device: DeviceIdx, block: &Block) -> Result<(), TrialError> {
        let index = usize::from(device.0);
        let named = self.routes[index].iter().find(|routes| routes.are_of(block.boot_id, block.description_id));
        let Some(routes) = named.and_then(|routes| routes.by_stream.get(&block.stream)) else { return Ok(()) };
        let piece = piece_at(&self.clocks[index], block.boot_id, block.first_tick);
        for route in routes {
            let (Some(signal), Some(counts)) = (self.signals.get_mut(route.signal), block.counts.get(route.place))
            else {
                continue;
            };
            let n_samples = u64::from(block.n_samples);
            let Some(piece) = piece else {
                signal.refuse("no clock map".to_owned(), n_samples, block.host_ns);
                continue;
            };
            match signal.part(block, counts, route, piece, self.zero_host_ns) {
                Ok(part) => self.n_kept += signal.write(self.sink, part)?,
                Err(reason) => signal.refuse(reason, n_samples, block.host_ns),
            }
        }
        self.drop_oldest();
        Ok(())
    }

    /// Keeps what the reading will see within its bound: a quarter of it is averaged at once, from every signal alike.
    fn drop_oldest(&mut self) {
        if self.n_kept <= self.kept_max {
            return;
        }
        let kept = |pass: &'_ SignalPass<S::Open>| pass.kept.as_ref().and_then(KeptSamples::span_s);
        let spans = self.signals.iter().filter_map(kept);
        let Some((first_s, last_s)) = spans.reduce(|a, b| (a.0.min(b.0), a.1.max(b.1))) else { return };
        let from_s = first_s + 0.25 * (last_s - first_s);
        for kept in self.signals.iter_mut().filter_map(|pass| pass.kept.as_mut()) {
            self.n_kept -= kept.coarsen_before(from_s);
        }
        let kept = self.signals.iter().filter_map(|pass| pass.kept.as_ref());
        if kept.map(KeptSamples::n_coarse).sum::<usize>() > MEANS_MAX {
            self.signals.iter_mut().filter_map(|pass| pass.kept.as_mut()).for_each(KeptSamples::cut_coarse);
        }
    }

    /// Tells what has no value and hands over what the reading is to see.
    pub(super) fn finish(self, events: &mut Events) -> ForReading {
        let mut for_reading = ForReading::default();
        for pass in self.signals {
            for (reason, n_samples) in &pass.refused {
                let text = format!("{n_samples} samples of channel {} have no value: {reason}", pass.channel.name);
                for_reading.findings.push(text.clone());
                events.add(seconds_between(self.zero_host_ns, pass.refused_host_ns), "seal", "seal", None, text);
            }
            let Some(kept) = pass.kept else { continue };
            let (signal, whole_from_s, from_s) = kept.finish();
            let later = |a: Option<f64>, b: Option<f64>| a.into_iter().chain(b).reduce(f64::max);
            for_reading.whole_from_s = later(for_reading.whole_from_s, whole_from_s);
            for_reading.from_s = later(for_reading.from_s, from_s);
            for_reading.signals.push(signal);
        }
        for_reading
    }
}

impl<O: Copy> SignalPass<O> {
    fn new(channel: Channel) -> Self {
        let refused = BTreeMap::new();
        let (open, kept) = (None, None);
        Self { channel, open, kept, last_time_s: f64::NEG_INFINITY, refused, refused_host_ns: 0 }
    }

    fn refuse(&mut self, reason: String, n_samples: u64, host_ns: i64) {
        *self.refused.entry(reason).or_default() += n_samples;
        self.refused_host_ns = host_ns;
    }

    /// A block's part of the signal, or why it has none.
    fn part(
        &self,
        block: &Block,
        counts: &Counts,
        route: &Route,
        piece: &ClockPiece,
        zero_host_ns: i64,
    ) -> Result<Signal, String> {
        let time_s = |sample: u32| {
            let tick = block.first_tick.saturating_add(u64::from(sample) * u64::from(route.ticks_per_sample));
            (piece.host_ns(tick) - zero_host_ns as f64) * 1e-9 - route.group_delay_s
        };
        let times_s: Vec<f64> = (0..block.n_samples).map(time_s).collect();
        let arrived_s = block.host_ns.saturating_sub(zero_host_ns) as f64 * 1e-9;
        let far = |time_s: Option<&f64>| time_s.is_some_and(|time_s| (time_s - arrived_s).abs() > BELIEVED_WITHIN_S);
        if far(times_s.first()) || far(times_s.last()) {
            return Err("their ticks say that they were taken a minute or more away from their arrival".to_owned());
        }
        if times_s.first().is_some_and(|first_s| *first_s <= self.last_time_s) {
            return Err("their times do not move on from the block before".to_owned());
        }
        let part = match counts {
            Counts::Integer(counts) => {
                signal_from_counts(&self.channel, &route.sampling, times_s, counts.iter().map(|c| f64::from(*c)))
            }
            Counts::Float(counts) => {
                signal_from_counts(&self.channel, &route.sampling, times_s, counts.iter().map(|c| f64::from(*c)))
            }
        };
        let mut part = part.map_err(|error| error.to_string())?;
        part.range = self.saturation(&route.saturates).or(part.range);
        Ok(part)
    }

    /// Values at the counts where the device saturates, lower first; `None` where it states no range.
    fn saturation(&self, counts: &RangeInclusive<f64>) -> Option<(f64, f64)> {
        let ends = [*counts.start(), *counts.end()];
        if ends.iter().any(|counts| !counts.is_finite()) || ends[0] >= ends[1] {
            return None;
        }
        let [a, b] = ends.map(|counts| to_value(&self.channel.calibration, counts));
        Some((a.min(b), a.max(b)))
    }

    /// Hands a part on and adds it to what is kept; gives the number of samples.
    fn write(&mut self, sink: &mut impl ValueSink<Open = O>, part: Signal) -> Result<usize, TrialError> {
        let n_samples = part.time_s.len();
        self.last_time_s = part.time_s.last().copied().unwrap_or(self.last_time_s);
        match self.open {
            None => self.open = Some(sink.begin(&part)?),
            Some(open) => sink.append(open, &part.time_s, &part.value)?,
        }
        match &mut self.kept {
            None => self.kept = Some(KeptSamples::new(part)),
            Some(kept) => kept.extend(&part),
        }
        Ok(n_samples)
    }
}

fn rate_hz(description: &DeviceDescription, stream: &StreamDescription) -> f64 {
    description.tick_rate_hz / f64::from(stream.ticks_per_sample.max(1))
}

#[cfg(test)]
mod tests;
