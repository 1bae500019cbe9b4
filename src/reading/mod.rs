//! Signals to results with uncertainties. Pure; takes signals, never files.

mod result;

pub use result::{Absent, BudgetTerm, EnergyAudit, Instant, Motion, Outcome, Reading, ResultRow};
