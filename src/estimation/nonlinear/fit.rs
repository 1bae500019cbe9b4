//! The fit: rounds of the solver, then proof that it ended at a minimum, then the covariance.

use levenberg_marquardt::TerminationReason;
use nalgebra::{DMatrix, DVector};

use super::bounds::Bound;
use super::error::NonlinearError;
use super::residuals::Residuals;
use super::solver::{Solved, solve};

/// Largest step still to go, as a share of a parameter's size, that counts as arrived where the residuals are nothing but
/// rounding and have no direction.
const STEP: f64 = 1e-8;
/// Largest ratio of singular values of the Jacobian with columns of length one.
const CONDITION: f64 = 1e11;
/// A parameter that moves the residuals by less than this share of their length, when changed by its own size, is lost.
const LOST: f64 = 1e-9;
const ROUNDS: usize = 100;

/// How much a large residual counts.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub enum Loss {
    /// ρ(z) = z².
    #[default]
    Squares,
    /// ρ(z) = z² up to the threshold k, 2 k |z| − k² beyond it (P. J. Huber, Ann. Math. Statist. 35 (1964) 73-101), with z in
    /// standard uncertainties; by iteratively reweighted least squares.
    Huber { threshold: f64 },
}

/// What the fit is to take into account beside the residuals.
#[derive(Debug, Clone, PartialEq)]
pub struct FitOptions {
    /// One for each parameter; empty where all are free.
    pub bounds: Vec<Bound>,
    /// Standard uncertainty of each reading; empty where all weigh the same.
    pub uncertainties: Vec<f64>,
    /// The covariance takes the uncertainties as they are; else it is scaled by what the residuals show.
    pub uncertainties_known: bool,
    pub loss: Loss,
    /// Evaluations of the residuals for each parameter (and one more) before the solver gives up.
    pub patience: usize,
    /// Relative change of parameters or of the sum of squares below which it stops.
    pub tolerance: f64,
    /// Largest relative offset that still counts as a minimum: that part of a standard uncertainty is left to go. Bates and
    /// Watts advise 1e-3.
    pub largest_offset: f64,
}

impl Default for FitOptions {
    fn default() -> Self {
        Self {
            bounds: Vec::new(),
            uncertainties: Vec::new(),
            uncertainties_known: false,
            loss: Loss::Squares,
            patience: 500,
            tolerance: 1e-14,
            largest_offset: 1e-4,
        }
    }
}

/// Why the solver stopped where it did.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Stop {
    /// The residuals are zero.
    Exact,
    /// The residuals are orthogonal to the Jacobian's columns.
    Orthogonal,
    /// The sum of squares, the parameters or both no longer changed.
    Settled { sum: bool, parameters: bool },
    /// Rounding allowed no further step.
    Rounding,
}

/// Parameters with what is known of them.
#[derive(Debug, Clone, PartialEq)]
pub struct NonlinearFit {
    pub parameters: Vec<f64>,
    /// Of the parameters; zero in rows and columns of those on a bound.
    pub covariance: DMatrix<f64>,
    /// As the model gives them, unweighted.
    pub residuals: Vec<f64>,
    /// Weighted, without the robust loss.
    pub sum_of_squares: f64,
    /// Readings less the parameters that are not on a bound.
    pub degrees_of_freedom: usize,
    pub stop: Stop,
    pub evaluations: usize,
    /// Places of the parameters that ended on a bound.
    pub on_bound: Vec<usize>,
    /// What the robust loss left of each reading's weight, 1 where it counts in full.
    pub robust_weights: Vec<f64>,
    /// The residuals' part along what the parameters can do, against the part across it.
    pub relative_offset: f64,
}

impl NonlinearFit {
    pub fn standard_uncertainty(&self, parameter: usize) -> f64 {
        self.covariance[(parameter, parameter)].sqrt()
    }

    /// √(Σ r²/u² / degrees of freedom); NaN where there are none.
    pub fn residual_deviation(&self) -> f64 {
        (self.sum_of_squares / self.degrees_of_freedom as f64).sqrt()
    }
}

/// Fits the model from `start`.
///
/// # Errors
/// [`NonlinearError`]: what was given does not fit together, or no minimum was found.
pub fn fit_nonlinear(
    model: &impl Residuals,
    start: &[f64],
    options: &FitOptions,
) -> Result<NonlinearFit, NonlinearError> {
    let bounds = if options.bounds.is_empty() { vec![Bound::Free; start.len()] } else { options.bounds.clone() };
    let weights = weights(model, options)?;
    refuse(model, start, &bounds)?;
    let mut robust = vec![1.0; weights.len()];
    let mut solved = run(model, &bounds, &weights, &robust, start, options);
    if let Loss::Huber { threshold } = options.loss {
        let mut rounds = 0;
        loop {
            let next = huber_weights(&residuals_at(model, &solved.parameters), &weights, threshold);
            let change = robust.iter().zip(&next).map(|(old, new)| (old - new).abs()).fold(0.0, f64::max);
            if change < 1e-9 {
                break;
            }
            rounds += 1;
            if rounds > ROUNDS {
                return Err(NonlinearError::WeightsUnsettled { rounds: ROUNDS });
            }
            robust = next;
            let before = solved.evaluations;
            solved = run(model, &bounds, &weights, &robust, &solved.parameters, options);
            solved.evaluations += before;
        }
    }
    proven(model, solved, start, &bounds, &weights, &robust, options)
}

