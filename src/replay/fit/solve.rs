//! From trials to losses: the joint fit, its width by what the residuals show, everything else that is said about it.

use nalgebra::{DMatrix, DVector};

use super::choose::nested;
use super::error::FitError;
use super::joint::Joint;
use super::left_out::{left_out, mark_outliers, unexplained};
use super::outcome::{LossFit, assembled};
use super::splits::{combinations, next_trials};
use super::term::Term;
use super::trial::FitTrial;
use crate::estimation::{self, Loss, Residuals, fit_nonlinear};

/// Rounds in which the width of the data settles.
const ROUNDS: usize = 4;
/// Relative change of parameters or sum at which the solver stops: what the derivatives' noise allows.
const TOLERANCE: f64 = 1e-13;
/// Share of a standard uncertainty by which a minimum may be missed: where the cords' wave comes back the speed has a bend, and
/// a minimum that lies on one has no slope of zero.
const OFFSET: f64 = 0.01;
/// Relative change at which it has.
const SETTLED: f64 = 0.02;
/// A loss of which the rig file says nothing counts as found where the trials leave less of its prior's width than this.
const FOUND: f64 = 0.3;

/// How to fit.
#[derive(Debug, Clone, PartialEq)]
pub struct FitOptions {
    pub terms: Vec<Term>,
    /// Residuals beyond this many standard uncertainties count less (Huber).
    pub robust: Option<f64>,
    pub threads: usize,
    /// Leave every trial out in turn, and try the fit without each loss.
    pub examine: bool,
}

impl FitOptions {
    /// Of these losses, by plain squares, examined, on one thread.
    pub fn of(terms: Vec<Term>) -> Self {
        Self { terms, robust: None, threads: 1, examine: true }
    }
}

/// A minimum with its width.
#[derive(Debug, Clone)]
pub(super) struct Solved {
    pub joint: Joint,
    pub parameters: Vec<f64>,
    /// Of all parameters, widened.
    pub covariance: DMatrix<f64>,
    /// Of the speeds alone, not widened.
    pub chi_square: f64,
    pub degrees_of_freedom: f64,
    /// Along the rail, of neighbouring places.
    pub autocorrelation: f64,
    /// How many neighbours tell as much as one place that is independent.
    pub together: f64,
    /// Everything that was made small, widened: speeds, priors, nuisances.
    pub objective: f64,
    pub stop: String,
    pub evaluations: usize,
    pub at_zero: Vec<usize>,
}

/// Fits losses to trials of one rig.
///
/// # Errors
/// [`FitError`]: nothing to fit, trials of several rigs, losses that the trials don't tell apart, no minimum.
pub fn fit(trials: &[FitTrial], options: &FitOptions) -> Result<LossFit, FitError> {
    let all: Vec<&FitTrial> = trials.iter().collect();
    of_one_rig(&all)?;
    let solved = solved(&all, options, None)?;
    refuse_open(&all, options, &solved)?;
    let mut found = assembled(&all, &solved);
    found.combinations = combinations(&solved);
    if options.examine {
        found.left_out = left_out(&all, options, &solved);
        mark_outliers(&mut found);
        found.unexplained = unexplained(&found.left_out);
        found.nested = nested(&all, options, &solved)?;
        found.next_trials = next_trials(&all, &solved);
    }
    Ok(found)
}

fn of_one_rig(trials: &[&FitTrial]) -> Result<(), FitError> {
    let first = trials.first().ok_or(FitError::NoTrial)?;
    if trials.iter().any(|trial| trial.rig.name != first.rig.name) {
        let mut rigs: Vec<String> = trials.iter().map(|trial| trial.rig.name.clone()).collect();
        rigs.sort();
        rigs.dedup();
        return Err(FitError::DifferentRigs { rigs });
    }
    Ok(())
}

/// The fit itself. The width of the data is found in rounds, or taken as `inflation`.
pub(super) fn solved(trials: &[&FitTrial], options: &FitOptions, inflation: Option<f64>) -> Result<Solved, FitError> {
    if options.terms.is_empty() {
        return Err(FitError::NoTerm);
    }
    let mut joint = Joint::of(trials, &options.terms, options.threads)?;
    let mut start = joint.start();
    let mut evaluations = 0;
    joint.inflation = inflation.unwrap_or(1.0);
    for round in 0.. {
        let mut found = minimum(&joint, &start, options)?;
        evaluations += found.evaluations;
        found.evaluations = evaluations;
        let shown = (found.chi_square / found.degrees_of_freedom.max(1.0) * found.together).max(1.0);
        if inflation.is_some() || round >= ROUNDS || (shown / joint.inflation - 1.0).abs() < SETTLED {
            return Ok(found);
        }
        joint.inflation = shown;
        start = found.parameters;
        // A loss that ended on zero starts off it again.
        for (value, first) in start.iter_mut().zip(joint.start()).take(options.terms.len()) {
            *value = value.max(0.1 * first);
        }
    }
    Err(FitError::NoTerm)
}

