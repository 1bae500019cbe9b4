//! From counts to values, with their standard uncertainty. Pure.
//!
//! The only road from raw counts to physical values. Samples are never dropped, filled or clipped here: what cannot be
//! converted is an error that says where.

mod convert;
mod signal;

pub use convert::{CalibrationError, Sampling, signal_from_counts, to_value, value_per_count, value_uncertainty};
pub use signal::Signal;
