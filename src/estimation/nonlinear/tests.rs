//! Weights, bounds, robust loss, refusals. The NIST sets are in `tests/strd_nonlinear.rs`.

use super::*;
use crate::estimation::Dual;

/// y = a exp(−b x), exact at a = 5, b = 0.4.
fn decay(noise: &[f64]) -> (Vec<f64>, Vec<f64>) {
    let x: Vec<f64> = (0..noise.len()).map(|i| 0.5 * i as f64).collect();
    let y = x.iter().zip(noise).map(|(x, noise)| 5.0 * (-0.4 * x).exp() + noise).collect();
    (x, y)
}

fn model<'a>(x: &'a [f64], y: &'a [f64]) -> Exact<2, impl Fn(&[Dual<2>; 2], usize) -> Dual<2> + 'a> {
    Exact::new(x.len(), move |p: &[Dual<2>; 2], i| p[0] * (-p[1] * x[i]).exp() - y[i])
}

const NOISE: [f64; 8] = [0.02, -0.01, 0.015, -0.02, 0.005, 0.01, -0.015, 0.0];

#[test]
fn known_uncertainties_set_the_covariance_and_unknown_ones_are_estimated() {
    let (x, y) = decay(&NOISE);
    let fit = |u: f64, known| {
        let options = FitOptions { uncertainties: vec![u; 8], uncertainties_known: known, ..FitOptions::default() };
        fit_nonlinear(&model(&x, &y), &[1.0, 1.0], &options).unwrap()
    };
    let (known, twice) = (fit(0.02, true), fit(0.04, true));
    let ratio = twice.standard_uncertainty(0) / known.standard_uncertainty(0);
    assert!((ratio - 2.0).abs() < 1e-9, "{ratio}");
    let (one, other) = (fit(0.02, false), fit(0.04, false));
    assert!((one.standard_uncertainty(1) / other.standard_uncertainty(1) - 1.0).abs() < 1e-9);
    assert_eq!(one.degrees_of_freedom, 6);
}

#[test]
fn differences_with_the_stated_step_agree_with_exact_derivatives() {
    let (x, y) = decay(&NOISE);
    let exact = fit_nonlinear(&model(&x, &y), &[1.0, 1.0], &FitOptions::default()).unwrap();
    let stepped = Stepped::new(8, vec![1.0, 1.0], |p: &[f64], into: &mut [f64]| {
        for (i, residual) in into.iter_mut().enumerate() {
            *residual = p[0] * (-p[1] * x[i]).exp() - y[i];
        }
    });
    let found = fit_nonlinear(&stepped, &[1.0, 1.0], &FitOptions::default()).unwrap();
    for k in 0..2 {
        assert!((found.parameters[k] / exact.parameters[k] - 1.0).abs() < 1e-9);
        assert!((found.standard_uncertainty(k) / exact.standard_uncertainty(k) - 1.0).abs() < 1e-8);
    }
}

#[test]
fn a_parameter_held_by_its_bound_is_said_to_be_there() {
    let (x, y) = decay(&NOISE);
    let bounds = vec![Bound::AtLeast(0.0), Bound::Between(0.0, 0.3)];
    let options = FitOptions { bounds, ..FitOptions::default() };
    let fit = fit_nonlinear(&model(&x, &y), &[1.0, 0.1], &options).unwrap();
    assert_eq!(fit.on_bound, [1]);
    assert!((fit.parameters[1] - 0.3).abs() < 1e-7);
    assert!(fit.covariance[(1, 1)] == 0.0 && fit.covariance[(0, 0)] > 0.0);
    assert_eq!(fit.degrees_of_freedom, 7);
    let wide = FitOptions { bounds: vec![Bound::AtLeast(0.0), Bound::Between(0.0, 3.0)], ..FitOptions::default() };
    let (inside, free) = (
        fit_nonlinear(&model(&x, &y), &[1.0, 0.1], &wide).unwrap(),
        fit_nonlinear(&model(&x, &y), &[1.0, 0.1], &FitOptions::default()).unwrap(),
    );
    assert!((inside.parameters[1] - free.parameters[1]).abs() < 1e-8, "a bound that does not hold changes nothing");
    assert!((inside.standard_uncertainty(1) / free.standard_uncertainty(1) - 1.0).abs() < 1e-6);
}

#[test]
fn a_reading_ten_times_off_is_kept_but_hardly_moves_a_robust_fit() {
    let (x, mut y) = decay(&NOISE);
    y[3] *= 10.0;
    let uncertainties = vec![0.015; 8];
    let plain = FitOptions { uncertainties: uncertainties.clone(), ..FitOptions::default() };
    let robust = FitOptions { uncertainties, loss: Loss::Huber { threshold: 1.345 }, ..FitOptions::default() };
    let plain = fit_nonlinear(&model(&x, &y), &[5.0, 0.5], &plain).unwrap();
    let robust = fit_nonlinear(&model(&x, &y), &[5.0, 0.5], &robust).unwrap();
    assert!((plain.parameters[0] - 5.0).abs() > 1.0, "{:?}", plain.parameters);
    assert!((robust.parameters[0] - 5.0).abs() < 0.1, "{:?}", robust.parameters);
    assert!(robust.robust_weights[3] > 0.0 && robust.robust_weights[3] < 0.01, "{:?}", robust.robust_weights);
}

#[test]
fn what_cannot_be_fitted_is_refused_with_the_reason() {
    let (x, y) = decay(&NOISE);
    let fit = |x: &[f64], y: &[f64], start: &[f64], options: &FitOptions| fit_nonlinear(&model(x, y), start, options);
    let plain = FitOptions::default();
    assert_eq!(
        fit(&x[..1], &y[..1], &[1.0, 1.0], &plain),
        Err(NonlinearError::TooFewReadings { n_readings: 1, n_parameters: 2 })
    );
    let mut holed = y.clone();
    holed[4] = f64::NAN;
    assert_eq!(fit(&x, &holed, &[1.0, 1.0], &plain), Err(NonlinearError::NotFiniteAtStart { reading: 4 }));
    let options = FitOptions { uncertainties: vec![0.0; 8], ..FitOptions::default() };
    assert_eq!(fit(&x, &y, &[1.0, 1.0], &options), Err(NonlinearError::Uncertainty { reading: 0, found: 0.0 }));
    let options = FitOptions { bounds: vec![Bound::AtLeast(2.0), Bound::Free], ..FitOptions::default() };
    assert_eq!(fit(&x, &y, &[1.0, 1.0], &options), Err(NonlinearError::StartOutside { parameter: 0, found: 1.0 }));
    // All readings at one place: only a exp(−b x) as a whole is known there.
    let same = vec![1.0; 8];
    let error = fit(&same, &y, &[1.0, 1.0], &plain).unwrap_err();
    assert!(matches!(error, NonlinearError::Undetermined { .. }), "{error}");
    let hasty = FitOptions { patience: 1, ..FitOptions::default() };
    let error = fit(&x, &y, &[100.0, 9.0], &hasty).unwrap_err();
    assert!(matches!(error, NonlinearError::OutOfPatience { .. }), "{error}");
}
