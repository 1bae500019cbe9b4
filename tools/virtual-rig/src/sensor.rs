//! From what truly happens to counts: hidden scale and zero errors, delay and bandwidth, noise, quantisation, saturation.

use crate::draw::{Draw, Purpose};
use crate::launcher::{Launcher, STANDARD_GRAVITY_MPS2};
use crate::physics::trajectory::Row;
use firmware_protocol::Encoding;
use serde::Serialize;
use std::f64::consts::{PI, SQRT_2};

/// The truth behind a channel.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Quantity {
    LineTension,
    AnchorTension,
    Position,
    SpecificForce,
}

/// A channel as its maker and its crew know it: `value = scale · (counts − zero_counts)`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ChannelSpec {
    pub name: &'static str,
    pub quantity: Quantity,
    pub encoding: Encoding,
    pub scale: f64,
    pub zero_counts: f64,
    pub counts_max: f64,
    pub bandwidth_hz: Option<f64>,
    /// In the unit of the value.
    pub noise_rms: f64,
    pub spread: Spread,
}

/// Standard deviations of the errors that a seed draws.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Spread {
    pub scale_relative: f64,
    /// In the unit of the value.
    pub zero: f64,
    pub misalignment_rad: f64,
}

/// Errors of one channel, hidden from the crew: `indication = truth · (1 + scale_relative) + zero`.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Errors {
    pub scale_relative: f64,
    pub zero: f64,
    pub misalignment_rad: f64,
}

impl Errors {
    pub fn drawn(spread: &Spread, draw: &mut Draw) -> Self {
        Self {
            scale_relative: draw.normal(spread.scale_relative),
            zero: draw.normal(spread.zero),
            misalignment_rad: draw.normal(spread.misalignment_rad),
        }
    }
}

impl ChannelSpec {
    /// By how much a sample is later than what it shows: delay of the two-pole filter at low frequency, s.
    pub fn group_delay_s(&self) -> f64 {
        self.bandwidth_hz.map_or(0.0, |bandwidth_hz| SQRT_2 / (2.0 * PI * bandwidth_hz))
    }
}

const CELL: ChannelSpec = ChannelSpec {
    name: "line",
    quantity: Quantity::LineTension,
    encoding: Encoding::I24,
    scale: 0.0005,
    zero_counts: 12_000.0,
    counts_max: 8_388_607.0,
    bandwidth_hz: Some(2000.0),
    noise_rms: 0.25,
    spread: Spread { scale_relative: 1e-3, zero: 0.5, misalignment_rad: 0.0 },
};

/// Channels of `winch-node`.
pub const WINCH_CHANNELS: [ChannelSpec; 2] =
    [CELL, ChannelSpec { name: "anchor", quantity: Quantity::AnchorTension, zero_counts: -8_000.0, ..CELL }];

/// Channels of `shuttle-node`.
pub const SHUTTLE_CHANNELS: [ChannelSpec; 2] = [
    ChannelSpec {
        name: "encoder",
        quantity: Quantity::Position,
        encoding: Encoding::I32,
        scale: 1e-4,
        zero_counts: 0.0,
        counts_max: 2_147_483_647.0,
        bandwidth_hz: None,
        noise_rms: 2e-5,
        spread: Spread { scale_relative: 5e-5, zero: 3e-4, misalignment_rad: 0.0 },
    },
    ChannelSpec {
        name: "accel",
        quantity: Quantity::SpecificForce,
        encoding: Encoding::I16,
        scale: STANDARD_GRAVITY_MPS2 / 800.0,
        zero_counts: 25.0,
        counts_max: 32_000.0,
        bandwidth_hz: Some(2000.0),
        noise_rms: 0.05 * STANDARD_GRAVITY_MPS2,
        spread: Spread { scale_relative: 3e-3, zero: 0.25, misalignment_rad: 0.0087 },
    },
];

/// Times that the filter runs faster than the channel is sampled.
pub const OVERSAMPLING: usize = 4;

