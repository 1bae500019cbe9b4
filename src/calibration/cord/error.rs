//! Why no card can be made.

use thiserror::Error;

use crate::estimation::{LinearError, NonlinearError};

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum CordError {
    #[error(
        "{branch} branch: {found} readings at different elongations, at least {wanted} are needed: go in smaller steps"
    )]
    TooFew { branch: &'static str, found: usize, wanted: usize },
    #[error("{branch} branch: all readings have the same {what}, nothing can be fitted to them")]
    AllEqual { branch: &'static str, what: &'static str },
    #[error("line {line}: {what} is not a number")]
    NotFinite { line: usize, what: &'static str },
    #[error("line {line}: cord {serial}, cycle {cycle}: {what}; put the readings in the order they were taken")]
    Order { line: usize, serial: String, cycle: u32, what: String },
    #[error("no reading is left after {conditioning} conditioning cycles: the last cycle in the table is {last}")]
    OnlyConditioning { conditioning: u32, last: u32 },
    #[error("{branch} branch: no law fits the readings ({why})")]
    NoLaw { branch: &'static str, why: String },
    #[error("the law can't be fitted: {0}")]
    Linear(#[from] LinearError),
    #[error("the law can't be fitted: {0}")]
    Nonlinear(#[from] NonlinearError),
}
