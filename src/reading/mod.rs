//! Signals to results with uncertainties. Pure; takes signals, never files.

mod result;

pub use result::{Absent, Instant, Outcome, ResultRow};