/// The minimum with no loss below zero: the one that would be furthest below is held at zero, the rest fitted again.
fn minimum(joint: &Joint, start: &[f64], options: &FitOptions) -> Result<Solved, FitError> {
    let n_terms = joint.terms.len();
    let sizes: Vec<f64> = (0..start.len()).map(|k| joint.known.get(k).map_or(1.0, |one| one.size)).collect();
    let mut at_zero: Vec<usize> = Vec::new();
    loop {
        let free: Vec<usize> = (0..start.len()).filter(|k| !at_zero.contains(k)).collect();
        let part = Part { joint, sizes: &sizes, free: &free };
        let found = part.fitted(start, options)?;
        let parameters = part.whole(&found.parameters);
        let below = (0..n_terms).filter(|k| parameters[*k] < 0.0);
        match below.min_by(|a, b| (parameters[*a] / sizes[*a]).total_cmp(&(parameters[*b] / sizes[*b]))) {
            Some(worst) => at_zero.push(worst),
            None => return Ok(described(joint, parameters, found, at_zero)),
        }
    }
}

fn described(joint: &Joint, parameters: Vec<f64>, found: estimation::NonlinearFit, at_zero: Vec<usize>) -> Solved {
    let covariance = covariance(joint, &parameters, &found.robust_weights);
    let residuals = DVector::from_vec(found.residuals);
    let chi_square = joint.inflation * residuals.rows(0, joint.n_places()).norm_squared();
    let autocorrelation = autocorrelation(joint, residuals.as_slice());
    Solved {
        degrees_of_freedom: joint.n_places() as f64 - joint.terms.len() as f64,
        together: together(autocorrelation, joint),
        autocorrelation,
        chi_square,
        objective: residuals.norm_squared(),
        stop: format!("{:?}", found.stop),
        evaluations: found.evaluations,
        at_zero,
        covariance,
        parameters,
        joint: joint.clone(),
    }
}

/// The residuals with the free parameters alone, each in its own size; the others are zero.
struct Part<'a> {
    joint: &'a Joint,
    sizes: &'a [f64],
    free: &'a [usize],
}

impl Part<'_> {
    fn fitted(&self, start: &[f64], options: &FitOptions) -> Result<estimation::NonlinearFit, FitError> {
        let start: Vec<f64> = self.free.iter().map(|k| start[*k] / self.sizes[*k]).collect();
        let settings = estimation::FitOptions {
            uncertainties_known: true,
            loss: options.robust.map_or(Loss::Squares, |threshold| Loss::Huber { threshold }),
            tolerance: TOLERANCE,
            largest_offset: OFFSET,
            ..estimation::FitOptions::default()
        };
        Ok(fit_nonlinear(self, &start, &settings)?)
    }

    fn whole(&self, free: &[f64]) -> Vec<f64> {
        let mut whole = vec![0.0; self.sizes.len()];
        for (k, value) in self.free.iter().zip(free) {
            whole[*k] = value * self.sizes[*k];
        }
        whole
    }
}

impl Residuals for Part<'_> {
    fn n_parameters(&self) -> usize {
        self.free.len()
    }

    fn n_residuals(&self) -> usize {
        self.joint.n_residuals()
    }

    fn residuals(&self, parameters: &[f64], into: &mut [f64]) {
        self.joint.residuals(&self.whole(parameters), into);
    }

    fn jacobian(&self, parameters: &[f64], into: &mut DMatrix<f64>) {
        let mut whole = DMatrix::zeros(self.joint.n_residuals(), self.sizes.len());
        self.joint.jacobian(&self.whole(parameters), &mut whole);
        for (column, k) in self.free.iter().enumerate() {
            into.set_column(column, &(whole.column(*k) * self.sizes[*k]));
        }
    }
}

