//! Calibration of a force cell: readings under known loads to a curve, its figures and its uncertainty. Pure.
//!
//! Guarantees: no reading is dropped; what is far off is flagged and stays in the fit, which its uncertainty then shows.
//! Standards' figures are labelled by their manner; a class is named only where the series satisfies what is known of
//! the standard's rule.

pub mod e74;
mod error;
mod figures;
mod fit;
pub mod iso376;
mod loads;
mod manners;
mod uncertainty;

pub use error::CellError;
pub use figures::Figures;
pub use fit::{CellCalibration, Point, calibrate};
pub use loads::{Direction, Load, dead_weight_n};
pub use manners::{E74, Iso376, Manners};
pub use uncertainty::{Budget, Share, StepUncertainty};

#[cfg(test)]
mod tests;
