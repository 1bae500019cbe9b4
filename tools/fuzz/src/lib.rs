//! The pure rooms that read what comes from outside, compiled here by themselves: so the targets need no HDF5, and it
//! shows that these rooms import none of those above them.

#[path = "../../../src/capture/mod.rs"]
pub mod capture;
#[path = "../../../src/rig/mod.rs"]
pub mod rig;
#[path = "../../../src/units.rs"]
pub mod units;
