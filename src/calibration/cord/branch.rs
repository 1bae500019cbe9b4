//! One branch over all cords of a lot: the law, the cords' own deviations from it, the band.
//!
//! A cord's deviation from the lot is a factor 1 + δ + γ z on the tension, z = e/e_max − ½: stiffer or softer as a whole,
//! and more at one end than at the other. The covariance of (δ, γ) between cords is the scatter. Law and deviations are
//! fitted in turn.

use super::error::CordError;
use super::law::{Fitted, LawKind, Point, fit_law};
use crate::estimation::{Component, Scatter, combined, least_squares};

/// A residual further off than this many robust deviations weighs less (P. J. Huber, Robust Statistics, 1981, section 4.5).
const HUBER: f64 = 2.0;
/// A residual further off than this many is told to people.
const FAR: f64 = 10.0;
const ROUNDS: usize = 8;
const LEAST_STEPS: usize = 4;

/// A branch reading with the cord it belongs to.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct BranchReading {
    pub(super) cord: usize,
    pub(super) line: usize,
    pub(super) elongation: f64,
    pub(super) tension_n: f64,
}

/// What is known of the instruments, the same for every cord.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Instruments {
    pub(super) force_relative: f64,
    pub(super) force_n: f64,
    pub(super) elongation: f64,
    /// Relative, of the free length.
    pub(super) free_length: f64,
    /// Standard deviation between cords where only one was tested.
    pub(super) assumed_scatter: f64,
}

/// A law beside the others.
#[derive(Debug, Clone, PartialEq)]
pub struct Comparison {
    pub law: String,
    /// Root mean square of the errors at load steps left out, N; `None` where it could not be fitted, with the reason.
    pub left_out_rms_n: Result<f64, String>,
    /// Root mean square of the residuals, N.
    pub residual_rms_n: f64,
    /// It falls somewhere, so no card can have it.
    pub falls: bool,
}

/// One place of the band.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct BandPoint {
    pub elongation: f64,
    pub tension_n: f64,
    /// Standard uncertainty of the lot's mean.
    pub mean: Component,
    /// Standard uncertainty of one further cord of the lot.
    pub one_cord: Component,
}

/// A branch with all that is known of it.
#[derive(Debug, Clone, PartialEq)]
pub struct BranchFit {
    pub law: Fitted,
    pub comparisons: Vec<Comparison>,
    /// Every cord was tested to here.
    pub tested_to: f64,
    pub left_out_rms_n: f64,
    /// (δ, γ) of each cord.
    pub deviations: Vec<[f64; 2]>,
    /// Lines of the readings that stand far off, with how many robust deviations.
    pub far_off: Vec<(usize, f64)>,
    pub(super) n_steps: usize,
    scatter: Option<[[f64; 2]; 2]>,
    n_cords: usize,
    instruments: Instruments,
}

impl BranchFit {
    pub(super) fn of(
        branch: &'static str,
        readings: &[BranchReading],
        (n_cords, n_cycles): (usize, usize),
        instruments: Instruments,
    ) -> Result<Self, CordError> {
        refuse(branch, readings)?;
        let tested_to = tested_to(readings, n_cords);
        let n_steps = (readings.len() / n_cycles.max(1)).max(LEAST_STEPS);
        let mut comparisons = Vec::new();
        let mut best: Option<(f64, Robust)> = None;
        for kind in candidates(n_steps) {
            let robust = match Robust::fit(kind, readings, n_cords, tested_to) {
                Ok(robust) => robust,
                Err(error) => {
                    let why = Err(error.to_string());
                    comparisons.push(Comparison {
                        law: kind.words(),
                        left_out_rms_n: why,
                        residual_rms_n: f64::NAN,
                        falls: false,
                    });
                    continue;
                }
            };
            let left_out = robust.left_out_rms_n(readings, n_steps);
            let falls = !robust.law.rises_to(tested_to);
            let left_out_n = left_out.as_ref().copied().unwrap_or(f64::INFINITY);
            comparisons.push(Comparison {
                law: kind.words(),
                left_out_rms_n: left_out.map_err(|error| error.to_string()),
                residual_rms_n: robust.residual_rms_n(),
                falls,
            });
            if !falls && best.as_ref().is_none_or(|(least, _)| left_out_n < *least) && left_out_n.is_finite() {
                best = Some((left_out_n, robust));
            }
        }
        let Some((left_out_rms_n, robust)) = best else {
            let why =
                comparisons.iter().map(|one| format!("{}: falls or can't be fitted", one.law)).collect::<Vec<_>>();
            return Err(CordError::NoLaw { branch, why: why.join(", ") });
        };
        Ok(Self {
            far_off: robust.far_off(readings, left_out_rms_n),
            scatter: covariance(&robust.deviations),
            law: robust.law,
            deviations: robust.deviations,
            comparisons,
            tested_to,
            left_out_rms_n,
            n_steps,
            n_cords,
            instruments,
        })
    }

