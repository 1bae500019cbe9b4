//! Why there is no fit, or why a trial is not in it.

use thiserror::Error;

use crate::estimation::NonlinearError;
use crate::model::ModelError;

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum FitError {
    #[error("there is no trial to fit")]
    NoTrial,
    #[error("there is no loss to fit: name some with --terms, or let `--terms auto` propose them")]
    NoTerm,
    #[error("the trials are of different rigs ({}): fit the trials of one rig at a time", rigs.join(", "))]
    DifferentRigs { rigs: Vec<String> },
    #[error(
        "{n_trials} trial(s) of {n_configurations} configuration(s) can't tell {n_terms} losses apart that the rig file says nothing \
         of; what they leave open: {open}. {advice}"
    )]
    Undetermined { n_trials: usize, n_configurations: usize, n_terms: usize, open: String, advice: String },
    #[error("trial {trial} can't be launched by the model")]
    Model { trial: String, source: ModelError },
    #[error("the fit found no minimum: {0}")]
    NoMinimum(#[from] NonlinearError),
}

/// Why a trial can't be fitted.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum Refused {
    #[error("it ended as {outcome}: only launches and pulls of the shuttle alone are fitted")]
    Outcome { outcome: &'static str },
    #[error("its reading has no {what}: {reason}")]
    Lacking { what: &'static str, reason: String },
    #[error("only {n} places of its stroke have a measured speed, at least {needed} are needed")]
    TooShort { n: usize, needed: usize },
    #[error("it is the same trial as {first}")]
    Twice { first: String },
    #[error("the launch model can't start from its hold")]
    Model(#[from] ModelError),
}
