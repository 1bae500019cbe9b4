use proptest::prelude::*;

use super::*;
use crate::estimation::testing::{number, numbers, reference_rows, reference_toml};

fn near(found: f64, expected: f64, relative: f64, what: &str) {
    assert!((found - expected).abs() <= relative * expected.abs(), "{what}: {found:e} for {expected:e}");
}

/// A NIST StRD polynomial set against its certified values.
fn certified_polynomial(name: &str, relative: f64) -> (LinearFit, toml::Table) {
    let rows = reference_rows(&format!("nist_strd_linear/{name}.csv"));
    let (x, y): (Vec<f64>, Vec<f64>) = rows.iter().map(|row| (row[0], row[1])).unzip();
    let certified = reference_toml("nist_strd_linear/certified.toml")[name].as_table().unwrap().clone();
    let fit = polynomial(&x, &y, certified["degree"].as_integer().unwrap() as usize, Scatter::Unknown).unwrap();
    assert_eq!(fit.degrees_of_freedom as i64, certified["dof"].as_integer().unwrap());
    against(&fit, &certified, relative);
    (fit, certified)
}

fn against(fit: &LinearFit, certified: &toml::Table, relative: f64) {
    for (at, expected) in numbers(certified, "certified").into_iter().enumerate() {
        near(fit.parameters[at], expected, relative, "parameter");
        let sd = numbers(certified, "certified_sd")[at];
        if sd > 0.0 {
            near(fit.standard_uncertainty(at), sd, relative, "standard deviation");
        }
    }
    let sd = number(certified, "certified_residual_sd");
    if sd > 0.0 {
        near(fit.residual_sd, sd, relative, "residual sd");
    }
}

// NIST/ITL Statistical Reference Datasets, linear regression; tolerances of the copies' notes.
#[test]
fn a_straight_line_calibration_is_as_certified() {
    let (fit, certified) = certified_polynomial("norris", 1e-9);
    near(fit.sum_of_squares, number(&certified, "certified_rss"), 1e-9, "sum of squares");
}

#[test]
fn a_load_cell_calibration_is_as_certified() {
    let (fit, certified) = certified_polynomial("pontius", 1e-9);
    near(fit.sum_of_squares, number(&certified, "certified_rss"), 1e-9, "sum of squares");
}

#[test]
fn ill_conditioned_polynomials_are_as_certified() {
    certified_polynomial("wampler1", 1e-7);
    certified_polynomial("wampler2", 1e-7);
    certified_polynomial("wampler3", 1e-7);
    certified_polynomial("wampler4", 1e-6);
}

#[test]
fn nearly_collinear_columns_are_as_certified() {
    let data = reference_rows("nist_strd_linear/longley.csv");
    let y: Vec<f64> = data.iter().map(|row| row[0]).collect();
    let rows: Vec<Vec<f64>> =
        data.iter().map(|row| std::iter::once(1.0).chain(row[1..].iter().copied()).collect()).collect();
    let fit = least_squares(&rows, &y, Scatter::Unknown).unwrap();
    against(&fit, reference_toml("nist_strd_linear/certified.toml")["longley"].as_table().unwrap(), 1e-7);
}

// JCGM 100:2008 (GUM), example H.3: a thermometer's calibration line, its covariance and a prediction.
#[test]
fn the_calibration_line_of_the_guide_is_found() {
    let data = reference_rows("gum_h3_data.csv");
    let (x, y): (Vec<f64>, Vec<f64>) = data.iter().map(|row| (row[0] - 20.0, row[1])).unzip();
    let fit = polynomial(&x, &y, 1, Scatter::Unknown).unwrap();
    let (at_30, uncertainty) = fit.predict(&polynomial_row(10.0, 1));
    let found = [
        ("y1", fit.parameters[0], 5e-5),
        ("y2", fit.parameters[1], 5e-6),
        ("u_y1", fit.standard_uncertainty(0), 5e-5),
        ("u_y2", fit.standard_uncertainty(1), 5e-6),
        ("r", fit.correlation(0, 1), 5e-3),
        ("s", fit.residual_sd, 5e-5),
        ("b30", at_30, 5e-5),
        ("u_b30", uncertainty, 5e-5),
    ];
    let results = reference_toml("gum_h3_results.toml");
    let (published, recomputed) = (results["published"].as_table().unwrap(), results["recomputed"].as_table().unwrap());
    for (key, value, half_a_digit) in found {
        assert!((value - number(published, key)).abs() <= half_a_digit, "{key}: {value}");
        near(value, number(recomputed, key), 1e-10, key);
    }
    assert_eq!(fit.degrees_of_freedom, 9);
}

