//! A launcher rig that does not exist, for rehearsals and tests. Own physics, sensors, clocks, faults; own truth log.
//! Shares only `firmware-protocol` with Tautrail, so that a mistake in one cannot hide in the other.

pub mod launcher;
pub mod physics;
