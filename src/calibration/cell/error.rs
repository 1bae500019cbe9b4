//! Why readings can't calibrate a cell.

use thiserror::Error;

use crate::estimation::LinearError;
use crate::units::QuantityError;

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum CellError {
    #[error("{place}: direction {found:?} is not known: up (loading), down (unloading) or creep (held)")]
    Direction { place: String, found: String },
    #[error("{place}: the reading is not a number")]
    NotANumber { place: String },
    #[error(
        "{place}: {counts} counts are at the end of what the channel can read ({low} to {high}): it is saturated, take less load or gain"
    )]
    Saturated { place: String, counts: f64, low: f64, high: f64 },
    #[error("{place}: has no excitation_v, and the sheet wants readings as shares of the excitation")]
    NoExcitation { place: String },
    #[error(
        "{place}: has an excitation_v, and the sheet names no nominal one: add excitation_v to the sheet, or take it off"
    )]
    ExcitationUnasked { place: String },
    #[error("{place}: load: {source}")]
    Load { place: String, source: QuantityError },
    #[error("{place}: there is no mass {name:?} in the sheet, there are: {known}; \"0\" means no load")]
    UnknownMass { place: String, name: String, known: String },
    #[error("{place}: mass {name:?} hangs twice")]
    HungTwice { place: String, name: String },
    #[error(
        "{place}: {force_n:.2} N after {before_n:.2} N is no {wanted} step of run {run}: put the readings in the order in which they were taken"
    )]
    Order { place: String, run: String, force_n: f64, before_n: f64, wanted: &'static str },
    #[error("run {run} does not begin without load: read the zero first (load \"0\", direction up)")]
    NoZero { run: String },
    #[error(
        "{found} different loads over zero can't show a curve of power {degree}: hang at least {wanted} (two points fit anything)"
    )]
    TooFewLoads { found: usize, wanted: usize, degree: usize },
    #[error(
        "all readings are the same, {counts} counts, whatever hangs there: is the cell connected and the channel the right one?"
    )]
    AllEqual { counts: f64 },
    #[error("the fit: {0}")]
    Fit(#[from] LinearError),
    #[error(
        "the fitted curve turns round near {counts:.0} counts, within the tested range: choose a lower degree, look at the residuals"
    )]
    NotMonotonic { counts: f64 },
}
