//! Why a launch could not be computed.

use thiserror::Error;

use crate::estimation::{CurveError, NotPositive};

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum ModelError {
    #[error("{what} is {value} {unit}; it must be {must_be}")]
    Impossible { what: &'static str, value: f64, unit: &'static str, must_be: &'static str },
    #[error("cord set {set}: {source}")]
    CordCurve { set: usize, source: CurveError },
    #[error("{what}: {source}")]
    OtherCurve { what: &'static str, source: CurveError },
    #[error(
        "cord set {set}: the draw asks for {asked_percent:.1} % elongation and the cord was described up to \
         {known_percent:.1} %; draw less, or ask for extrapolation, which every result then says"
    )]
    BeyondCard { set: usize, asked_percent: f64, known_percent: f64 },
    #[error(
        "at x = {x_m:.3} m the pull of {pull_n:.1} N does not move the shuttle against {resistance_n:.1} N of weight and \
         friction; draw further or reduce the load"
    )]
    CannotMove { x_m: f64, pull_n: f64, resistance_n: f64 },
    #[error("a hold tension of {tension_n:.1} N at x = {x_m:.3} m leaves no pull in the cords")]
    NoPullAtHold { tension_n: f64, x_m: f64 },
    #[error("{n_sets} cord sets, {n_tables} tables: at most {max_sets} and {max_tables} can be computed together")]
    TooManySources { n_sets: usize, n_tables: usize, max_sets: usize, max_tables: usize },
    #[error("correlation with {name:?}: no uncertain input has that name, there are: {known}")]
    NoSuchInput { name: String, known: String },
    #[error(transparent)]
    Correlations(NotPositive),
    #[error("the integration stopped at t = {t_s:.6} s, x = {x_m:.4} m: the steps became too small for its tolerance")]
    StepTooSmall { t_s: f64, x_m: f64 },
}
