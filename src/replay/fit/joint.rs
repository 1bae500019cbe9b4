//! All trials as one set of residuals: speeds over their uncertainties, then what was known before over its own.
//!
//! Derivatives are central differences. [`Term::size`] takes a hundredth of the pull; the step is a hundredth of that, and of a
//! nuisance a hundredth of its uncertainty. The integrator runs at a tolerance of 1e-12, so that its noise is some 1e-8 of such
//! a difference; the neglected third order is less (`tests.rs` holds both against a closed form). Larger steps would straddle
//! the places where the cords' wave comes back, at which the speed has a bend.

use nalgebra::DMatrix;

use super::error::FitError;
use super::term::Term;
use super::trial::{FitTrial, Nuisance};
use crate::estimation::Residuals;
use crate::model::{LaunchSetup, ModelError, passings};
use crate::rig::Given;

/// Share of a parameter's size.
const STEP: f64 = 0.01;
/// Relative tolerance of the integration.
const TOLERANCE: f64 = 1e-12;

/// Prior of a loss of which the rig file says nothing, in sizes: a tenth of the pull.
const WEAK: f64 = 10.0;

/// What was known of a parameter.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Known {
    pub given: Given,
    /// The value that takes a hundredth of the pull, the least over the trials.
    pub size: f64,
    /// The rig file gives no uncertainty: the prior is [`WEAK`].
    pub weak: bool,
}

#[derive(Debug, Clone)]
struct OneTrial {
    setup: LaunchSetup,
    places_m: Vec<f64>,
    v_mps: Vec<f64>,
    u_v_mps: Vec<f64>,
    nuisances: Vec<Nuisance>,
    first_row: usize,
    first_nuisance: usize,
}

/// The residuals of a joint fit. Parameters: the terms, then every trial's nuisances in units of their uncertainty, counted
/// from one (so that none has its size near zero). Rows: every trial's places, then the priors of terms, then nuisances.
#[derive(Debug, Clone)]
pub(super) struct Joint {
    pub terms: Vec<Term>,
    pub known: Vec<Known>,
    trials: Vec<OneTrial>,
    n_places: usize,
    n_nuisances: usize,
    /// Factor on the variance of the speeds.
    pub inflation: f64,
    threads: usize,
}

impl Joint {
    pub fn of(trials: &[&FitTrial], terms: &[Term], threads: usize) -> Result<Self, FitError> {
        let mut all = Vec::with_capacity(trials.len());
        let (mut first_row, mut first_nuisance) = (0, terms.len());
        for trial in trials {
            let failed = |source: ModelError| FitError::Model { trial: trial.id.clone(), source };
            let one = OneTrial {
                setup: LaunchSetup { relative_tolerance: TOLERANCE, ..trial.setup(terms).map_err(failed)? },
                places_m: trial.places_m.clone(),
                v_mps: trial.v_mps.clone(),
                u_v_mps: trial.u_v_mps.clone(),
                nuisances: trial.nuisances.clone(),
                first_row,
                first_nuisance,
            };
            first_row += one.places_m.len();
            first_nuisance += one.nuisances.len();
            all.push(one);
        }
        let known = terms.iter().map(|term| known(*term, trials, &all)).collect();
        let (n_places, n_nuisances) = (first_row, first_nuisance - terms.len());
        Ok(Self { terms: terms.to_vec(), known, trials: all, n_places, n_nuisances, inflation: 1.0, threads })
    }

    /// Where a fit starts: what the rig file says, at least a tenth of the size.
    pub fn start(&self) -> Vec<f64> {
        let terms = self.known.iter().map(|known| known.given.value.max(0.1 * known.size));
        terms.chain(std::iter::repeat_n(1.0, self.n_nuisances)).collect()
    }

    pub fn n_trials(&self) -> usize {
        self.trials.len()
    }

    pub fn n_places(&self) -> usize {
        self.n_places
    }

    /// Rows of a trial's places.
    pub fn rows(&self, trial: usize) -> std::ops::Range<usize> {
        let one = &self.trials[trial];
        one.first_row..one.first_row + one.places_m.len()
    }

    /// Parameters of a trial's nuisances.
    pub fn nuisances(&self, trial: usize) -> std::ops::Range<usize> {
        let one = &self.trials[trial];
        one.first_nuisance..one.first_nuisance + one.nuisances.len()
    }

    /// The setup of a trial at parameters.
    pub fn setup(&self, trial: usize, parameters: &[f64]) -> LaunchSetup {
        let one = &self.trials[trial];
        let mut setup = one.setup.clone();
        for (nuisance, z) in one.nuisances.iter().zip(&parameters[one.first_nuisance..]) {
            nuisance.put(&mut setup, z - 1.0);
        }
        for (term, value) in self.terms.iter().zip(parameters) {
            term.put(&mut setup, *value);
        }
        setup
    }

    /// Modelled speeds at a trial's places; not a number where the shuttle does not come there. A loss below zero is none: there
    /// the speeds go on straight, with their slope at zero, so that a minimum beyond it can be found and refused.
    pub fn speeds(&self, trial: usize, parameters: &[f64], into: &mut Vec<f64>) {
        let below: Vec<usize> = (0..self.terms.len()).filter(|k| parameters[*k] < 0.0).collect();
        if below.is_empty() {
            return self.possible_speeds(trial, parameters, into);
        }
        let mut at = parameters.to_vec();
        below.iter().for_each(|k| at[*k] = 0.0);
        self.possible_speeds(trial, &at, into);
        for k in below {
            let slopes = self.forward(trial, &at, k);
            into.iter_mut().zip(&slopes).for_each(|(speed, slope)| *speed += parameters[k] * slope);
        }
    }

