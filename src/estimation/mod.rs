//! Least squares, covariance, propagation of uncertainty, statistics. Pure.

mod cfc;
mod curve;
mod distribution;
mod dual;
mod linear;
mod nonlinear;
mod random;
mod savitzky_golay;
mod statistics;
#[cfg(test)]
mod testing;

pub use cfc::{CfcError, CfcFilter, LEAST_RATE_PER_CLASS, StartUp};
pub use curve::{Curve, CurveError, ValueSlope};
pub use distribution::{Cholesky, Distribution, NotPositive};
pub use dual::Dual;
pub use linear::{LinearError, LinearFit, Scatter, least_squares, polynomial, polynomial_row, propagated};
pub use nonlinear::{
    Bound, Exact, FitOptions, Loss, NonlinearError, NonlinearFit, Residuals, Stepped, Stop, fit_nonlinear,
};
pub use random::Random;
pub use savitzky_golay::savitzky_golay;
pub use statistics::{Component, RunningMean, chi_square_quantile, combined, coverage_factor, lag1_autocorrelation};
