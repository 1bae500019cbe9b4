//! Tautrail: the crew's instrument for testing rail launchers of small unmanned aircraft.
//!
//! Rooms, lowest first; a room imports only from rooms above it in this list. DEVELOPERS.md is the map.

pub mod units;

pub mod rig;

pub mod estimation;

pub mod calibration;

pub mod model;

pub mod capture;

pub mod link;

pub mod journal;

pub mod trial;

pub mod reading;

pub mod replay;

pub mod archive;

pub mod live;

pub mod feed;

pub mod daemon;

pub mod watch;

pub mod report;
