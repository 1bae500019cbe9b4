//! What a rig file says, in SI units. [`Rig`] holds only what passed every check.
//!
//! The rail coordinate x is zero at the nominal release point and grows toward the exit. *Draw* is the distance from
//! the zero mark (where the cords come taut) back to the shuttle: `draw = zero_mark_x_m - x`.

use std::f64::consts::PI;

use serde::Serialize;

use super::attached::Attached;
use super::details::Details;
use super::instrument::{SerialSettings, TextColumn, TextInstrument};
use super::record::CalibrationRecord;

/// A value and its standard uncertainty, both in the unit of the field's name.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Given {
    pub value: f64,
    pub standard_uncertainty: f64,
}

impl Given {
    pub const fn exactly(value: f64) -> Self {
        Self { value, standard_uncertainty: 0.0 }
    }
}

/// A whole rig: what was built, its sensors, its limits and the plan for the next trial.
#[derive(Debug, Clone, PartialEq)]
pub struct Rig {
    pub name: String,
    /// The data are made up, for rehearsals and tests; reports say so.
    pub invented: bool,
    pub site: Site,
    pub rail: Rail,
    pub shuttle: Shuttle,
    pub payload: Payload,
    pub cords: Cords,
    pub losses: Losses,
    /// What the file says beyond the simplest launcher.
    pub details: Details,
    pub limits: Limits,
    pub plan: Plan,
    pub devices: Vec<Device>,
    /// Channels with a calibration: the only ones that become signals.
    pub channels: Vec<Channel>,
    /// Channels without a calibration: recorded as counts, never shown as a value.
    pub uncalibrated: Vec<UncalibratedChannel>,
    /// The texts that the rig file points to, as far as they could be read.
    pub attached: Vec<Attached>,
    /// The text as it was read, with what it points to ([`join`](super::join)); kept whole in journal and trial file.
    pub text: String,
}

