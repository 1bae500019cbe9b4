//! From what truly happens to counts: hidden scale and zero errors, delay and bandwidth, noise, quantisation, saturation.

use crate::draw::Draw;
use crate::faults::{FaultKind, Timed};
use crate::launcher::Launcher;
use crate::physics::trajectory::Row;
use firmware_protocol::Encoding;
use serde::Serialize;
use std::f64::consts::{PI, SQRT_2};

/// The truth behind a channel.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Quantity {
    LineTension,
    AnchorTension,
    LeftAnchorTension,
    RightAnchorTension,
    Position,
    SpecificForce,
    PayloadSpecificForce,
    ReservoirPressure,
    CylinderPressure,
}

impl Quantity {
    /// The word in descriptions.
    pub const fn word(self) -> &'static str {
        match self {
            Self::LineTension | Self::AnchorTension | Self::LeftAnchorTension | Self::RightAnchorTension => "force",
            Self::Position => "position",
            Self::SpecificForce | Self::PayloadSpecificForce => "acceleration",
            Self::ReservoirPressure | Self::CylinderPressure => "pressure",
        }
    }
}

/// Share of the cords' force that the left anchor takes.
pub const LEFT_SHARE: f64 = 0.51;

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
    pub zero_drift_per_s: f64,
    pub misalignment_rad: f64,
}

/// Errors of one channel, hidden from the crew: `indication = truth · (1 + scale_relative) + zero + zero_drift_per_s · t`
/// (t since boot); an accelerometer is turned out of the rail's direction by `misalignment_rad`.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Errors {
    pub scale_relative: f64,
    pub zero: f64,
    pub zero_drift_per_s: f64,
    pub misalignment_rad: f64,
}

impl Errors {
    pub fn drawn(spread: &Spread, draw: &mut Draw) -> Self {
        Self {
            scale_relative: draw.normal(spread.scale_relative),
            zero: draw.normal(spread.zero),
            zero_drift_per_s: draw.normal(spread.zero_drift_per_s),
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
    faults: Vec<Timed>,
    /// What a standing encoder shows.
    standing: Option<f64>,
}

impl Sensor {
    /// `noise` is drawn from for every sample.
    pub fn new(spec: ChannelSpec, errors: Errors, launcher: &Launcher, noise: Draw) -> Self {
        Self {
            spec,
            errors,
            faults: Vec::new(),
            standing: None,
            noise,
            filter: None,
            gravity_along_mps2: launcher.gravity_along_mps2(),
            gravity_across_mps2: launcher.gravity_mps2 * launcher.incline_rad.cos(),
        }
    }

    /// Adds the faults that concern this kind of sensor.
    pub fn with_faults(mut self, faults: &[Timed]) -> Self {
        let mine = |fault: &&Timed| matches!(fault.kind, FaultKind::EncoderSlip | FaultKind::EncoderDropout);
        if self.spec.quantity == Quantity::Position {
            self.faults = faults.iter().filter(mine).copied().collect();
        }
        self
    }

    /// Forgets the filter's past, as after a pause in sampling.
    pub fn restart(&mut self, rate_hz: f64) {
        self.filter =
            self.spec.bandwidth_hz.map(|bandwidth_hz| LowPass::new(bandwidth_hz, rate_hz * OVERSAMPLING as f64));
    }

    /// Counts of one sample, from the rig at the sample's instant and at the `OVERSAMPLING − 1` instants before it
    /// (earliest first).
    pub fn counts(&mut self, rows: &[Row; OVERSAMPLING], since_boot_s: f64) -> i32 {
        let mut value = self.felt(&rows[OVERSAMPLING - 1]);
        if let Some(filter) = &mut self.filter {
            let gravity = (self.gravity_along_mps2, self.gravity_across_mps2);
            for row in rows {
                value = filter.push(felt(self.spec.quantity, row, &self.errors, gravity));
            }
        }
        let errors = &self.errors;
        let zero = errors.zero + errors.zero_drift_per_s * since_boot_s;
        let indication = value * (1.0 + errors.scale_relative) + zero + self.noise.normal(self.spec.noise_rms);
        let counts = (indication / self.spec.scale + self.spec.zero_counts).round();
        let counts = self.glitched(counts, rows[OVERSAMPLING - 1].t_s);
        counts.clamp(-self.spec.counts_max, self.spec.counts_max) as i32
    }

    fn glitched(&mut self, counts: f64, t_s: f64) -> f64 {
        let slipped: f64 = self
            .faults
            .iter()
            .filter(|fault| fault.kind == FaultKind::EncoderSlip && t_s >= fault.from_s)
            .map(|fault| fault.value)
            .sum();
        let stands = self.faults.iter().any(|fault| fault.kind == FaultKind::EncoderDropout && fault.holds_at(t_s));
        self.standing = stands.then(|| self.standing.unwrap_or(counts + slipped));
        self.standing.unwrap_or(counts + slipped)
    }

    fn felt(&self, row: &Row) -> f64 {
        felt(self.spec.quantity, row, &self.errors, (self.gravity_along_mps2, self.gravity_across_mps2))
    }
}

/// What reaches the sensor before its electronics; `gravity` along and across the rail.
fn felt(quantity: Quantity, row: &Row, errors: &Errors, gravity: (f64, f64)) -> f64 {
    let turned = |a_mps2: f64| {
        let (sin, cos) = errors.misalignment_rad.sin_cos();
        (a_mps2 + gravity.0) * cos + gravity.1 * sin
    };
    match quantity {
        Quantity::LineTension => row.line_n,
        Quantity::AnchorTension => row.anchor_n,
        Quantity::LeftAnchorTension => LEFT_SHARE * row.anchor_n,
        Quantity::RightAnchorTension => (1.0 - LEFT_SHARE) * row.anchor_n,
        Quantity::Position => row.x_m,
        Quantity::SpecificForce => turned(row.shuttle_a_ground_mps2),
        Quantity::PayloadSpecificForce => turned(row.payload_a_ground_mps2),
        Quantity::ReservoirPressure => row.reservoir_pa,
        Quantity::CylinderPressure => row.cylinder_pa,
    }
}
