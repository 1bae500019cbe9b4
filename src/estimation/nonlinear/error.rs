//! Why there is no fit.

use thiserror::Error;

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum NonlinearError {
    #[error("{n_readings} readings can't determine {n_parameters} parameters: take more readings")]
    TooFewReadings { n_readings: usize, n_parameters: usize },
    #[error("{what} have {found} entries, {wanted} are needed")]
    WrongLength { what: &'static str, found: usize, wanted: usize },
    #[error("reading {reading} has no usable uncertainty ({found}): it must be a number above zero")]
    Uncertainty { reading: usize, found: f64 },
    #[error("parameter {parameter} starts at {found}, outside its bounds")]
    StartOutside { parameter: usize, found: f64 },
    #[error("the model gives no number for reading {reading} at the start: start nearer, or check the reading")]
    NotFiniteAtStart { reading: usize },
    #[error("no minimum after {evaluations} evaluations (relative offset {relative_offset:.1e}): start nearer")]
    OutOfPatience { evaluations: usize, relative_offset: f64 },
    #[error("stopped short of a minimum ({why}, relative offset {relative_offset:.1e}): start nearer")]
    NotAtMinimum { why: String, relative_offset: f64 },
    #[error("parameter {parameter} (at {value:.3e}) no longer changes the residuals: the fit ran off, start nearer")]
    RanOff { parameter: usize, value: f64 },
    #[error("the readings don't tell the parameters apart (condition {condition:.1e}, worst: parameter {parameter})")]
    Undetermined { parameter: usize, condition: f64 },
    #[error("the robust weights did not settle after {rounds} rounds")]
    WeightsUnsettled { rounds: usize },
}