/// Second-order Butterworth low pass by the bilinear transform (e.g. Oppenheim & Schafer, "Discrete-Time Signal
/// Processing", bilinear transformation), at rest at its first input.
#[derive(Debug, Clone)]
struct LowPass {
    gain: f64,
    feedback: [f64; 2],
    /// The last two inputs and outputs.
    past: Option<([f64; 2], [f64; 2])>,
}

impl LowPass {
    fn new(bandwidth_hz: f64, rate_hz: f64) -> Self {
        let w = (PI * bandwidth_hz / rate_hz).tan();
        let norm = 1.0 + SQRT_2 * w + w * w;
        Self {
            gain: w * w / norm,
            feedback: [2.0 * (w * w - 1.0) / norm, (1.0 - SQRT_2 * w + w * w) / norm],
            past: None,
        }
    }

    fn push(&mut self, input: f64) -> f64 {
        let (inputs, outputs) = self.past.unwrap_or(([input; 2], [input; 2]));
        let output = self.gain * (input + 2.0 * inputs[0] + inputs[1])
            - self.feedback[0] * outputs[0]
            - self.feedback[1] * outputs[1];
        self.past = Some(([input, inputs[0]], [output, outputs[0]]));
        output
    }
}

/// A channel at work.
#[derive(Debug, Clone)]
pub struct Sensor {
    pub spec: ChannelSpec,
    pub errors: Errors,
    noise: Draw,
    filter: Option<LowPass>,
    gravity_along_mps2: f64,
    gravity_across_mps2: f64,
}

impl Sensor {
    pub fn new(spec: ChannelSpec, errors: Errors, launcher: &Launcher, seed: u64, device: u8, channel: u8) -> Self {
        Self {
            spec,
            errors,
            noise: Draw::new(seed, Purpose::Noise { device, channel }),
            filter: None,
            gravity_along_mps2: launcher.gravity_along_mps2(),
            gravity_across_mps2: launcher.gravity_mps2 * launcher.incline_rad.cos(),
        }
    }

    /// Forgets the filter's past, as after a pause in sampling.
    pub fn restart(&mut self, rate_hz: f64) {
        self.filter =
            self.spec.bandwidth_hz.map(|bandwidth_hz| LowPass::new(bandwidth_hz, rate_hz * OVERSAMPLING as f64));
    }

    /// Counts of one sample, from the rig at the sample's instant and at the `OVERSAMPLING − 1` instants before it
    /// (earliest first).
    pub fn counts(&mut self, rows: &[Row; OVERSAMPLING]) -> i32 {
        let mut value = self.felt(&rows[OVERSAMPLING - 1]);
        if let Some(filter) = &mut self.filter {
            let gravity = (self.gravity_along_mps2, self.gravity_across_mps2);
            for row in rows {
                value = filter.push(felt(self.spec.quantity, row, &self.errors, gravity));
            }
        }
        let indication =
            value * (1.0 + self.errors.scale_relative) + self.errors.zero + self.noise.normal(self.spec.noise_rms);
        let counts = (indication / self.spec.scale + self.spec.zero_counts).round();
        counts.clamp(-self.spec.counts_max, self.spec.counts_max) as i32
    }

    fn felt(&self, row: &Row) -> f64 {
        felt(self.spec.quantity, row, &self.errors, (self.gravity_along_mps2, self.gravity_across_mps2))
    }
}

/// What reaches the sensor before its electronics; `gravity` along and across the rail.
fn felt(quantity: Quantity, row: &Row, errors: &Errors, gravity: (f64, f64)) -> f64 {
    match quantity {
        Quantity::LineTension => row.line_n,
        Quantity::AnchorTension => row.anchor_n,
        Quantity::Position => row.x_m,
        Quantity::SpecificForce => {
            let (sin, cos) = errors.misalignment_rad.sin_cos();
            (row.shuttle_a_ground_mps2 + gravity.0) * cos + gravity.1 * sin
        }
    }
}
