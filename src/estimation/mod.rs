//! Least squares, covariance, propagation of uncertainty, statistics. Pure.

mod cfc;
mod distribution;
mod random;

pub use cfc::{CfcError, CfcFilter, StartUp};
pub use distribution::{Cholesky, Distribution, NotPositive};
pub use random::Random;