    /// The band at an elongation.
    pub fn band(&self, elongation: f64) -> BandPoint {
        let Instruments { force_relative, force_n, elongation: u_elongation, free_length, assumed_scatter } =
            self.instruments;
        let tension_n = self.law.tension_n(elongation);
        let slope_n = self.law.slope_n(elongation);
        let z = elongation / self.tested_to - 0.5;
        let (scatter, degrees) = match self.scatter {
            Some([[dd, dg], [_, gg]]) => ((dd + 2.0 * z * dg + z * z * gg).max(0.0).sqrt(), self.n_cords as f64 - 1.0),
            None => (assumed_scatter, f64::INFINITY),
        };
        let scatter_n = scatter * tension_n;
        let common = [
            // The laws have no freedom at slack: what they miss dies out there.
            Component::certain(self.left_out_rms_n * (elongation / (0.1 * self.tested_to)).min(1.0)),
            Component::certain(force_relative * tension_n),
            Component::certain(force_n),
            Component::certain(u_elongation * slope_n),
            Component::certain(free_length * (1.0 + elongation) * slope_n),
        ];
        let with = |scatter_n: f64| {
            let between = Component { standard_uncertainty: scatter_n, degrees_of_freedom: degrees };
            let all: Vec<Component> = common.iter().copied().chain([between]).collect();
            combined(&all)
        };
        let n = self.n_cords as f64;
        BandPoint {
            elongation,
            tension_n,
            mean: with(scatter_n / n.sqrt()),
            one_cord: with(scatter_n * (1.0 + 1.0 / n).sqrt()),
        }
    }

    /// Relative standard deviation between cords, weighted by the tension; `None` where one cord was tested.
    pub fn relative_scatter(&self) -> Option<f64> {
        let [[dd, dg], [_, gg]] = self.scatter?;
        let at = |part: u32| {
            let share = f64::from(part) / 50.0;
            let z = share - 0.5;
            let tension_n = self.law.tension_n(share * self.tested_to);
            (tension_n * (dd + 2.0 * z * dg + z * z * gg).max(0.0).sqrt(), tension_n)
        };
        let (scatter, tension) = (1..=50).map(at).fold((0.0, 0.0), |sum, one| (sum.0 + one.0, sum.1 + one.1));
        Some(scatter / tension)
    }
}

fn refuse(branch: &'static str, readings: &[BranchReading]) -> Result<(), CordError> {
    let differ = |value: fn(&BranchReading) -> f64| readings.iter().any(|one| value(one) != value(&readings[0]));
    if readings.len() > 1 {
        if !differ(|one| one.elongation) {
            return Err(CordError::AllEqual { branch, what: "elongation" });
        }
        if !differ(|one| one.tension_n) {
            return Err(CordError::AllEqual { branch, what: "tension" });
        }
    }
    let mut elongations: Vec<f64> = readings.iter().map(|one| one.elongation).filter(|e| *e > 0.0).collect();
    elongations.sort_by(f64::total_cmp);
    elongations.dedup_by(|later, earlier| *later - *earlier < 1e-6);
    if elongations.len() < LEAST_STEPS {
        return Err(CordError::TooFew { branch, found: elongations.len(), wanted: LEAST_STEPS });
    }
    Ok(())
}