#[test]
fn weights_of_a_known_scatter_are_not_rescaled_by_the_residuals() {
    // A weighted mean: Σ(y/u²)/Σ(1/u²) = (1/1 + 3/4 + 2/1) / 2.25 = 1.6667, u = 1/√2.25.
    let rows = vec![vec![1.0]; 3];
    let (y, scatter) = ([1.0, 3.0, 2.0], [1.0, 2.0, 1.0]);
    let known = least_squares(&rows, &y, Scatter::Known(&scatter)).unwrap();
    near(known.parameters[0], 3.75 / 2.25, 1e-14, "mean");
    near(known.standard_uncertainty(0), 1.0 / 1.5, 1e-14, "known");
    let relative = least_squares(&rows, &y, Scatter::Relative(&scatter)).unwrap();
    near(relative.standard_uncertainty(0), relative.residual_sd / 1.5, 1e-14, "relative");
}

#[test]
fn what_can_not_be_fitted_is_refused_with_its_place() {
    let fit = |x: &[f64], y: &[f64]| polynomial(x, y, 1, Scatter::Unknown);
    let said = |result: Result<LinearFit, LinearError>| result.expect_err("must be refused").to_string();
    assert_eq!(said(fit(&[1.0], &[1.0])), "1 readings can't give 2 parameters: take more readings or a simpler curve");
    assert_eq!(said(fit(&[1.0, 2.0], &[1.0, f64::NAN])), "reading 1 is not a finite number");
    assert_eq!(said(fit(&[1.0, f64::INFINITY], &[1.0, 1.0])), "the input of reading 1 is not a finite number");
    assert!(
        said(fit(&[3.0, 3.0, 3.0], &[1.0, 2.0, 1.0])).starts_with("the readings do not tell the 2 parameters apart")
    );
    assert!(
        said(fit(&[0.0, 0.0, 0.0], &[1.0, 2.0, 1.0])).starts_with("the readings do not tell the 2 parameters apart")
    );
    assert_eq!(
        said(polynomial(&[1.0, 2.0], &[1.0, 2.0], 1, Scatter::Known(&[1.0, 0.0]))),
        "the scatter of reading 1 is 0, it must be positive"
    );
    // One over this scatter is beyond any number.
    let beyond = polynomial(&[1.0, 2.0], &[0.0, 0.0], 1, Scatter::Known(&[1.0, 3.87e-309]));
    assert!(said(beyond).starts_with("the readings do not tell the 2 parameters apart"));
    assert_eq!(said(fit(&[1.0, 2.0], &[1.0])), "2 readings have 1 values");
}

proptest! {
    #[test]
    fn an_exact_cubic_comes_back(parameters in prop::array::uniform4(-10.0..10.0f64), start in -5.0..5.0f64) {
        let x: Vec<f64> = (0..12).map(|step| start + 0.3 * f64::from(step)).collect();
        let y: Vec<f64> = x.iter().map(|x| polynomial_row(*x, 3).iter().zip(&parameters).map(|(a, b)| a * b).sum()).collect();
        let fit = polynomial(&x, &y, 3, Scatter::Unknown).unwrap();
        for (found, expected) in fit.parameters.iter().zip(&parameters) {
            prop_assert!((found - expected).abs() < 1e-7, "{found} for {expected}");
        }
    }

    #[test]
    fn nothing_from_outside_makes_a_fit_panic(values in prop::collection::vec((any::<f64>(), any::<f64>()), 0..8), degree in 0..5usize) {
        let (x, y): (Vec<f64>, Vec<f64>) = values.into_iter().unzip();
        let _ = polynomial(&x, &y, degree, Scatter::Unknown);
        let _ = polynomial(&x, &y, degree, Scatter::Known(&x));
    }
}
