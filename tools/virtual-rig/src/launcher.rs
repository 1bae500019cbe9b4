//! The numbers of a virtual launcher, as it really is (which is not always what its crew's rig file says).

use crate::physics::cord::{CordGroup, CordKind};
use crate::physics::gas::GasDrive;
use crate::physics::rubber::{ForceLaw, REFERENCE_TEMPERATURE_K};

/// Standard gravity, m/s² (3rd CGPM 1901).
pub const STANDARD_GRAVITY_MPS2: f64 = 9.80665;

/// Density of vulcanised natural rubber, kg/m³ (0.92 to 0.95 g/cm³ in rubber handbooks; from memory).
pub const RUBBER_DENSITY_KG_PER_M3: f64 = 930.0;

#[derive(Debug, Clone)]
pub struct Launcher {
    pub gravity_mps2: f64,
    pub incline_rad: f64,
    pub air_density_kg_per_m3: f64,
    /// Along the rail, positive against the launch.
    pub head_wind_mps: f64,
    /// Where the crew's cords come taut, from the release point.
    pub zero_mark_x_m: f64,
    /// The cords' fixed ends, rail frame.
    pub anchor_x_m: f64,
    pub shuttle: Shuttle,
    pub payload: Option<Payload>,
    pub cords: Vec<CordGroup>,
    /// What the force of all cords has been multiplied by: temperature, cycles, drawn and given factors.
    pub cord_force_factor: f64,
    pub gas: Option<GasDrive>,
    pub rail: RailBody,
    pub brake: Brake,
    pub hook: Hook,
    /// Where one cord of the first group breaks in the stroke.
    pub cord_breaks_x_m: Option<f64>,
}

#[derive(Debug, Clone, Copy)]
pub struct Shuttle {
    pub mass_kg: f64,
    pub drag_area_m2: f64,
    pub friction_running_n: f64,
    pub friction_static_n: f64,
}

#[derive(Debug, Clone, Copy)]
pub struct Payload {
    pub mass_kg: f64,
    pub drag_area_m2: f64,
    /// Up to here a latch keeps the payload on the shuttle; from here on it is only pushed.
    pub latch_opens_x_m: f64,
    /// Where the payload comes off its seat though it is still pushed.
    pub comes_off_x_m: Option<f64>,
}

/// The rail as a body of its own on a spring and a damper to the ground.
#[derive(Debug, Clone, Copy)]
pub struct RailBody {
    pub mass_kg: f64,
    pub stiffness_n_per_m: f64,
    pub damping_n_s_per_m: f64,
}

/// Brake pad with a linear run-in, damper beside it, and the stop at the end of the rail.
#[derive(Debug, Clone, Copy)]
pub struct Brake {
    pub x_m: f64,
    pub run_in_m: f64,
    pub pad_n: f64,
    pub damper_n_s_per_m: f64,
    pub stop_x_m: f64,
    pub stop_stiffness_n_per_m: f64,
    pub stop_damping_n_s_per_m: f64,
}

/// Release hook and line.
#[derive(Debug, Clone, Copy)]
pub struct Hook {
    /// Time in which the line's force falls to nothing (half a cosine).
    pub opening_s: f64,
    pub line_stiffness_n_per_m: f64,
    pub line_damping_n_s_per_m: f64,
}

impl Brake {
    /// Force of the pad at rail coordinate `x_m`.
    pub fn pad_force_n(&self, x_m: f64) -> f64 {
        self.pad_n * self.engaged(x_m)
    }

    /// 0 before the brake, 1 once it has run in.
    pub fn engaged(&self, x_m: f64) -> f64 {
        ((x_m - self.x_m) / self.run_in_m).clamp(0.0, 1.0)
    }
}

impl Launcher {
    /// Acceleration of gravity along the rail toward the release point, m/s².
    pub fn gravity_along_mps2(&self) -> f64 {
        self.gravity_mps2 * self.incline_rad.sin()
    }