fn tested_to(readings: &[BranchReading], n_cords: usize) -> f64 {
    let furthest = |cord: usize| {
        readings.iter().filter(|one| one.cord == cord).map(|one| one.elongation).fold(f64::NEG_INFINITY, f64::max)
    };
    (0..n_cords).map(furthest).filter(|e| e.is_finite()).fold(f64::INFINITY, f64::min)
}

fn candidates(n_steps: usize) -> Vec<LawKind> {
    let mut kinds = vec![LawKind::StraightLine];
    kinds.extend((2..=5).filter(|degree| degree + 1 < n_steps).map(|degree| LawKind::Polynomial { degree }));
    kinds.push(LawKind::MooneyRivlin);
    if n_steps > 5 {
        kinds.push(LawKind::Ogden);
    }
    kinds.extend([4, 6, 8, 11].into_iter().filter(|knots| knots + 1 < n_steps).map(|knots| LawKind::Spline { knots }));
    kinds
}

/// A law, the cords' deviations and the robust weights, fitted in turn.
struct Robust {
    law: Fitted,
    deviations: Vec<[f64; 2]>,
    weights: Vec<f64>,
    residuals_n: Vec<f64>,
    tested_to: f64,
}

impl Robust {
    fn fit(kind: LawKind, readings: &[BranchReading], n_cords: usize, tested_to: f64) -> Result<Self, CordError> {
        let mut weights = vec![1.0; readings.len()];
        let mut deviations = vec![[0.0; 2]; n_cords];
        let mut law = fit_law(kind, &corrected(readings, &deviations, &weights, tested_to), None)?;
        let mut residuals_n = Vec::new();
        for _ in 0..ROUNDS {
            if n_cords > 1 {
                deviations = cord_deviations(&law, readings, n_cords, &weights, tested_to)?;
            }
            residuals_n = residuals(&law, readings, &deviations, tested_to);
            let scale_n = deviation_n(&residuals_n).max(1e-9);
            let next: Vec<f64> = residuals_n.iter().map(|r| (HUBER * scale_n / r.abs()).min(1.0)).collect();
            let change = next.iter().zip(&weights).map(|(new, old)| (new - old).abs()).fold(0.0, f64::max);
            weights = next;
            law = fit_law(kind, &corrected(readings, &deviations, &weights, tested_to), Some(&law))?;
            if change < 1e-3 {
                break;
            }
        }
        Ok(Self { law, deviations, weights, residuals_n, tested_to })
    }

    fn residual_rms_n(&self) -> f64 {
        let squares: f64 = self.residuals_n.iter().zip(&self.weights).map(|(r, w)| w * r * r).sum();
        (squares / self.weights.iter().sum::<f64>()).sqrt()
    }

    /// Root mean square error at load steps that were left out, all cords' readings of a step at once; the last step is always
    /// kept, since leaving it out would ask for an extrapolation.
    fn left_out_rms_n(&self, readings: &[BranchReading], n_steps: usize) -> Result<f64, CordError> {
        let points = corrected(readings, &self.deviations, &self.weights, self.tested_to);
        let mut order: Vec<usize> = (0..points.len()).collect();
        order.sort_by(|a, b| points[*a].elongation.total_cmp(&points[*b].elongation));
        let size = points.len().div_ceil(n_steps);
        let steps: Vec<&[usize]> = order.chunks(size).collect();
        let (mut squares, mut count) = (0.0, 0.0);
        for step in steps.iter().take(steps.len().saturating_sub(1)) {
            let kept: Vec<Point> = (0..points.len()).filter(|i| !step.contains(i)).map(|i| points[i]).collect();
            let law = fit_law(self.law.kind, &kept, Some(&self.law))?;
            // The step's weighted mean: single readings' noise is not the law's error.
            let weight: f64 = step.iter().map(|i| points[*i].weight).sum();
            let error_n: f64 = step
                .iter()
                .map(|i| points[*i].weight * (law.tension_n(points[*i].elongation) - points[*i].tension_n))
                .sum::<f64>()
                / weight;
            squares += weight * error_n * error_n;
            count += weight;
        }
        Ok((squares / count).sqrt())
    }

