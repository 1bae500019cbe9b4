//! The devices of the rig and their channels, as their makers and the crew know them.

use crate::launcher::STANDARD_GRAVITY_MPS2;
use crate::sensor::{ChannelSpec, Quantity, Spread};
use firmware_protocol::Encoding;

/// The parts of a device that never change.
#[derive(Debug, Clone, Copy)]
pub struct DeviceSpec {
    pub device_id: u64,
    pub name: &'static str,
    pub channels: &'static [ChannelSpec],
    /// 0 for a device that samples nothing.
    pub ticks_per_sample: u32,
    pub samples_per_block: u16,
    /// The release pin and the beam gates end here.
    pub has_inputs: bool,
    /// For a device that prints lines instead of sending frames.
    pub text: Option<TextSpec>,
}

/// What a text device listens to and prints.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct TextSpec {
    pub style: TextStyle,
    pub start: Option<&'static str>,
    pub poll: Option<&'static str>,
    /// With its line end.
    pub header: Option<&'static str>,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum TextStyle {
    /// `ST,+   12.34 kg`
    Indicator,
    /// `+00012.3`, newtons
    Polled,
    /// `1234567,4000.0,0.0123`: microseconds of 32 bits, millimetres, g
    Board,
}

/// Which devices there are.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum SensorSet {
    /// `winch-node` and `shuttle-node`, as in the rig file of north-pier.
    #[default]
    Basic,
    /// Also cells at the left and right anchor, a recorder on the payload, release pin and beam gates, gas pressure.
    Full,
    /// All of it printed as text: a hold indicator of 80 readings a second, a polled anchor display, a hobby board on the
    /// shuttle with a time of its own.
    Text,
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
    spread: Spread { scale_relative: 1e-3, zero: 0.5, zero_drift_per_s: 0.003, misalignment_rad: 0.0 },
};

/// Channels of `winch-node`.
pub const WINCH_CHANNELS: [ChannelSpec; 2] =
    [CELL, ChannelSpec { name: "anchor", quantity: Quantity::AnchorTension, zero_counts: -8_000.0, ..CELL }];

const ACCELEROMETER: ChannelSpec = ChannelSpec {
    name: "accel",
    quantity: Quantity::SpecificForce,
    encoding: Encoding::I16,
    scale: STANDARD_GRAVITY_MPS2 / 800.0,
    zero_counts: 25.0,
    counts_max: 32_000.0,
    bandwidth_hz: Some(2000.0),
    noise_rms: 0.05 * STANDARD_GRAVITY_MPS2,
    spread: Spread { scale_relative: 3e-3, zero: 0.25, zero_drift_per_s: 0.0, misalignment_rad: 0.0087 },
};

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
        spread: Spread { scale_relative: 5e-5, zero: 3e-4, zero_drift_per_s: 0.0, misalignment_rad: 0.0 },
    },
    ACCELEROMETER,
];

const ANCHOR_CHANNELS: [ChannelSpec; 2] = [
    ChannelSpec { name: "left", quantity: Quantity::LeftAnchorTension, zero_counts: 4_000.0, ..CELL },
    ChannelSpec { name: "right", quantity: Quantity::RightAnchorTension, zero_counts: -2_500.0, ..CELL },
];

const PAYLOAD_CHANNELS: [ChannelSpec; 1] = [ChannelSpec {
    quantity: Quantity::PayloadSpecificForce,
    zero_counts: -40.0,
    bandwidth_hz: Some(800.0),
    noise_rms: 0.02 * STANDARD_GRAVITY_MPS2,
    ..ACCELEROMETER
}];

/// Absolute pressure in Pa, sent as a number.
const PRESSURE: ChannelSpec = ChannelSpec {
    name: "reservoir",
    quantity: Quantity::ReservoirPressure,
    encoding: Encoding::F32,
    scale: 1.0,
    zero_counts: 0.0,
    counts_max: 1.0e6,
    bandwidth_hz: Some(500.0),
    noise_rms: 150.0,
    spread: Spread { scale_relative: 2e-3, zero: 500.0, zero_drift_per_s: 0.0, misalignment_rad: 0.0 },
};

const GAS_CHANNELS: [ChannelSpec; 2] =
    [PRESSURE, ChannelSpec { name: "cylinder", quantity: Quantity::CylinderPressure, ..PRESSURE }];

