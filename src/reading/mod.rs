//! Signals to results with uncertainties. Pure; takes signals, never files.
//!
//! Model-free and reproducible: the same signals and rig give the same reading. Every number carries its standard
//! uncertainty, its 95 % interval and the budget behind it; what cannot be had is absent with a reason.

mod arrest;

mod energy;
mod launch;
mod motion;
mod outcome;
mod peak;
mod phases;
mod read;
mod release;
mod result;
mod rows;
mod sensors;
mod series;
mod smoother;
mod stroke;
#[cfg(test)]
pub(crate) mod synthetic;
mod tension;

pub use crate::estimation::{CfcError, CfcFilter, StartUp};
pub use read::read;
pub use result::{Absent, BudgetTerm, EnergyAudit, Instant, Motion, Outcome, Reading, ResultRow};
