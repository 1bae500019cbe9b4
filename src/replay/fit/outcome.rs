//! What a fit found.

use serde::Serialize;

use super::choose::Nested;
use super::left_out::LeftOut;
use super::solve::Solved;
use super::splits::{Combination, NextTrial};
use super::term::Term;
use super::trial::{Configuration, FitTrial, Kind};
use crate::rig::{Given, ValidRange};

/// One loss with what was known of it and what is known now.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct FittedTerm {
    pub term: Term,
    pub unit: &'static str,
    pub fitted: Given,
    /// What held it beside the trials.
    pub prior: Given,
    /// The rig file has no uncertainty of it, so that the prior is a tenth of the pull.
    pub prior_is_weak: bool,
    /// It ended at zero: the trials want it no greater.
    pub at_zero: bool,
}

/// How a trial lies about the fit.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct TrialMisfit {
    pub id: String,
    pub raw_sha256: String,
    pub kind: Kind,
    pub configuration: Configuration,
    pub n_places: usize,
    /// Of its speeds, by their own uncertainties.
    pub chi_square_per_place: f64,
    /// Measured minus modelled speed: mean, root mean square, at the last place.
    pub bias_mps: f64,
    pub rms_mps: f64,
    pub last_mps: f64,
    /// What the fit took the trial's own day to be, in standard uncertainties.
    pub own: Vec<(String, f64)>,
    /// Why it does not belong to the others.
    pub outlier: Option<String>,
}

/// Everything a fit says.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct LossFit {
    pub rig: String,
    pub invented: bool,
    pub terms: Vec<FittedTerm>,
    /// Of the terms.
    pub covariance: Vec<Vec<f64>>,
    pub correlations: Vec<Vec<f64>>,
    pub trials: Vec<TrialMisfit>,
    /// Of all measured speeds by their own uncertainties, before any widening.
    pub chi_square: f64,
    pub degrees_of_freedom: f64,
    /// Of neighbouring places along the rail.
    pub autocorrelation: f64,
    /// Factor on the variance of the speeds for misfit and correlation.
    pub inflation: f64,
    /// What the trials determine, the best known first.
    pub combinations: Vec<Combination>,
    pub next_trials: Vec<NextTrial>,
    pub left_out: Vec<LeftOut>,
    /// Relative standard deviation of the launch speed from trial to trial that the losses leave.
    pub unexplained: f64,
    pub nested: Vec<Nested>,
    pub valid: ValidRange,
    /// Why the solver stopped.
    pub stop: String,
    pub evaluations: usize,
}

impl LossFit {
    pub fn chi_square_per_degree(&self) -> f64 {
        self.chi_square / self.degrees_of_freedom.max(1.0)
    }

    /// Whether the model leaves something that its uncertainties don't explain.
    pub fn misfits(&self) -> bool {
        self.inflation > 2.0
    }
}

/// The outcome without what is examined afterwards.
pub(super) fn assembled(trials: &[&FitTrial], solved: &Solved) -> LossFit {
    let joint = &solved.joint;
    let n = joint.terms.len();
    let covariance: Vec<Vec<f64>> = (0..n).map(|i| (0..n).map(|j| solved.covariance[(i, j)]).collect()).collect();
    let correlation = |i: usize, j: usize| covariance[i][j] / (covariance[i][i] * covariance[j][j]).sqrt();
    let correlations = (0..n).map(|i| (0..n).map(|j| correlation(i, j)).collect()).collect();
    let term = |k: usize| FittedTerm {
        term: joint.terms[k],
        unit: joint.terms[k].unit(),
        fitted: Given { value: solved.parameters[k], standard_uncertainty: covariance[k][k].sqrt() },
        prior: joint.known[k].given,
        prior_is_weak: joint.known[k].weak,
        at_zero: solved.at_zero.contains(&k),
    };
    LossFit {
        rig: trials.first().map(|trial| trial.rig.name.clone()).unwrap_or_default(),
        invented: trials.iter().any(|trial| trial.rig.invented),
        terms: (0..n).map(term).collect(),
        correlations,
        trials: trials.iter().enumerate().map(|(i, trial)| misfit(trial, i, solved)).collect(),
        covariance,
        chi_square: solved.chi_square,
        degrees_of_freedom: solved.degrees_of_freedom,
        autocorrelation: solved.autocorrelation,
        inflation: joint.inflation,
        combinations: Vec::new(),
        next_trials: Vec::new(),
        left_out: Vec::new(),
        unexplained: super::left_out::LEAST_UNEXPLAINED,
        nested: Vec::new(),
        valid: valid(trials),
        stop: solved.stop.clone(),
        evaluations: solved.evaluations,
    }
}

fn misfit(trial: &FitTrial, index: usize, solved: &Solved) -> TrialMisfit {
    let mut speeds = Vec::new();
    solved.joint.speeds(index, &solved.parameters, &mut speeds);
    let residuals: Vec<f64> = trial.v_mps.iter().zip(&speeds).map(|(seen, modelled)| seen - modelled).collect();
    let n = residuals.len() as f64;
    let normalised = residuals.iter().zip(&trial.u_v_mps).map(|(r, u)| (r / u).powi(2));
    let own = solved.joint.nuisances(index).zip(&trial.nuisances);
    TrialMisfit {
        id: trial.id.clone(),
        raw_sha256: trial.raw_sha256.clone(),
        kind: trial.kind,
        configuration: trial.configuration,
        n_places: residuals.len(),
        chi_square_per_place: normalised.sum::<f64>() / n,
        bias_mps: residuals.iter().sum::<f64>() / n,
        rms_mps: (residuals.iter().map(|r| r * r).sum::<f64>() / n).sqrt(),
        last_mps: residuals.last().copied().unwrap_or(f64::NAN),
        own: own.map(|(k, nuisance)| (nuisance.meaning().to_owned(), solved.parameters[k] - 1.0)).collect(),
        outlier: None,
    }
}

fn valid(trials: &[&FitTrial]) -> ValidRange {
    let range = |of: &dyn Fn(&Configuration) -> Option<f64>| {
        let values = trials.iter().filter_map(|trial| of(&trial.configuration));
        let (low, high) = values.fold((f64::INFINITY, 0.0_f64), |(low, high), v| (low.min(v), high.max(v)));
        if low.is_finite() { (low, high) } else { (0.0, 0.0) }
    };
    ValidRange {
        cord_count: range(&|c| Some(c.cord_count)),
        moving_mass_kg: range(&|c| Some(c.moving_mass_kg)),
        draw_m: range(&|c| Some(c.draw_m)),
        pull_n: range(&|c| Some(c.pull_n)),
        launch_speed_mps: range(&|c| c.launch_speed_mps),
    }
}
