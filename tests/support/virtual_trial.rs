//! A trial of the virtual rig as signals: its bytes decoded, its clocks fitted, its counts calibrated by the rig file.
//!
//! What the reading sees of it is exactly what sealing would hand it; the truth comes beside it and is never shown to it.

#![allow(dead_code, reason = "each test and tool uses its part")]
#![allow(clippy::expect_used, reason = "a test that cannot go on stops here")]

use std::path::Path;

use tautrail::calibration::{Sampling, Signal, signal_from_counts};
use tautrail::capture::{
    Block, Captured, ClockPiece, ClockSamples, Counts, DeviceDecoder, DeviceDescription, LeastSteps, piece_at,
};
use tautrail::rig::{Channel, Rig};
use virtual_rig::performance::{Options, Performance, prepare};
use virtual_rig::play::virtual_time::{Delivered, VirtualPlay};
use virtual_rig::truth::Truth;

/// The rehearsal's rig file.
pub fn rehearsal_rig() -> Rig {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal/north-pier.toml");
    let text = tautrail::rig::read_joined(&path).expect("the rehearsal's rig file reads");
    tautrail::rig::parse(&text).expect("it is a rig file")
}

/// What was measured, and what was true. Trial time is seconds since the scenario's zero.
#[derive(Debug)]
pub struct VirtualTrial {
    pub signals: Vec<Signal>,
    pub truth: Truth,
    /// ∫ T dx of the true release line up to the end of the hold.
    pub winch_work_j: f64,
    /// The motion as it truly was.
    pub performance: Performance,
}

impl VirtualTrial {
    /// Trial time of an instant of the truth log.
    pub fn event_s(&self, kind: &str) -> Option<f64> {
        self.truth.events.iter().find(|event| event.kind == kind).map(|event| event.t_s)
    }
}

#[derive(Default)]
struct Heard {
    description: Option<DeviceDescription>,
    blocks: Vec<Block>,
    steps: LeastSteps,
    clock: ClockSamples,
}

/// Plays a scenario in virtual time and measures it with the rig file's channels.
pub fn play(options: &Options, rig: &Rig) -> VirtualTrial {
    measured(prepare(options).expect("the scenario can be prepared"), rig)
}

/// Measures a performance with the rig file's channels.
pub fn measured(performance: Performance, rig: &Rig) -> VirtualTrial {
    let mut virtual_play = VirtualPlay::new(&performance).expect("descriptions fit a frame");
    let names: Vec<&str> = performance.devices.iter().map(|device| device.name).collect();
    let mut heard: Vec<Heard> = names.iter().map(|_| Heard::default()).collect();
    let decoder = |name: &&str| rig.devices.iter().find(|device| device.name == **name).map(DeviceDecoder::of);
    let mut decoders: Vec<DeviceDecoder> = names.iter().map(|name| decoder(name).unwrap_or_default()).collect();
    for delivery in &mut virtual_play {
        let delivery = delivery.expect("every block fits a frame");
        let device = &mut heard[delivery.device];
        match delivery.what {
            Delivered::TimeRequested { token } => device.clock.requested(delivery.host_ns, token),
            Delivered::Down => {
                decoders[delivery.device].link_lost(delivery.host_ns, &mut |captured| device.take(captured));
            }
            Delivered::Up => {}
            Delivered::Bytes(bytes) => {
                decoders[delivery.device].feed(delivery.host_ns, &bytes, &mut |captured| device.take(captured));
            }
        }
    }
    let zero_ns = virtual_play.scenario_zero_host_ns();
    let signals = rig.channels.iter().map(|channel| signal(channel, &names, &heard, zero_ns)).collect();
    let truth = virtual_play.truth();
    let hook_s = truth.events.iter().find(|event| event.kind == "hook-opens").map_or(f64::INFINITY, |event| event.t_s);
    let rows = performance.trajectory.rows.windows(2).take_while(|pair| pair[1].t_s <= hook_s);
    let winch_work_j = rows.map(|pair| 0.5 * (pair[0].line_n + pair[1].line_n) * (pair[0].x_m - pair[1].x_m)).sum();
    VirtualTrial { signals, truth, winch_work_j, performance }
}

impl Heard {
    fn take(&mut self, captured: Captured) {
        self.clock.captured(&captured);
        match captured {
            Captured::Description(description) => self.description = Some(description),
            Captured::Block(block) => {
                self.steps.take(&block);
                self.blocks.push(block);
            }
            _ => {}
        }
    }
}

fn signal(channel: &Channel, names: &[&str], heard: &[Heard], zero_ns: i64) -> Signal {
    let idx = names.iter().position(|name| *name == channel.device).expect("the rig file's device exists");
    let device = &heard[idx];
    let description = device.description.as_ref().expect("the device described itself");
    let stream = &description.streams[0];
    let place = stream.channels.iter().position(|c| c.name == channel.device_channel).expect("the channel exists");
    let described = &stream.channels[place];
    let pieces = device.clock.fit();
    let (mut time_s, mut counts) = (Vec::new(), Vec::new());
    for block in &device.blocks {
        let piece = piece_at(&pieces, block.boot_id, block.first_tick).expect("a clock map covers every block");
        for k in 0..u64::from(block.n_samples) {
            let tick = block.first_tick + k * u64::from(stream.ticks_per_sample);
            time_s.push((piece.host_ns(tick) - zero_ns as f64) * 1e-9 - described.group_delay_s);
        }
        match &block.counts[place] {
            Counts::Integer(values) => counts.extend(values.iter().map(|value| f64::from(*value))),
            Counts::Float(values) => counts.extend(values.iter().map(|value| f64::from(*value))),
        }
    }
    let sampling = Sampling {
        nominal_rate_hz: description.tick_rate_hz / f64::from(stream.ticks_per_sample),
        bandwidth_hz: described.bandwidth_hz,
        time_uncertainty_s: pieces.iter().map(|piece: &ClockPiece| piece.u_ns).fold(0.0, f64::max) * 1e-9,
        counts_range: None,
        count_step: device.steps.of(stream.stream, place),
    };
    signal_from_counts(channel, &sampling, time_s, counts.into_iter()).expect("every count has a value")
}