    /// Stretch of a whole cord with the shuttle at `x_m`.
    pub fn stretch_at(&self, kind: &CordKind, x_m: f64) -> f64 {
        (self.anchor_x_m - x_m) / kind.free_length_m
    }

    pub fn payload_mass_kg(&self) -> f64 {
        self.payload.map_or(0.0, |payload| payload.mass_kg)
    }

    pub fn cord_count(&self) -> f64 {
        self.cords.iter().map(|group| group.count).sum()
    }

    /// The weight of shuttle and payload along the rail, N.
    pub fn weight_along_n(&self) -> f64 {
        (self.shuttle.mass_kg + self.payload_mass_kg()) * self.gravity_along_mps2()
    }

    /// Warms or cools the cords: rubber's force goes with its absolute temperature.
    pub fn set_cord_temperature(&mut self, temperature_k: f64) {
        self.scale_cords(temperature_k / REFERENCE_TEMPERATURE_K);
    }

    /// Mass of all cords.
    pub fn cord_mass_kg(&self) -> f64 {
        self.cords.iter().map(|group| group.count * group.kind.mass_kg).sum()
    }

    /// Multiplies the force of every cord.
    pub fn scale_cords(&mut self, factor: f64) {
        self.cord_force_factor *= factor;
        for group in &mut self.cords {
            group.kind.law = group.kind.law.scaled(factor);
        }
    }
}

/// Cross-section of one north-pier cord (13.4 mm round).
pub const NOMINAL_CORD_SECTION_M2: f64 = 140.0e-6;
pub const NOMINAL_CORD_FREE_LENGTH_M: f64 = 2.7;
pub const NOMINAL_CORD_COUNT: f64 = 6.0;
const N_CHAIN_MASSES: usize = 48;

/// The cord of rig north-pier.
pub fn nominal_cord() -> CordKind {
    let law = ForceLaw::rubber(NOMINAL_CORD_SECTION_M2, 1.0);
    CordKind {
        free_length_m: NOMINAL_CORD_FREE_LENGTH_M,
        mass_kg: RUBBER_DENSITY_KG_PER_M3 * NOMINAL_CORD_SECTION_M2 * NOMINAL_CORD_FREE_LENGTH_M,
        law,
        hysteresis: 0.06,
        turn_stretch: 0.08,
        relaxation: [(0.015, 2.0), (0.025, 25.0)],
        damping_n_s: 0.08,
        n_masses: N_CHAIN_MASSES,
    }
}

/// Rig north-pier with payload survey-8 (invented, plausible).
pub fn north_pier() -> Launcher {
    Launcher {
        gravity_mps2: 9.8146,
        incline_rad: 6.0_f64.to_radians(),
        air_density_kg_per_m3: 1.225,
        head_wind_mps: 0.0,
        zero_mark_x_m: 4.0,
        anchor_x_m: 4.0 + NOMINAL_CORD_FREE_LENGTH_M,
        shuttle: Shuttle { mass_kg: 2.4, drag_area_m2: 0.02, friction_running_n: 12.0, friction_static_n: 15.0 },
        payload: Some(survey_8()),
        cords: vec![CordGroup { count: NOMINAL_CORD_COUNT, kind: nominal_cord() }],
        cord_force_factor: 1.0,
        gas: None,
        rail: RailBody { mass_kg: 160.0, stiffness_n_per_m: 2.5e6, damping_n_s_per_m: 4.0e3 },
        brake: Brake {
            x_m: 5.0,
            run_in_m: 0.05,
            pad_n: 620.0,
            damper_n_s_per_m: 8.0,
            stop_x_m: 7.0,
            stop_stiffness_n_per_m: 2.0e5,
            stop_damping_n_s_per_m: 600.0,
        },
        hook: Hook { opening_s: 0.0015, line_stiffness_n_per_m: 6.0e4, line_damping_n_s_per_m: 300.0 },
        cord_breaks_x_m: None,
    }
}

/// The survey aircraft.
pub fn survey_8() -> Payload {
    Payload { mass_kg: 6.2, drag_area_m2: 0.050, latch_opens_x_m: 0.3, comes_off_x_m: None }
}