    /// Readings far off both by the others' scatter and by what the law itself may miss.
    fn far_off(&self, readings: &[BranchReading], left_out_rms_n: f64) -> Vec<(usize, f64)> {
        let highest_n = readings.iter().map(|one| one.tension_n.abs()).fold(0.0, f64::max);
        let scale_n = deviation_n(&self.residuals_n).max(left_out_rms_n).max(1e-3 * highest_n);
        let times = self.residuals_n.iter().map(|r| r.abs() / scale_n);
        readings.iter().zip(times).filter(|(_, times)| *times > FAR).map(|(one, times)| (one.line, times)).collect()
    }
}

/// Robust standard deviation: 1.4826 times the median of the absolute values (F. R. Hampel, J. Am. Stat. Assoc. 69 (1974)
/// 383).
fn deviation_n(residuals: &[f64]) -> f64 {
    let mut sizes: Vec<f64> = residuals.iter().map(|r| r.abs()).collect();
    sizes.sort_by(f64::total_cmp);
    1.4826 * sizes.get(sizes.len() / 2).copied().unwrap_or(0.0)
}

fn factor([delta, gamma]: [f64; 2], elongation: f64, tested_to: f64) -> f64 {
    (1.0 + delta + gamma * (elongation / tested_to - 0.5)).max(0.1)
}

/// The readings as the lot's mean cord would have given them.
fn corrected(readings: &[BranchReading], deviations: &[[f64; 2]], weights: &[f64], tested_to: f64) -> Vec<Point> {
    let of = |(one, weight): (&BranchReading, &f64)| Point {
        elongation: one.elongation,
        tension_n: one.tension_n / factor(deviations[one.cord], one.elongation, tested_to),
        weight: *weight,
    };
    readings.iter().zip(weights).map(of).collect()
}

fn residuals(law: &Fitted, readings: &[BranchReading], deviations: &[[f64; 2]], tested_to: f64) -> Vec<f64> {
    let of = |one: &BranchReading| {
        one.tension_n - law.tension_n(one.elongation) * factor(deviations[one.cord], one.elongation, tested_to)
    };
    readings.iter().map(of).collect()
}

/// (δ, γ) of every cord about their mean, by weighted least squares.
fn cord_deviations(
    law: &Fitted,
    readings: &[BranchReading],
    n_cords: usize,
    weights: &[f64],
    tested_to: f64,
) -> Result<Vec<[f64; 2]>, CordError> {
    let mut all = Vec::with_capacity(n_cords);
    for cord in 0..n_cords {
        let own = || readings.iter().zip(weights).filter(|(one, _)| one.cord == cord && one.elongation > 0.0);
        let rows: Vec<Vec<f64>> = own()
            .map(|(one, _)| {
                let tension_n = law.tension_n(one.elongation);
                vec![tension_n, tension_n * (one.elongation / tested_to - 0.5)]
            })
            .collect();
        let excess: Vec<f64> = own().map(|(one, _)| one.tension_n - law.tension_n(one.elongation)).collect();
        let relative: Vec<f64> = own().map(|(_, weight)| 1.0 / weight.max(1e-9).sqrt()).collect();
        let fit = least_squares(&rows, &excess, Scatter::Relative(&relative))?;
        all.push([fit.parameters[0], fit.parameters[1]]);
    }
    let mean = |k: usize| all.iter().map(|one| one[k]).sum::<f64>() / n_cords as f64;
    let means = [mean(0), mean(1)];
    for one in &mut all {
        *one = [one[0] - means[0], one[1] - means[1]];
    }
    Ok(all)
}

fn covariance(deviations: &[[f64; 2]]) -> Option<[[f64; 2]; 2]> {
    let n = deviations.len() as f64;
    let of = |j: usize, k: usize| deviations.iter().map(|one| one[j] * one[k]).sum::<f64>() / (n - 1.0);
    (deviations.len() > 1).then(|| [[of(0, 0), of(0, 1)], [of(1, 0), of(1, 1)]])
}
