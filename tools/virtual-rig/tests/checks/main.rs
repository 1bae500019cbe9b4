//! The virtual rig against closed forms, published values, its own books and its own promises.

mod closed_forms;
mod cords;
mod performance;
mod sensors;
mod support;