fn run(
    model: &impl Residuals,
    bounds: &[Bound],
    weights: &[f64],
    robust: &[f64],
    start: &[f64],
    options: &FitOptions,
) -> Solved {
    let factors: Vec<f64> = weights.iter().zip(robust).map(|(weight, robust)| weight * robust.sqrt()).collect();
    solve(model, bounds, &factors, start, options.patience, options.tolerance)
}

/// One over each uncertainty.
fn weights(model: &impl Residuals, options: &FitOptions) -> Result<Vec<f64>, NonlinearError> {
    let n = model.n_residuals();
    if options.uncertainties.is_empty() {
        return Ok(vec![1.0; n]);
    }
    if options.uncertainties.len() != n {
        let found = options.uncertainties.len();
        return Err(NonlinearError::WrongLength { what: "uncertainties", found, wanted: n });
    }
    let usable = |u: &f64| u.is_finite() && *u > 0.0;
    if let Some(reading) = options.uncertainties.iter().position(|u| !usable(u)) {
        return Err(NonlinearError::Uncertainty { reading, found: options.uncertainties[reading] });
    }
    Ok(options.uncertainties.iter().map(|u| 1.0 / u).collect())
}

fn refuse(model: &impl Residuals, start: &[f64], bounds: &[Bound]) -> Result<(), NonlinearError> {
    let (n_readings, n_parameters) = (model.n_residuals(), model.n_parameters());
    for (what, found) in [("starts", start.len()), ("bounds", bounds.len())] {
        if found != n_parameters {
            return Err(NonlinearError::WrongLength { what, found, wanted: n_parameters });
        }
    }
    if n_readings < n_parameters || n_parameters == 0 {
        return Err(NonlinearError::TooFewReadings { n_readings, n_parameters });
    }
    if let Some(parameter) = start.iter().zip(bounds).position(|(at, bound)| !at.is_finite() || !bound.allows(*at)) {
        return Err(NonlinearError::StartOutside { parameter, found: start[parameter] });
    }
    match residuals_at(model, start).iter().position(|residual| !residual.is_finite()) {
        Some(reading) => Err(NonlinearError::NotFiniteAtStart { reading }),
        None => Ok(()),
    }
}

fn residuals_at(model: &impl Residuals, parameters: &[f64]) -> Vec<f64> {
    let mut residuals = vec![0.0; model.n_residuals()];
    model.residuals(parameters, &mut residuals);
    residuals
}

fn huber_weights(residuals: &[f64], weights: &[f64], threshold: f64) -> Vec<f64> {
    let of = |(residual, weight): (&f64, &f64)| (threshold / (residual * weight).abs()).min(1.0);
    residuals.iter().zip(weights).map(of).collect()
}

/// The fit, if the solver ended at a minimum that determines the parameters.
fn proven(
    model: &impl Residuals,
    solved: Solved,
    start: &[f64],
    bounds: &[Bound],
    weights: &[f64],
    robust: &[f64],
    options: &FitOptions,
) -> Result<NonlinearFit, NonlinearError> {
    let Solved { parameters, termination, evaluations } = solved;
    let residuals = residuals_at(model, &parameters);
    let n_readings = residuals.len();
    let factors: Vec<f64> = weights.iter().zip(robust).map(|(weight, robust)| weight * robust.sqrt()).collect();
    let weighted = DVector::from_iterator(n_readings, residuals.iter().zip(&factors).map(|(r, w)| r * w));
    let mut jacobian = DMatrix::zeros(n_readings, parameters.len());
    model.jacobian(&parameters, &mut jacobian);
    for (i, factor) in factors.iter().enumerate() {
        jacobian.row_mut(i).scale_mut(*factor);
    }
    let on_bound: Vec<usize> = (0..parameters.len()).filter(|k| bounds[*k].holds(parameters[*k])).collect();
    let free: Vec<usize> = (0..parameters.len()).filter(|k| !on_bound.contains(k)).collect();
    let sizes: Vec<f64> = parameters.iter().zip(start).map(|(at, start)| at.abs().max(start.abs())).collect();
    let tangent = Tangent::of(&jacobian, &free, &sizes, weighted.norm(), &parameters)?;
    let degrees_of_freedom = n_readings - free.len();
    let relative_offset = tangent.relative_offset(&weighted, degrees_of_freedom);
    let settled = relative_offset <= options.largest_offset || tangent.remaining_step(&weighted, &sizes) <= STEP;
    let stop = stop_of(termination, evaluations, relative_offset, settled)?;
    let sum_of_squares = residuals.iter().zip(weights).map(|(r, w)| (r * w).powi(2)).sum();
    let spread = weighted.norm_squared() / degrees_of_freedom as f64;
    let scale = if options.uncertainties_known { 1.0 } else { spread };
    let covariance = tangent.covariance(scale, parameters.len());
    Ok(NonlinearFit {
        parameters,
        covariance,
        residuals,
        sum_of_squares,
        degrees_of_freedom,
        stop,
        evaluations,
        on_bound,
        robust_weights: robust.to_vec(),
        relative_offset,
    })
}