/// (JᵀWJ)⁻¹ of all parameters, those on a bound as if they were free: what is not known of them stays unknown.
fn covariance(joint: &Joint, parameters: &[f64], weights: &[f64]) -> DMatrix<f64> {
    let mut jacobian = DMatrix::zeros(joint.n_residuals(), parameters.len());
    joint.jacobian(parameters, &mut jacobian);
    for (i, weight) in weights.iter().enumerate() {
        jacobian.row_mut(i).scale_mut(weight.sqrt());
    }
    inverse(&jacobian.tr_mul(&jacobian))
}

/// Of a symmetric positive matrix, scaled to a diagonal of ones first; infinite where it has none.
pub(super) fn inverse(matrix: &DMatrix<f64>) -> DMatrix<f64> {
    let n = matrix.nrows();
    let scale = DVector::from_iterator(n, (0..n).map(|i| 1.0 / matrix[(i, i)].sqrt()));
    let scaled = DMatrix::from_fn(n, n, |i, j| matrix[(i, j)] * scale[i] * scale[j]);
    match scaled.cholesky() {
        Some(root) => {
            let inverse = root.inverse();
            DMatrix::from_fn(n, n, |i, j| inverse[(i, j)] * scale[i] * scale[j])
        }
        None => DMatrix::from_diagonal_element(n, n, f64::INFINITY),
    }
}

/// Of neighbouring places, about zero: a bias is a misfit too.
fn autocorrelation(joint: &Joint, residuals: &[f64]) -> f64 {
    let (mut products, mut squares) = (0.0, 0.0);
    for trial in 0..joint.n_trials() {
        let rows = &residuals[joint.rows(trial)];
        products += rows.windows(2).map(|pair| pair[0] * pair[1]).sum::<f64>();
        squares += rows.iter().map(|r| r * r).sum::<f64>();
    }
    if squares > 0.0 { products / squares } else { 0.0 }
}

/// Variance of a mean of a first-order autoregressive sequence over that of independent values, (1 + r)/(1 − r) (G. E. P. Box,
/// G. M. Jenkins, *Time Series Analysis*, 1976, section 2.1.5), where r stands out of its scatter; no more than a trial has
/// places.
fn together(autocorrelation: f64, joint: &Joint) -> f64 {
    let n = joint.n_places() as f64;
    if autocorrelation < 2.0 / n.sqrt() {
        return 1.0;
    }
    let most = n / joint.n_trials() as f64;
    ((1.0 + autocorrelation) / (1.0 - autocorrelation).max(1e-9)).clamp(1.0, most)
}

/// Losses that the rig file says nothing of and the trials leave open.
fn open(solved: &Solved) -> Vec<usize> {
    let is_open = |k: &usize| {
        let known = &solved.joint.known[*k];
        let found = solved.covariance[(*k, *k)].sqrt() < FOUND * known.given.standard_uncertainty;
        known.weak && !found
    };
    (0..solved.joint.terms.len()).filter(is_open).collect()
}

/// Whether one trial that does not belong is what leaves losses open: without it the others find them all.
fn spoiled_by_one(trials: &[&FitTrial], options: &FitOptions) -> bool {
    let without = |index: usize| {
        let others: Vec<&FitTrial> =
            trials.iter().enumerate().filter(|(i, _)| *i != index).map(|(_, trial)| *trial).collect();
        solved(&others, options, None).is_ok_and(|fitted| open(&fitted).is_empty())
    };
    trials.len() > 3 && (0..trials.len()).any(without)
}

fn refuse_open(trials: &[&FitTrial], options: &FitOptions, solved: &Solved) -> Result<(), FitError> {
    let joint = &solved.joint;
    let open = open(solved);
    if open.is_empty() || spoiled_by_one(trials, options) {
        return Ok(());
    }
    let next = next_trials(trials, solved);
    let advice = next.first().map_or_else(
        || "Fit fewer losses, or give them an uncertainty in the rig file.".to_owned(),
        |best| {
            format!("Fit fewer losses, give them an uncertainty in the rig file, or make a trial with {}.", best.what)
        },
    );
    let mut kinds: Vec<&FitTrial> = Vec::new();
    for trial in trials {
        if !kinds.iter().any(|one| one.is_like(trial)) {
            kinds.push(trial);
        }
    }
    Err(FitError::Undetermined {
        n_trials: trials.len(),
        n_configurations: kinds.len(),
        n_terms: joint.known.iter().filter(|known| known.weak).count(),
        open: open.iter().map(|k| joint.terms[*k].name()).collect::<Vec<_>>().join(", "),
        advice,
    })
}
