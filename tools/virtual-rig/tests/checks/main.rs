//! The virtual rig against closed forms, published values, its own books and its own promises.

mod closed_forms;
mod cords;
mod device;
mod faults;
mod host;
mod performance;
mod pty;
mod scenarios;
mod sensors;
mod support;
