//! From counts to values, with their standard uncertainty; from bench readings to calibrations. Pure.
//!
//! The only road from raw counts to physical values. Samples are never dropped, filled or clipped here: what cannot be
//! converted is an error that says where.

pub mod accelerometer;
pub mod cell;
mod convert;
pub mod cord;
pub mod encoder;
mod settling;
mod signal;
mod standing;
mod table;
mod tare;
#[cfg(test)]
mod testing;
mod write;

pub use convert::{CalibrationError, Sampling, signal_from_counts, to_value, value_per_count, value_uncertainty};
pub use settling::{Settled, Settling, SettlingRule, Told};
pub use signal::Signal;
pub use standing::{doubts, on_day, out_of_range, said_of, zero_shift_uncertainty_n};
pub use table::{TableError, readings_from_csv, readings_to_csv};
pub use tare::{Level, NoTare, Tare, TareError, tare};
pub use write::{accelerometer_record, cell_record, encoder_record};
