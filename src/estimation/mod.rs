//! Least squares, covariance, propagation of uncertainty, statistics. Pure.
