//! A launcher rig that does not exist, for rehearsals and tests. Own physics, sensors, clocks, faults; own truth log.
//! Shares only `firmware-protocol` with Tautrail, so that a mistake in one cannot hide in the other.
//!
//! [`performance::prepare`] works a scenario out; [`play::pty`] plays it on ptys in real time, [`play::virtual_time`] as
//! a stream of reads in virtual time. Equations, numbers and the truth log's fields: README.md.

pub mod cfc;
pub mod cli;
pub mod clock;
pub mod device;
pub mod draw;
pub mod edges;
pub mod faults;
pub mod launcher;
pub mod line;
pub mod performance;
pub mod physics;
pub mod play;
pub mod scenario;
pub mod sensor;
pub mod sweep;
pub mod table;
pub mod truth;
pub mod weights;
