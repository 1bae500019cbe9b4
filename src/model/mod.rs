//! Launch physics and forecast. Pure: no clock, no file, no randomness that was not passed in.
//!
//! [`LaunchSetup`] says what is launched, in plain numbers; [`simulate`] computes the whole event with its course, events
//! and energy; [`launch_answers`] the answers alone; [`released_now`] what a release at this instant would give. The cord
//! model is described in `cord.rs`, the equations in `system.rs`.

mod along;
mod anchor;
mod bands;
mod cfc;
mod check;
mod cord;
mod draws;
mod energy;
mod energy_draws;
mod error;
mod event;
mod forecast;
mod from_rig;
mod gas;
mod inputs;
mod integrate;
mod interval;
mod loss_terms;
mod march;
mod passing;
mod phases;
mod propagation;
mod quantities;
mod relaxation;
mod released_now;
mod run;
mod setup;
mod solve;
mod system;
mod targets;
#[cfg(test)]
mod tests;

pub use crate::estimation::{Curve, CurveError, ValueSlope};
pub use bands::{Band, Bands};
pub use cfc::{CfcRatio, planned_peak_ratio};
pub use cord::{Branch, CordSet};
pub use energy::EnergySplit;
pub use energy_draws::ForecastedEnergy;
pub use error::ModelError;
pub use event::{Cost, Event, EventKind};
pub use forecast::{Forecast, ForecastOptions, Forecasted, Probabilities, forecast};
pub use from_rig::{hold_pull_band_n, planned_line_tension_n, stored_energy_j};
pub use gas::{GasPath, GasSource};
pub use inputs::{Input, Inputs, Known, Moved};
pub use interval::Interval;
pub use loss_terms::{BelongsTo, LossState, LossTerm, loss_terms, unfitted};
pub use passing::{Passing, passings};
pub use propagation::{Propagated, first_order};
pub use quantities::{LAUNCH_SPEED, LINE_TENSION, Outcome, PEAK_G, Quantity, evaluate};
pub use released_now::{ReleaseForecast, released_now};
pub use run::{
    Answers, LaunchRun, Sample, Separation, answers_to_rest, energy_at_separation, launch_answers, simulate,
};
pub use setup::{ACCURATE, Brake, FAST, ForceTable, LaunchSetup, RailLosses, Recoil};
pub use solve::{Candidate, Expected, Fit, Setting, Solution, solve, sweep};
