//! The rooms that read what comes from outside, compiled here by themselves: so the targets need no HDF5, and it
//! shows that these rooms import none of those above them. The journal speaks of a few types of the links' room.

#[path = "../../../src/capture/mod.rs"]
pub mod capture;
#[path = "../../../src/journal/mod.rs"]
pub mod journal;
pub mod link;
#[path = "../../../src/rig/mod.rs"]
pub mod rig;
#[path = "../../../src/units.rs"]
pub mod units;
