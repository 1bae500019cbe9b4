//! Linear least squares with covariance.
//!
//! By Householder QR of the column-scaled design matrix (G. H. Golub, Numerische Mathematik 7 (1965) 206-216; scaling: A.
//! van der Sluis, Numerische Mathematik 14 (1969) 14-23), never by normal equations: they lose twice the digits. The
//! covariance is R⁻¹R⁻ᵀ. Refused: rows that differ in length, numbers that are not finite, fewer readings than
//! parameters, a design whose columns do not differ within rounding (its singular values say so).

use nalgebra::{DMatrix, DVector};
use thiserror::Error;

/// Least share of the greatest singular value of the scaled design; below it double precision tells nothing apart.
const LEAST_SINGULAR_SHARE: f64 = 1e-13;

/// What is known of the readings' scatter.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Scatter<'a> {
    /// The same for all and unknown: taken from the residuals.
    Unknown,
    /// Known up to one factor, taken from the residuals: relative standard deviations, one a reading.
    Relative(&'a [f64]),
    /// Standard uncertainties, one a reading: the covariance is theirs alone, the residuals only test it.
    Known(&'a [f64]),
}

/// Why a linear fit can't be made.
#[derive(Debug, Clone, Copy, PartialEq, Error)]
#[non_exhaustive]
pub enum LinearError {
    #[error("{readings} readings can't give {parameters} parameters: take more readings or a simpler curve")]
    TooFew { readings: usize, parameters: usize },
    #[error("{what} {index} is not a finite number")]
    NotFinite { what: &'static str, index: usize },
    #[error("the scatter of reading {index} is {scatter}, it must be positive")]
    NoScatter { index: usize, scatter: f64 },
    #[error("{expected} readings have {found} {what}")]
    Lengths { what: &'static str, expected: usize, found: usize },
    #[error(
        "the readings do not tell the {parameters} parameters apart (condition number {condition:.1e}): spread them over more of the range or take a simpler curve"
    )]
    Inseparable { parameters: usize, condition: f64 },
}

/// Parameters with their covariance.
#[derive(Debug, Clone, PartialEq)]
pub struct LinearFit {
    pub parameters: Vec<f64>,
    /// Covariance of the parameters, row by row.
    pub covariance: Vec<Vec<f64>>,
    /// Reading minus fit, unweighted, in the readings' order.
    pub residuals: Vec<f64>,
    /// Sum of squares of the weighted residuals.
    pub sum_of_squares: f64,
    pub degrees_of_freedom: usize,
    /// √(sum of squares / degrees of freedom), zero without degrees of freedom; of the weighted residuals.
    pub residual_sd: f64,
    /// Of the column-scaled design matrix.
    pub condition: f64,
}

impl LinearFit {
    /// Standard uncertainty of a parameter.
    pub fn standard_uncertainty(&self, parameter: usize) -> f64 {
        self.covariance[parameter][parameter].max(0.0).sqrt()
    }

    /// Correlation coefficient of two parameters, zero where one of them has no uncertainty.
    pub fn correlation(&self, one: usize, other: usize) -> f64 {
        let product = self.standard_uncertainty(one) * self.standard_uncertainty(other);
        if product > 0.0 { self.covariance[one][other] / product } else { 0.0 }
    }

    /// The fitted value of a design row and its standard uncertainty (JCGM 100:2008, equation 13 and example H.3.4).
    pub fn predict(&self, row: &[f64]) -> (f64, f64) {
        let value = row.iter().zip(&self.parameters).map(|(factor, parameter)| factor * parameter).sum();
        (value, propagated(&self.covariance, row))
    }
}

/// Standard uncertainty of Σ cᵢxᵢ for the covariance of the x: √(cᵀ V c) (JCGM 100:2008, equation 13).
pub fn propagated(covariance: &[Vec<f64>], sensitivities: &[f64]) -> f64 {
    let variance: f64 = covariance
        .iter()
        .zip(sensitivities)
        .map(|(row, one)| one * row.iter().zip(sensitivities).map(|(entry, other)| entry * other).sum::<f64>())
        .sum();
    variance.max(0.0).sqrt()
}

/// 1, x, x², … as a design row.
pub fn polynomial_row(x: f64, degree: usize) -> Vec<f64> {
    std::iter::successors(Some(1.0), |power| Some(power * x)).take(degree + 1).collect()
}

/// The parameters p that make Σ ((y − row·p)/scatter)² least.
///
/// # Errors
/// [`LinearError`]: lengths, numbers, too few readings, or columns that can't be told apart.
pub fn least_squares(rows: &[Vec<f64>], y: &[f64], scatter: Scatter<'_>) -> Result<LinearFit, LinearError> {
    let weights = checked(rows, y, scatter)?;
    let parameters = rows.first().map_or(0, Vec::len);
    let weighted = DMatrix::from_fn(rows.len(), parameters, |i, j| rows[i][j] * weights[i]);
    let scales: Vec<f64> = weighted.column_iter().map(|column| column.norm()).collect();
    // A column without length, or one so long that the rest is lost beside it.
    if scales.iter().any(|scale| *scale == 0.0 || !scale.is_finite()) {
        return Err(LinearError::Inseparable { parameters, condition: f64::INFINITY });
    }
    let scaled = DMatrix::from_fn(rows.len(), parameters, |i, j| weighted[(i, j)] / scales[j]);
    let target = DVector::from_fn(rows.len(), |i, _| y[i] * weights[i]);
    let (solution, inverse, condition) = solve(scaled, &target)?;
    let solution: Vec<f64> = solution.iter().zip(&scales).map(|(value, scale)| value / scale).collect();
    let residuals: Vec<f64> = rows
        .iter()
        .zip(y)
        .map(|(row, y)| y - row.iter().zip(&solution).map(|(factor, value)| factor * value).sum::<f64>())
        .collect();
    let sum_of_squares: f64 =
        residuals.iter().zip(&weights).map(|(residual, weight)| (residual * weight).powi(2)).sum();
    let degrees_of_freedom = rows.len() - parameters;
    let variance = if degrees_of_freedom == 0 { 0.0 } else { sum_of_squares / degrees_of_freedom as f64 };
    let factor = if matches!(scatter, Scatter::Known(_)) { 1.0 } else { variance };
    let covariance = &inverse * inverse.transpose() * factor;
    let covariance = (0..parameters)
        .map(|i| (0..parameters).map(|j| covariance[(i, j)] / (scales[i] * scales[j])).collect())
        .collect();
    Ok(LinearFit {
        parameters: solution,
        covariance,
        residuals,
        sum_of_squares,
        degrees_of_freedom,
        residual_sd: variance.sqrt(),
        condition,
    })
}

/// A polynomial of a degree through (x, y).
///
/// # Errors
/// As [`least_squares`].
pub fn polynomial(x: &[f64], y: &[f64], degree: usize, scatter: Scatter<'_>) -> Result<LinearFit, LinearError> {
    let rows: Vec<Vec<f64>> = x.iter().map(|x| polynomial_row(*x, degree)).collect();
    least_squares(&rows, y, scatter)
}

/// Solution, R⁻¹ and condition number of a scaled problem.
fn solve(scaled: DMatrix<f64>, target: &DVector<f64>) -> Result<(DVector<f64>, DMatrix<f64>, f64), LinearError> {
    let parameters = scaled.ncols();
    let qr = scaled.qr();
    let triangle = qr.r();
    let singular = triangle.clone().singular_values();
    let condition = singular.max() / singular.min();
    let inseparable = LinearError::Inseparable { parameters, condition };
    if condition.is_nan() || condition * LEAST_SINGULAR_SHARE >= 1.0 {
        return Err(inseparable);
    }
    let mut rotated = target.clone();
    qr.q_tr_mul(&mut rotated);
    let head = rotated.rows(0, parameters).into_owned();
    let solution = triangle.solve_upper_triangular(&head).ok_or(inseparable)?;
    let inverse = triangle.solve_upper_triangular(&DMatrix::identity(parameters, parameters)).ok_or(inseparable)?;
    Ok((solution, inverse, condition))
}

/// The weights (one over the scatter) of readings that can be fitted.
fn checked(rows: &[Vec<f64>], y: &[f64], scatter: Scatter<'_>) -> Result<Vec<f64>, LinearError> {
    let readings = rows.len();
    let parameters = rows.first().map_or(0, Vec::len);
    let same = |what, found| {
        if found == readings { Ok(()) } else { Err(LinearError::Lengths { what, expected: readings, found }) }
    };
    same("values", y.len())?;
    if let Some(row) = rows.iter().find(|row| row.len() != parameters) {
        return Err(LinearError::Lengths { what: "factors in a row", expected: parameters, found: row.len() });
    }
    if parameters == 0 || readings < parameters {
        return Err(LinearError::TooFew { readings, parameters });
    }
    if let Some(index) = rows.iter().position(|row| row.iter().any(|factor| !factor.is_finite())) {
        return Err(LinearError::NotFinite { what: "the input of reading", index });
    }
    if let Some(index) = y.iter().position(|y| !y.is_finite()) {
        return Err(LinearError::NotFinite { what: "reading", index });
    }
    let (Scatter::Relative(scatter) | Scatter::Known(scatter)) = scatter else { return Ok(vec![1.0; readings]) };
    same("scatters", scatter.len())?;
    if let Some(index) = scatter.iter().position(|scatter| !(scatter.is_finite() && *scatter > 0.0)) {
        return Err(LinearError::NoScatter { index, scatter: scatter[index] });
    }
    Ok(scatter.iter().map(|scatter| 1.0 / scatter).collect())
}

#[cfg(test)]
mod tests;
