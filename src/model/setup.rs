//! Everything one launch is computed from, as plain numbers; from a rig file by [`LaunchSetup::planned`] and
//! [`LaunchSetup::drawn`].

use super::cord::CordSet;
use super::gas::GasSource;
use crate::estimation::Curve;

/// A launch, ready to be computed. Angles in radians, x along the rail from the nominal release point.
#[derive(Debug, Clone, PartialEq)]
pub struct LaunchSetup {
    pub shuttle_mass_kg: f64,
    /// Zero where the shuttle runs alone.
    pub payload_mass_kg: f64,
    /// Where the shuttle is held.
    pub start_x_m: f64,
    pub rail_end_x_m: f64,
    pub incline_rad: f64,
    pub gravity_mps2: f64,
    pub air_density_kg_per_m3: f64,
    pub head_wind_mps: f64,
    pub payload_drag_area_m2: f64,
    pub shuttle_drag_area_m2: f64,
    pub cords: Vec<CordSet>,
    pub tables: Vec<ForceTable>,
    pub gas: Vec<GasSource>,
    pub losses: RailLosses,
    pub brake: Brake,
    pub recoil: Option<Recoil>,
    /// Payload's own thrust along the rail, N, against airspeed, m/s.
    pub thrust: Option<Curve>,
    /// Lift coefficient times area: lift takes load off the rail.
    pub lift_area_m2: f64,
    /// Place of a mechanical uncoupling; none where the payload is pushed and leaves when the push ends.
    pub uncouple_x_m: Option<f64>,
    /// Relative tolerance of the integration.
    pub relative_tolerance: f64,
}

/// Force on the shuttle against x, N, acting between the curve's first and last point.
#[derive(Debug, Clone, PartialEq)]
pub struct ForceTable {
    pub force_n: Curve,
}

/// Losses between shuttle and rail, all opposing motion.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct RailLosses {
    /// Constant.
    pub friction_n: f64,
    /// Times the load across the rail (weight less lift).
    pub load_coefficient: f64,
    /// Times the cords' pull (guides and pulleys that carry it).
    pub pull_coefficient: f64,
    pub viscous_n_per_mps: f64,
    /// Free form over x, N.
    pub along_x_n: Option<Curve>,
    /// Friction that must be overcome to start moving, where it is above the moving friction.
    pub breakaway_n: f64,
}

/// Force of the run-out brake on the shuttle, opposing motion, from `from_x_m` on.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Brake {
    pub from_x_m: f64,
    pub constant_n: f64,
    pub per_metre_n_per_m: f64,
    pub per_speed_n_per_mps: f64,
}

/// The rail on its own support: a mass on a spring along the rail's axis.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Recoil {
    /// Rail and everything fixed to it.
    pub mass_kg: f64,
    pub stiffness_n_per_m: f64,
    pub damping_n_per_mps: f64,
}

impl LaunchSetup {
    /// Nothing but a mass on a level rail in still, thin air: the start of a description, and of tests.
    pub fn bare(shuttle_mass_kg: f64, rail_end_x_m: f64) -> Self {
        Self {
            shuttle_mass_kg,
            payload_mass_kg: 0.0,
            start_x_m: 0.0,
            rail_end_x_m,
            incline_rad: 0.0,
            gravity_mps2: crate::units::STANDARD_GRAVITY_MPS2,
            air_density_kg_per_m3: 0.0,
            head_wind_mps: 0.0,
            payload_drag_area_m2: 0.0,
            shuttle_drag_area_m2: 0.0,
            cords: Vec::new(),
            tables: Vec::new(),
            gas: Vec::new(),
            losses: RailLosses::default(),
            brake: Brake { from_x_m: f64::INFINITY, constant_n: 0.0, per_metre_n_per_m: 0.0, per_speed_n_per_mps: 0.0 },
            recoil: None,
            thrust: None,
            lift_area_m2: 0.0,
            uncouple_x_m: None,
            relative_tolerance: ACCURATE,
        }
    }

    /// Along the rail, positive where the exit is higher, m/s².
    pub fn gravity_along_mps2(&self) -> f64 {
        self.gravity_mps2 * self.incline_rad.sin()
    }
}

/// Relative tolerance of a single launch.
pub const ACCURATE: f64 = 1e-10;
/// Relative tolerance where thousands are computed: launch speed still to 1e-5.
pub const FAST: f64 = 1e-6;