const WINCH_NODE: DeviceSpec = DeviceSpec {
    device_id: 0x5741_0001,
    name: "winch-node",
    channels: &WINCH_CHANNELS,
    ticks_per_sample: 100,
    samples_per_block: 100,
    has_inputs: false,
    text: None,
};
const SHUTTLE_NODE: DeviceSpec =
    DeviceSpec { device_id: 0x5348_0001, name: "shuttle-node", channels: &SHUTTLE_CHANNELS, ..WINCH_NODE };
const ANCHOR_NODE: DeviceSpec =
    DeviceSpec { device_id: 0x414E_0001, name: "anchor-node", channels: &ANCHOR_CHANNELS, ..WINCH_NODE };
const PAYLOAD_NODE: DeviceSpec = DeviceSpec {
    device_id: 0x5041_0001,
    name: "payload-node",
    channels: &PAYLOAD_CHANNELS,
    ticks_per_sample: 200,
    samples_per_block: 50,
    has_inputs: false,
    text: None,
};
const GATE_NODE: DeviceSpec = DeviceSpec {
    device_id: 0x4741_0001,
    name: "gate-node",
    channels: &[],
    ticks_per_sample: 0,
    samples_per_block: 0,
    has_inputs: true,
    text: None,
};
const GAS_NODE: DeviceSpec = DeviceSpec {
    device_id: 0x4753_0001,
    name: "gas-node",
    channels: &GAS_CHANNELS,
    ticks_per_sample: 500,
    samples_per_block: 20,
    has_inputs: false,
    text: None,
};

/// A load-cell indicator: 0.01 kgf a digit, filtered to 20 Hz.
const INDICATOR_CHANNELS: [ChannelSpec; 1] = [ChannelSpec {
    name: "force",
    encoding: Encoding::I32,
    scale: 0.01 * STANDARD_GRAVITY_MPS2,
    zero_counts: 0.0,
    bandwidth_hz: Some(20.0),
    noise_rms: 0.1,
    ..CELL
}];
const DISPLAY_CHANNELS: [ChannelSpec; 1] =
    [ChannelSpec { quantity: Quantity::AnchorTension, scale: 0.1, bandwidth_hz: Some(5.0), ..INDICATOR_CHANNELS[0] }];
const BOARD_CHANNELS: [ChannelSpec; 2] = [
    ChannelSpec { name: "position", ..SHUTTLE_CHANNELS[0] },
    ChannelSpec {
        encoding: Encoding::I32,
        scale: 1e-4 * STANDARD_GRAVITY_MPS2,
        zero_counts: 0.0,
        counts_max: 400_000.0,
        bandwidth_hz: Some(120.0),
        ..ACCELEROMETER
    },
];

const HOLD_DISPLAY: DeviceSpec = DeviceSpec {
    device_id: 0,
    name: "hold-display",
    channels: &INDICATOR_CHANNELS,
    ticks_per_sample: 12_500,
    samples_per_block: 1,
    has_inputs: false,
    text: Some(TextSpec { style: TextStyle::Indicator, start: Some("RUN"), poll: None, header: None }),
};
const ANCHOR_DISPLAY: DeviceSpec = DeviceSpec {
    name: "anchor-display",
    channels: &DISPLAY_CHANNELS,
    ticks_per_sample: 25_000,
    text: Some(TextSpec { style: TextStyle::Polled, start: None, poll: Some("P"), header: None }),
    ..HOLD_DISPLAY
};
const SHUTTLE_BOARD: DeviceSpec = DeviceSpec {
    name: "shuttle-board",
    channels: &BOARD_CHANNELS,
    ticks_per_sample: 2_000,
    text: Some(TextSpec {
        style: TextStyle::Board,
        start: Some("GO"),
        poll: None,
        header: Some("us,position_mm,accel_g\r\n"),
    }),
    ..HOLD_DISPLAY
};

/// The devices of the basic set, in the order of all lists.
pub const DEVICES: [DeviceSpec; 2] = [WINCH_NODE, SHUTTLE_NODE];

/// The devices of a rig, in the order of all lists.
pub fn devices(set: SensorSet, with_gas: bool) -> Vec<DeviceSpec> {
    if set == SensorSet::Text {
        return vec![HOLD_DISPLAY, ANCHOR_DISPLAY, SHUTTLE_BOARD];
    }
    let mut devices = DEVICES.to_vec();
    if set == SensorSet::Full {
        devices.extend([ANCHOR_NODE, PAYLOAD_NODE, GATE_NODE]);
        devices.extend(with_gas.then_some(GAS_NODE));
    }
    devices
}
