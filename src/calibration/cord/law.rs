//! Laws of tension against elongation for one branch; every one of them passes through (0, 0).
//!
//! With the stretch λ = 1 + elongation and everything per unstretched cross-section:
//! - straight line F = k e (R. Hooke, 1678): the witness, never the choice unless it wins;
//! - polynomial F = Σ cₖ eᵏ, k from 1;
//! - Mooney-Rivlin F = a (λ − λ⁻²) + b (1 − λ⁻³) (M. Mooney, J. Appl. Phys. 11 (1940) 582; R. S. Rivlin, Phil. Trans. R.
//!   Soc. A 241 (1948) 379), a = 2 C₁ A, b = 2 C₂ A;
//! - two-term Ogden F = Σ mᵢ (λ^(αᵢ − 1) − λ^(−αᵢ/2 − 1)) (R. W. Ogden, Proc. R. Soc. A 326 (1972) 565), mᵢ = μᵢ A, with
//!   0.1 ≤ α₁ ≤ 3 ≤ α₂ ≤ 40: unbounded, the terms run off after each other;
//! - monotone spline through a few knots, fitted in their heights.

use super::error::CordError;
use super::spline;
use crate::estimation::{
    Bound, Curve, Dual, Exact, FitOptions, NonlinearError, NonlinearFit, Scatter, fit_nonlinear, least_squares,
};

/// One reading of one branch.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Point {
    pub elongation: f64,
    pub tension_n: f64,
    /// 1 where it counts in full.
    pub weight: f64,
}

/// A law that may be fitted.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum LawKind {
    StraightLine,
    Polynomial { degree: usize },
    MooneyRivlin,
    Ogden,
    Spline { knots: usize },
}

impl LawKind {
    pub fn words(self) -> String {
        match self {
            Self::StraightLine => "straight line".into(),
            Self::Polynomial { degree } => format!("polynomial of degree {degree}"),
            Self::MooneyRivlin => "Mooney-Rivlin".into(),
            Self::Ogden => "two-term Ogden".into(),
            Self::Spline { knots } => format!("monotone spline, {knots} knots"),
        }
    }
}

/// A law with its parameters.
#[derive(Debug, Clone, PartialEq)]
pub struct Fitted {
    pub kind: LawKind,
    /// Polynomial: coefficients from e¹ up, N. Mooney-Rivlin: a, b, N. Ogden: m₁, α₁, m₂, α₂. Spline: elongation and tension
    /// of each knot in turn.
    pub parameters: Vec<f64>,
    spline: Option<Curve>,
}

impl Fitted {
    pub fn tension_n(&self, elongation: f64) -> f64 {
        let p = &self.parameters;
        match (self.kind, &self.spline) {
            (LawKind::StraightLine | LawKind::Polynomial { .. }, _) => {
                p.iter().rev().fold(0.0, |sum, coefficient| (sum + coefficient) * elongation)
            }
            (LawKind::MooneyRivlin, _) => {
                mooney_row(elongation).iter().zip(p).map(|(factor, parameter)| factor * parameter).sum()
            }
            (LawKind::Ogden, _) => p[0] * ogden(1.0 + elongation, p[1]) + p[2] * ogden(1.0 + elongation, p[3]),
            (LawKind::Spline { .. }, Some(curve)) => curve.value(elongation),
            (LawKind::Spline { .. }, None) => f64::NAN,
        }
    }

    pub fn slope_n(&self, elongation: f64) -> f64 {
        let step = 1e-5;
        let below = (elongation - step).max(0.0);
        (self.tension_n(elongation + step) - self.tension_n(below)) / (elongation + step - below)
    }

    /// Whether the tension never falls between slack and an elongation.
    pub fn rises_to(&self, last: f64) -> bool {
        const PARTS: u32 = 200;
        let at = |part: u32| self.tension_n(last * f64::from(part) / f64::from(PARTS));
        (0..PARTS).all(|part| at(part + 1) >= at(part))
    }

    /// ∫ F de from slack, N (joules for each metre of free length): Simpson's rule with 400 parts.
    pub fn integral_n(&self, to: f64) -> f64 {
        const PARTS: u32 = 400;
        let at = |part: u32| self.tension_n(to * f64::from(part) / f64::from(PARTS));
        let inner: f64 = (1..PARTS).map(|part| at(part) * if part % 2 == 1 { 4.0 } else { 2.0 }).sum();
        (at(0) + inner + at(PARTS)) * to / (3.0 * f64::from(PARTS))
    }
}

