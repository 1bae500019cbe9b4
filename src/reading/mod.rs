//! Signals to results with uncertainties. Pure; takes signals, never files.
//!
//! Model-free and reproducible: the same signals and rig give the same reading. Every number carries its standard
//! uncertainty, its 95 % interval and the budget behind it; what cannot be had is absent with a reason.

mod apart;
mod arrest;
mod beside;
mod compare;
mod cords;
mod dynamics;
mod energy;
mod impulse;
mod launch;
mod motion;
mod others;
mod outcome;
mod overspeed;
mod peak;
mod phases;
mod read;
mod release;
mod result;
mod rows;
mod sensors;
mod series;
mod slips;
mod smoother;
mod stretch;
mod stroke;
#[cfg(test)]
pub(crate) mod synthetic;
mod table;
mod tension;
mod verdict;

pub use crate::estimation::{CfcError, CfcFilter, StartUp};
pub use beside::{Beside, Camera, EdgeSeen, Recorder};
pub use compare::{Compared, ComparedRow, Difference, SIGNIFICANT, compare};
pub use read::{read, read_beside};

pub use result::{Absent, BudgetTerm, Decision, EnergyAudit, Instant, Motion, Outcome, Reading, ResultRow, Verdict};
pub use table::TableError;
