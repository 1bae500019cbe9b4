//! Launch physics and forecast. Pure: no clock, no file, no randomness that was not passed in.
//!
//! [`LaunchSetup`] says what is launched, in plain numbers; [`simulate`] computes the whole event with its course, events
//! and energy; [`launch_answers`] the answers alone; [`released_now`] what a release at this instant would give. The cord
//! model is described in `cord.rs`, the equations in `system.rs`.

mod along;
mod check;
mod cord;
mod curve;
mod energy;
mod error;
mod event;
mod from_rig;
mod gas;
mod integrate;
mod march;
mod phases;
mod released_now;
mod run;
mod setup;
mod surroundings;
mod system;
mod targets;
#[cfg(test)]
mod tests;

pub use cord::{Branch, CordSet};
pub use curve::{Curve, CurveError, ValueSlope};
pub use energy::EnergySplit;
pub use error::ModelError;
pub use event::{Cost, Event, EventKind};
pub use from_rig::{hold_pull_band_n, planned_line_tension_n, stored_energy_j};
pub use gas::{GasPath, GasSource};
pub use released_now::{Interval, ReleaseForecast, released_now};
pub use run::{Answers, LaunchRun, Sample, Separation, launch_answers, simulate};
pub use setup::{ACCURATE, Brake, FAST, ForceTable, LaunchSetup, RailLosses, Recoil};
pub use surroundings::{AirError, local_gravity_mps2, moist_air_density_kg_per_m3, standard_air_density_kg_per_m3};
