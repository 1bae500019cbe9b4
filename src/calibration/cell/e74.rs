//! Figures in the manner of ASTM E74: standard deviation from the fitted deflection, lower limit factor, choice of the degree.
//!
//! Formulas from memory, not checked against the standard's text; the factors' row for ten forces was confirmed.

use crate::estimation::{LinearError, Scatter, coverage_factor, polynomial};

/// Least lower limit of class A and AA over the lower limit factor (ASTM E74; remembered).
pub const CLASS_A_FACTOR: f64 = 400.0;
pub const CLASS_AA_FACTOR: f64 = 2000.0;

/// A polynomial of deflection over force.
#[derive(Debug, Clone, PartialEq)]
pub struct Deflection {
    /// From the constant term up, deflection per N^k.
    pub coefficients: Vec<f64>,
    /// √(Σd²/(n − m − 1)) over all readings, m the degree, in deflection.
    pub s_m: f64,
    /// 2.4 s_m, in deflection.
    pub lower_limit_factor: f64,
}

/// The fit and its lower limit factor.
///
/// # Errors
/// Too few readings for the degree, or loads that can't tell the powers apart.
pub fn deflection(force_n: &[f64], deflection: &[f64], degree: usize) -> Result<Deflection, LinearError> {
    let fit = polynomial(force_n, deflection, degree, Scatter::Unknown)?;
    Ok(Deflection { s_m: fit.residual_sd, lower_limit_factor: 2.4 * fit.residual_sd, coefficients: fit.parameters })
}

/// `C(n₁, m) = √(1 + (F₀.₉₇₅(1, n₁ − m − 1) − 1)/(n₁ − m))`: a degree is kept where it lowers s by more than this factor.
/// F's quantile with one degree of freedom in the numerator is the square of Student's two-sided t. Not a number where n₁ ≤ m + 1.
pub fn degree_factor(n_forces: usize, degree: usize) -> f64 {
    let Some(free) = n_forces.checked_sub(degree + 1).filter(|free| *free > 0) else { return f64::NAN };
    let t = coverage_factor(0.975, free as f64);
    (1.0 + (t * t - 1.0) / (n_forces - degree) as f64).sqrt()
}

/// The degree that the mean deflections of the forces justify, from the highest (at most 5) down to 2, else 1.
///
/// # Errors
/// Fewer forces than a straight line needs.
pub fn justified_degree(force_n: &[f64], mean_deflection: &[f64], highest: usize) -> Result<usize, LinearError> {
    let n_forces = force_n.len();
    let sd = |degree| polynomial(force_n, mean_deflection, degree, Scatter::Unknown).map(|fit| fit.residual_sd);
    sd(1)?;
    for degree in (2..=highest.min(5)).rev() {
        let factor = degree_factor(n_forces, degree);
        if factor.is_finite() && sd(degree - 1)? > factor * sd(degree)? {
            return Ok(degree);
        }
    }
    Ok(1)
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::calibration::testing::{number, reference_rows, reference_toml, table_numbers};

    /// The 30 increasing readings of tests/reference/iso376_example.csv (constructed, not published), loads in kN.
    fn readings() -> (Vec<f64>, Vec<f64>) {
        let rows = reference_rows("iso376_example.csv");
        [1, 3, 5].iter().flat_map(|column| rows.iter().map(|row| (row[0] / 1000.0, row[*column]))).unzip()
    }

    // tests/reference/astm_e74_example.toml: constructed example, recomputed with NumPy; formulas from memory; rel 1e-8.
    #[test]
    fn deviations_and_lower_limits_are_those_of_the_worked_example() {
        let (force_kn, deflections) = readings();
        let example = reference_toml("astm_e74_example.toml");
        for degree in 1..=5 {
            let expected = example[&format!("degree_{degree}")].as_table().unwrap();
            let found = deflection(&force_kn, &deflections, degree).unwrap();
            for (found, expected) in found.coefficients.iter().zip(table_numbers(expected, "coefficients")) {
                assert!((found - expected).abs() <= 1e-7 * expected.abs().max(1e-3), "{found} for {expected}");
            }
            for (found, key) in [(found.s_m, "s_m"), (found.lower_limit_factor, "llf_deflection")] {
                let expected = number(expected, key);
                assert!((found - expected).abs() <= 1e-8 * expected, "degree {degree} {key}: {found} for {expected}");
            }
        }
    }

    #[test]
    fn the_degree_that_the_forces_justify_is_that_of_the_worked_example() {
        let rows = reference_rows("iso376_example.csv");
        let (force_kn, means): (Vec<f64>, Vec<f64>) =
            rows.iter().map(|row| (row[0] / 1000.0, (row[1] + row[3] + row[5]) / 3.0)).unzip();
        let expected = reference_toml("astm_e74_example.toml")["degree_selection"].as_table().unwrap().clone();
        assert_eq!(
            justified_degree(&force_kn, &means, 5).unwrap() as i64,
            expected["selected_degree"].as_integer().unwrap()
        );
    }

    // tests/reference/astm_e74_degree_factors.csv (the row of ten forces also from memory of the standard's annex).
    #[test]
    fn degree_factors_are_those_of_the_table() {
        for row in reference_rows("astm_e74_degree_factors.csv") {
            for degree in 2..=5 {
                let found = degree_factor(row[0] as usize, degree);
                assert!((found - row[degree - 1]).abs() < 1e-6, "n {} m {degree}: {found}", row[0]);
            }
        }
        assert!(degree_factor(3, 2).is_nan());
    }
}