/// Where the rig stands: local gravity and air density follow from it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Site {
    pub latitude_rad: f64,
    pub altitude_m: f64,
    pub air_density_kg_per_m3: f64,
    /// Along the rail, positive against the launch.
    pub head_wind_mps: f64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Rail {
    /// From x = 0 to the stop at the end of the run-out.
    pub length_m: f64,
    /// Positive when the exit is higher than the release point.
    pub incline_rad: f64,
    /// x of the zero mark: cords slack toward the exit from here, taut before it.
    pub zero_mark_x_m: f64,
    /// x where the run-out brake begins to act on the shuttle.
    pub brake_x_m: f64,
    /// Mean braking force on the shuttle in the run-out.
    pub brake_force_n: f64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Shuttle {
    pub mass_kg: Given,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Payload {
    pub name: String,
    pub mass_kg: Given,
    /// Drag coefficient times reference area.
    pub drag_area_m2: Given,
}

/// One point of a cord's force against its elongation.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CordPoint {
    /// Extension over free length, dimensionless; 1.0 is 100 %.
    pub elongation: f64,
    /// Of one cord.
    pub tension_n: f64,
}

/// Equal cords side by side, described in the rig file itself.
#[derive(Debug, Clone, PartialEq)]
pub struct Cords {
    pub count: u32,
    pub free_length_m: f64,
    /// Of one cord.
    pub mass_kg: f64,
    /// Cord extension per metre of shuttle travel (1 where cords pull the shuttle directly).
    pub travel_ratio: f64,
    /// Force on release (unloading), increasing elongation, starting at (0, 0).
    pub curve: Vec<CordPoint>,
    /// Relative standard uncertainty of the curve's force.
    pub force_relative_uncertainty: f64,
}

/// Losses along the rail, on the moving shuttle.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Losses {
    /// Constant friction, opposing motion.
    pub friction_n: Given,
    /// Drag area of the shuttle alone.
    pub shuttle_drag_area_m2: Given,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Limits {
    /// Of the whole launcher, at the release line.
    pub tension_n: f64,
    /// Specific force along the rail at the payload, CFC 60, in multiples of 9.80665 m/s².
    pub peak_g: f64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Plan {
    /// Draw to stop the winch at.
    pub draw_m: f64,
    /// Window that the launch speed must meet.
    pub launch_speed_min_mps: f64,
    pub launch_speed_max_mps: f64,
    /// Below this the release line counts as slack.
    pub slack_tension_n: f64,
    /// Half-width of the band around the planned tension, at every draw, as a share of the planned pull at full draw.
    pub tension_band_relative: f64,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Device {
    pub name: String,
    /// Path of the serial port; stable names (`/dev/serial/by-id/…`) are advised.
    pub port: String,
    pub baud: u32,
    pub serial: SerialSettings,
    pub protocol: Protocol,
}

/// How a device speaks.
#[derive(Debug, Clone, PartialEq)]
#[non_exhaustive]
pub enum Protocol {
    /// Frames of `firmware-protocol`.
    Frames,
    /// A reading a line.
    Text(Box<TextInstrument>),
}

impl Device {
    /// The column that a text instrument prints under this name.
    pub fn text_column(&self, name: &str) -> Option<&TextColumn> {
        let Protocol::Text(instrument) = &self.protocol else { return None };
        instrument.columns.iter().find(|column| column.name == name)
    }
}

/// A measured quantity: where it comes from, what it means, how counts become a value.
#[derive(Debug, Clone, PartialEq)]
pub struct Channel {
    /// The signal's name in trial files and on screens.
    pub name: String,
    /// Name of the device in this rig file.
    pub device: String,
    /// Name of the channel in the device's own description.
    pub device_channel: String,
    pub role: Role,
    pub calibration: Coefficients,
    /// What the calibration comes from; none where the rig file itself states the coefficients.
    pub record: Option<CalibrationRecord>,
}

/// A channel that is named in the rig file but has no calibration yet.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct UncalibratedChannel {
    pub name: String,
    pub device: String,
    pub device_channel: String,
    pub role: Role,
}

/// What a channel measures.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Hash)]
#[non_exhaustive]
pub enum Role {
    /// Tension of the whole launcher in the line that holds the shuttle, N.
    ReleaseLineTension,
    /// Tension of the whole launcher at the cords' fixed end, N.
    CordAnchorTension,
    /// Tension at the anchor left of the rail, seen toward the exit, N.
    LeftAnchorTension,
    /// Tension at the anchor right of it, N.
    RightAnchorTension,
    /// x of the shuttle along the rail, in the rail's frame, m.
    ShuttlePosition,
    /// Specific force along the rail at the shuttle (a + g sin θ), m/s².
    ShuttleSpecificForce,
}

impl Role {
    pub const ALL: [Self; 6] = [
        Self::ReleaseLineTension,
        Self::CordAnchorTension,
        Self::LeftAnchorTension,
        Self::RightAnchorTension,
        Self::ShuttlePosition,
        Self::ShuttleSpecificForce,
    ];

    /// The word used in rig files, trial files and the feed.
    pub const fn word(self) -> &'static str {
        match self {
            Self::ReleaseLineTension => "release_line_tension",
            Self::CordAnchorTension => "cord_anchor_tension",
            Self::LeftAnchorTension => "left_anchor_tension",
            Self::RightAnchorTension => "right_anchor_tension",
            Self::ShuttlePosition => "shuttle_position",
            Self::ShuttleSpecificForce => "shuttle_specific_force",
        }
    }

    /// Whether the role is one of the cells that tell if the cords are loaded.
    pub const fn is_tension(self) -> bool {
        matches!(
            self,
            Self::ReleaseLineTension | Self::CordAnchorTension | Self::LeftAnchorTension | Self::RightAnchorTension
        )
    }

    /// Whether a rig is usual without it: its absence needs no word.
    pub const fn is_extra(self) -> bool {
        matches!(self, Self::LeftAnchorTension | Self::RightAnchorTension)
    }

    /// The SI unit of the role's values.
    pub const fn unit(self) -> &'static str {
        match self {
            Self::ReleaseLineTension | Self::CordAnchorTension | Self::LeftAnchorTension | Self::RightAnchorTension => {
                "N"
            }
            Self::ShuttlePosition => "m",
            Self::ShuttleSpecificForce => "m/s^2",
        }
    }
}

/// Counts to values: `value = Σ coefficients[k] · (counts − zero_counts)^k`, k from 0.
#[derive(Debug, Clone, PartialEq)]
pub struct Coefficients {
    pub zero_counts: f64,
    /// From the constant term up, in the role's unit per count^k; at most cubic.
    pub coefficients: Vec<f64>,
    /// Standard uncertainty of the zero, in the role's unit.
    pub zero_uncertainty: f64,
    /// Relative standard uncertainty of the scale.
    pub scale_relative_uncertainty: f64,
}

impl Cords {
    /// A launcher that is pulled by something else.
    pub const fn none() -> Self {
        Self {
            count: 0,
            free_length_m: 1.0,
            mass_kg: 0.0,
            travel_ratio: 1.0,
            curve: Vec::new(),
            force_relative_uncertainty: 0.0,
        }
    }
}

impl Rig {
    /// Draw at rail coordinate `x_m`, negative once the shuttle is past the zero mark.
    pub fn draw_m(&self, x_m: f64) -> f64 {
        self.rail.zero_mark_x_m - x_m
    }

    /// Mass that moves together until separation, the cords apart.
    pub fn moving_mass_kg(&self) -> f64 {
        self.shuttle.mass_kg.value + self.payload.mass_kg.value
    }

    pub fn channel_with_role(&self, role: Role) -> Option<&Channel> {
        self.channels.iter().find(|channel| channel.role == role)
    }

    pub fn incline_deg(&self) -> f64 {
        self.rail.incline_rad * 180.0 / PI
    }
}
