//! Nonlinear least squares: weights, bounds, a robust loss, covariance, and a reason for stopping.
//!
//! [`fit_nonlinear`] finds the parameters p that minimise Σ ρ(rᵢ(p)/uᵢ) by the Levenberg-Marquardt method of the
//! `levenberg-marquardt` crate (after J. J. Moré, *The Levenberg-Marquardt algorithm: implementation and theory*, Lecture
//! Notes in Mathematics 630, 1978). A fit is returned only where the residuals are orthogonal to what the parameters can do
//! (the relative offset of D. M. Bates, D. G. Watts, Technometrics 23 (1981) 179-183) and every parameter changes the
//! residuals at all; everything else is an error that says why. Nothing is returned from a plateau. A minimum may still be
//! a local one: no method for general models can tell.

mod bounds;
mod error;
mod fit;
mod residuals;
mod solver;
#[cfg(test)]
mod tests;

pub use bounds::Bound;
pub use error::NonlinearError;
pub use fit::{FitOptions, Loss, NonlinearFit, Stop, fit_nonlinear};
pub use residuals::{Exact, Residuals, Stepped};