fn stop_of(
    termination: TerminationReason,
    evaluations: usize,
    relative_offset: f64,
    settled: bool,
) -> Result<Stop, NonlinearError> {
    let stop = match termination {
        TerminationReason::ResidualsZero => return Ok(Stop::Exact),
        TerminationReason::Orthogonal => Stop::Orthogonal,
        TerminationReason::Converged { ftol, xtol } => Stop::Settled { sum: ftol, parameters: xtol },
        TerminationReason::NoImprovementPossible(_) => Stop::Rounding,
        TerminationReason::LostPatience => return Err(NonlinearError::OutOfPatience { evaluations, relative_offset }),
        other => return Err(NonlinearError::NotAtMinimum { why: format!("{other:?}"), relative_offset }),
    };
    if !settled {
        return Err(NonlinearError::NotAtMinimum { why: format!("{stop:?}"), relative_offset });
    }
    Ok(stop)
}

/// What the free parameters can do to the residuals: the Jacobian with columns of length one, taken apart.
struct Tangent {
    free: Vec<usize>,
    lengths: Vec<f64>,
    /// Left singular vectors: an orthonormal base of the tangent plane.
    base: DMatrix<f64>,
    singular: DVector<f64>,
    right: DMatrix<f64>,
}

impl Tangent {
    fn of(
        jacobian: &DMatrix<f64>,
        free: &[usize],
        sizes: &[f64],
        residual_length: f64,
        parameters: &[f64],
    ) -> Result<Self, NonlinearError> {
        let mut scaled = jacobian.select_columns(free);
        let mut lengths = Vec::with_capacity(free.len());
        for (place, k) in free.iter().enumerate() {
            let length = scaled.column(place).norm();
            if !length.is_finite() || length == 0.0 || length * sizes[*k] < LOST * residual_length {
                return Err(NonlinearError::RanOff { parameter: *k, value: parameters[*k] });
            }
            scaled.column_mut(place).scale_mut(1.0 / length);
            lengths.push(length);
        }
        let svd = scaled.svd(true, true);
        let (Some(base), Some(right)) = (svd.u, svd.v_t) else {
            return Err(NonlinearError::Undetermined { parameter: 0, condition: f64::INFINITY });
        };
        let singular = svd.singular_values;
        if !free.is_empty() {
            let least = singular.imin();
            let condition = singular.max() / singular[least];
            if condition.is_nan() || condition > CONDITION {
                let worst = right.row(least).transpose().iamax();
                return Err(NonlinearError::Undetermined { parameter: free[worst], condition });
            }
        }
        Ok(Self { free: free.to_vec(), lengths, base, singular, right })
    }

    /// Length of the residuals within the tangent plane against their length across it, each over the root of its
    /// dimension. Infinite where nothing lies across.
    fn relative_offset(&self, weighted: &DVector<f64>, degrees_of_freedom: usize) -> f64 {
        let along = self.base.tr_mul(weighted);
        let across = (weighted.norm_squared() - along.norm_squared()).max(0.0);
        let (n_along, n_across) = (self.free.len().max(1) as f64, degrees_of_freedom.max(1) as f64);
        let (along, across) = ((along.norm_squared() / n_along).sqrt(), (across / n_across).sqrt());
        if along == 0.0 { 0.0 } else { along / across }
    }

    /// Largest part of the next Gauss-Newton step, as a share of its parameter's size.
    fn remaining_step(&self, weighted: &DVector<f64>, sizes: &[f64]) -> f64 {
        let along = self.base.tr_mul(weighted).component_div(&self.singular);
        let step = self.right.tr_mul(&along);
        let shares =
            self.free.iter().enumerate().map(|(place, k)| (step[place] / self.lengths[place] / sizes[*k]).abs());
        shares.fold(0.0, f64::max)
    }

    /// scale · (JᵀJ)⁻¹ by the singular values.
    fn covariance(&self, scale: f64, n_parameters: usize) -> DMatrix<f64> {
        let mut covariance = DMatrix::zeros(n_parameters, n_parameters);
        for (i, row) in self.free.iter().enumerate() {
            for (j, column) in self.free.iter().enumerate() {
                let sum: f64 = (0..self.singular.len())
                    .map(|s| self.right[(s, i)] * self.right[(s, j)] / (self.singular[s] * self.singular[s]))
                    .sum();
                covariance[(*row, *column)] = scale * sum / (self.lengths[i] * self.lengths[j]);
            }
        }
        covariance
    }
}
