//! The launch model beside a trial: residuals, and later fits, transfer, trends.
//!
//! Pure. The model starts from what the trial itself measured (hold tension and place at the release) and runs with the
//! rig file's masses, cords and losses; a residual is measured minus modelled, with the uncertainty of both sides.

mod course;
pub mod fit;
mod force;
mod replayed;
mod residual;
mod sentence;

pub use course::Course;
pub use replayed::{Replay, ReplayError, Start, replay};
pub use residual::{Residuals, Third};