/// Fits a law by weighted least squares; `near` is a fit to nearly the same readings, which spares Ogden's search for a
/// start.
///
/// # Errors
/// [`CordError`]: the readings don't determine the law.
pub fn fit_law(kind: LawKind, points: &[Point], near: Option<&Fitted>) -> Result<Fitted, CordError> {
    let linear = |row: &dyn Fn(f64) -> Vec<f64>| {
        let rows: Vec<Vec<f64>> = points.iter().map(|point| row(point.elongation)).collect();
        let tensions: Vec<f64> = points.iter().map(|point| point.tension_n).collect();
        let fit = least_squares(&rows, &tensions, Scatter::Relative(&relative(points)))?;
        Ok(Fitted { kind, parameters: fit.parameters, spline: None })
    };
    match kind {
        LawKind::StraightLine => linear(&|e| powers(e, 1)),
        LawKind::Polynomial { degree } => linear(&|e| powers(e, degree)),
        LawKind::MooneyRivlin => linear(&|e| mooney_row(e).to_vec()),
        LawKind::Ogden => Ok(Fitted { kind, parameters: fit_ogden(points, near)?, spline: None }),
        LawKind::Spline { knots } => {
            let (parameters, curve) = spline::fit(points, knots)?;
            Ok(Fitted { kind, parameters, spline: Some(curve) })
        }
    }
}

/// Relative deviations that stand for the weights.
pub(super) fn relative(points: &[Point]) -> Vec<f64> {
    points.iter().map(|point| 1.0 / point.weight.max(1e-9).sqrt()).collect()
}

fn powers(elongation: f64, degree: usize) -> Vec<f64> {
    (1..=degree).map(|power| elongation.powi(power as i32)).collect()
}

fn mooney_row(elongation: f64) -> [f64; 2] {
    let stretch = 1.0 + elongation;
    [stretch - stretch.powi(-2), 1.0 - stretch.powi(-3)]
}

fn ogden(stretch: f64, exponent: f64) -> f64 {
    stretch.powf(exponent - 1.0) - stretch.powf(-0.5 * exponent - 1.0)
}

/// Best of several starts: in the exponents the sum of squares has more than one valley. The heights of the terms at the
/// greatest stretch are fitted in place of mᵢ, which differ by many powers of ten.
fn fit_ogden(points: &[Point], near: Option<&Fitted>) -> Result<Vec<f64>, CordError> {
    const SMALL: [f64; 3] = [0.5, 1.5, 2.5];
    const LARGE: [f64; 4] = [4.0, 7.0, 12.0, 20.0];
    let furthest = 1.0 + points.iter().map(|point| point.elongation).fold(0.0, f64::max);
    let highest_n = points.iter().map(|point| point.tension_n.abs()).fold(0.0, f64::max);
    let term = |stretch: f64, exponent: Dual<4>| {
        let of = |stretch: f64| {
            (exponent * stretch.ln()).exp() / stretch - (exponent * (-0.5 * stretch.ln())).exp() / stretch
        };
        of(stretch) / of(furthest)
    };
    let residuals = Exact::new(points.len(), |p: &[Dual<4>; 4], i| {
        let stretch = 1.0 + points[i].elongation;
        (p[0] * term(stretch, p[1]) + p[2] * term(stretch, p[3])) * highest_n - points[i].tension_n
    });
    let options = FitOptions {
        bounds: vec![Bound::Free, Bound::Between(0.1, 3.0), Bound::Free, Bound::Between(3.0, 40.0)],
        uncertainties: relative(points),
        tolerance: 1e-13,
        ..FitOptions::default()
    };
    let height = |exponent: f64| highest_n / ogden(furthest, exponent);
    let starts: Vec<[f64; 4]> = match near.map(|near| near.parameters.as_slice()) {
        Some(&[m1, a1, m2, a2]) => vec![[m1 / height(a1), a1, m2 / height(a2), a2]],
        _ => SMALL.iter().flat_map(|small| LARGE.iter().map(move |large| [0.5, *small, 0.5, *large])).collect(),
    };
    let mut best: Result<NonlinearFit, NonlinearError> =
        Err(NonlinearError::TooFewReadings { n_readings: points.len(), n_parameters: 4 });
    for start in starts {
        let found = fit_nonlinear(&residuals, &start, &options);
        match (&best, &found) {
            (Ok(best), Ok(found)) if found.sum_of_squares >= best.sum_of_squares => continue,
            (Ok(_), Err(_)) => continue,
            _ => best = found,
        }
    }
    let p = best?.parameters;
    Ok(vec![p[0] * height(p[1]), p[1], p[2] * height(p[3]), p[3]])
}