    fn possible_speeds(&self, trial: usize, parameters: &[f64], into: &mut Vec<f64>) {
        let places_m = &self.trials[trial].places_m;
        into.clear();
        match passings(&self.setup(trial, parameters), places_m) {
            Ok(found) => into.extend(found.iter().map(|one| one.map_or(f64::NAN, |passing| passing.v_mps))),
            Err(_) => into.resize(places_m.len(), f64::NAN),
        }
    }

    /// Slopes by a term from three points forward, of the same order as central ones.
    fn forward(&self, trial: usize, parameters: &[f64], k: usize) -> Vec<f64> {
        let (step, mut moved) = (self.step(k), parameters.to_vec());
        let mut at = |steps: f64| {
            moved[k] = parameters[k].max(0.0) + steps * step;
            let mut speeds = Vec::new();
            self.speeds(trial, &moved, &mut speeds);
            speeds
        };
        let (a, b, c) = (at(0.0), at(1.0), at(2.0));
        (0..a.len()).map(|i| (-3.0 * a[i] + 4.0 * b[i] - c[i]) / (2.0 * step)).collect()
    }

    fn step(&self, parameter: usize) -> f64 {
        self.known.get(parameter).map_or(STEP, |known| STEP * known.size)
    }

    /// Derivatives of a trial's speeds by the parameters that move it: (parameter, column).
    pub fn slopes(&self, trial: usize, parameters: &[f64]) -> Vec<(usize, Vec<f64>)> {
        let mut moved = parameters.to_vec();
        let mut at = |k: usize, value: f64| {
            let old = std::mem::replace(&mut moved[k], value);
            let mut speeds = Vec::new();
            self.speeds(trial, &moved, &mut speeds);
            moved[k] = old;
            speeds
        };
        let own = (0..self.terms.len()).chain(self.nuisances(trial));
        own.map(|k| {
            let (here, step) = (parameters[k], self.step(k));
            let column = if k < self.terms.len() && here < step {
                self.forward(trial, parameters, k)
            } else {
                let (above, below) = (at(k, here + step), at(k, here - step));
                above.iter().zip(&below).map(|(a, b)| (a - b) / (2.0 * step)).collect()
            };
            (k, column)
        })
        .collect()
    }

    /// Work on every trial, on the threads allowed, in the order of the trials.
    fn each<T: Send + Default + Clone>(&self, work: impl Fn(usize) -> T + Sync) -> Vec<T> {
        let mut results = vec![T::default(); self.trials.len()];
        let part = results.len().div_ceil(self.threads.max(1)).max(1);
        if part >= results.len() {
            results.iter_mut().enumerate().for_each(|(trial, result)| *result = work(trial));
            return results;
        }
        let work = &work;
        std::thread::scope(|scope| {
            for (index, chunk) in results.chunks_mut(part).enumerate() {
                scope.spawn(move || {
                    chunk.iter_mut().enumerate().for_each(|(i, result)| *result = work(index * part + i));
                });
            }
        });
        results
    }
}

fn known(term: Term, trials: &[&FitTrial], all: &[OneTrial]) -> Known {
    let given = trials.first().map_or(Given::exactly(0.0), |trial| term.given(&trial.rig));
    let sizes = all.iter().map(|one| term.size(&one.setup, one.v_mps.last().copied().unwrap_or(1.0)));
    let size = sizes.fold(f64::INFINITY, f64::min);
    let weak = given.standard_uncertainty <= 0.0;
    let standard_uncertainty = if weak { WEAK * size } else { given.standard_uncertainty };
    Known { given: Given { standard_uncertainty, ..given }, size, weak }
}

impl Residuals for Joint {
    fn n_parameters(&self) -> usize {
        self.terms.len() + self.n_nuisances
    }

    fn n_residuals(&self) -> usize {
        self.n_places + self.terms.len() + self.n_nuisances
    }

    fn residuals(&self, parameters: &[f64], into: &mut [f64]) {
        let widen = 1.0 / self.inflation.sqrt();
        let columns = self.each(|trial| {
            let mut speeds = Vec::new();
            self.speeds(trial, parameters, &mut speeds);
            speeds
        });
        for (one, speeds) in self.trials.iter().zip(columns) {
            for (i, speed) in speeds.iter().enumerate() {
                into[one.first_row + i] = widen * (speed - one.v_mps[i]) / one.u_v_mps[i];
            }
        }
        let mut row = self.n_places;
        for (known, value) in self.known.iter().zip(parameters) {
            into[row] = (value - known.given.value) / known.given.standard_uncertainty;
            row += 1;
        }
        for z in &parameters[self.terms.len()..] {
            into[row] = z - 1.0;
            row += 1;
        }
    }

    fn jacobian(&self, parameters: &[f64], into: &mut DMatrix<f64>) {
        let widen = 1.0 / self.inflation.sqrt();
        into.fill(0.0);
        let columns = self.each(|trial| self.slopes(trial, parameters));
        for (one, slopes) in self.trials.iter().zip(columns) {
            for (k, column) in slopes {
                for (i, slope) in column.iter().enumerate() {
                    into[(one.first_row + i, k)] = widen * slope / one.u_v_mps[i];
                }
            }
        }
        let mut row = self.n_places;
        for (k, known) in self.known.iter().enumerate() {
            into[(row, k)] = 1.0 / known.given.standard_uncertainty;
            row += 1;
        }
        for k in 0..self.n_nuisances {
            into[(row, self.terms.len() + k)] = 1.0;
            row += 1;
        }
    }
}
