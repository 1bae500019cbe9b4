//! Losses from trials: joint nonlinear least squares over launches and pulls of the shuttle alone.
//!
//! Each trial's model starts from that trial's own measured hold; what is compared is the speed at places along the rail, so
//! that the instant of the release does not matter. Free are the losses asked for, common to all trials, and for each trial
//! what its own hold and day leave open (its pull over its mass, its head wind), held by their standard uncertainties. What
//! the rig file knows of a loss already is held the same way, so that a direction in which the trials say nothing keeps the
//! width it had.
//!
//! Residuals of one launch move together. Their chi-square per degree of freedom and their correlation along the rail widen
//! every uncertainty of the data: a misfit of the model costs width, never goes unseen.
//!
//! # A fit in twenty lines
//!
//! ```
//! use tautrail::model::{LaunchSetup, passings};
//! use tautrail::replay::fit::{FitOptions, FitTrial, Term, fit};
//!
//! # fn main() -> Result<(), Box<dyn std::error::Error>> {
//! let rig = tautrail::rig::load("tools/rehearsal/north-pier.toml".as_ref())?;
//! let mut trials = Vec::new();
//! for (number, cords) in [(1, 4), (2, 5), (3, 6)] {
//!     // Of a sealed trial this is `FitTrial::of`; here the model itself plays a rig with 17 N of friction.
//!     let mut rig = rig.clone();
//!     rig.cords.count = cords;
//!     rig.losses.friction_n.value = 17.0;
//!     let places_m: Vec<f64> = (1..30).map(|n| 0.12 * f64::from(n)).collect();
//!     let seen = passings(&LaunchSetup::planned(&rig)?, &places_m)?;
//!     let speeds_mps: Vec<f64> = seen.iter().flatten().map(|passing| passing.v_mps).collect();
//!     rig.losses.friction_n.value = 12.0; // what the rig file says
//!     trials.push(FitTrial::from_speeds(&format!("trial {number}"), &rig, &places_m, &speeds_mps, 0.005)?);
//! }
//! let found = fit(&trials, &FitOptions::of(vec![Term::Friction]))?;
//! let friction = &found.terms[0];
//! assert!((friction.fitted.value - 17.0).abs() < 3.0 * friction.fitted.standard_uncertainty);
//! println!("{} {:.2} {}", friction.term.meaning(), friction.fitted.value, friction.term.unit());
//! # Ok(())
//! # }
//! ```

mod card;
mod choose;
mod error;
mod joint;
mod left_out;
mod outcome;
mod solve;
mod splits;
mod term;
#[cfg(test)]
mod tests;
mod trial;

pub use card::{CardHeading, card_text};
pub use choose::{Nested, propose};
pub use error::{FitError, Refused};
pub use left_out::LeftOut;
pub use outcome::{FittedTerm, LossFit, TrialMisfit};
pub use solve::{FitOptions, fit};
pub use splits::{Combination, NextTrial};
pub use term::Term;
pub use trial::{Configuration, FitTrial, Kind, Nuisance};
