//! From counts to values, with their standard uncertainty. Pure.

mod signal;

pub use signal::Signal;
