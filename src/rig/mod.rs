//! The rig file: what the crew has built, how it is measured, what is planned. Types, reading, diagnostics.

mod types;

pub use types::*;
