//! From readings of hanging or drawn cords to a cord card: both branches with their uncertainty, relaxation, hysteresis,
//! scatter between cords, factors of temperature and cycles.
//!
//! [`characterise`] is pure. Every reading is kept: one that stands far off is flagged and weighs little (Huber), none is
//! dropped. The law of a branch is chosen by its error at load steps left out of the fit; the straight line always takes
//! part, as a witness. Refused: readings out of order, too few or all alike, numbers that are none. What was not measured
//! (turning points, scatter of a single cord) is carried as an uncertainty and said.

mod branch;
mod characterise;
mod error;
mod factors;
mod hold;
mod law;
mod order;
mod spline;
#[cfg(test)]
mod tests;
mod turning;
mod write;

pub use branch::{BandPoint, BranchFit, Comparison};
pub use characterise::{Characterised, Flag, characterise};
pub use error::CordError;
pub use factors::{CycleFactor, Factors};
pub use hold::{Creep, Relaxation, held_part};
pub use law::{Fitted, LawKind, Point, fit_law};
pub use turning::TurningPoint;
pub use write::card_text;
