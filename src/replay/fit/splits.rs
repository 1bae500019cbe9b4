//! What the trials determine and what they leave open, and which further trial would tell more.
//!
//! With J the derivatives of the speeds over their uncertainties, each loss in units of its prior's width and the nuisances
//! taken out (Schur complement), the singular values of J say how well each combination of losses is known: one over a
//! singular value is the combination's standard uncertainty in widths of the priors, above one it is left as it was.

use nalgebra::{DMatrix, SymmetricEigen};
use serde::Serialize;

use super::joint::Joint;
use super::solve::{Solved, inverse};
use super::term::Term;
use super::trial::FitTrial;
use crate::estimation::Residuals;
use crate::model::{LaunchSetup, passings};
use crate::rig::{Given, Rig};

/// Shares of a combination that are named.
const NAMED: f64 = 0.15;

/// A direction in the space of the losses.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Combination {
    /// Of unit length, each loss in widths of its prior.
    pub shares: Vec<(String, f64)>,
    pub singular_value: f64,
    /// The trials know it better than the priors do.
    pub determined: bool,
}

impl Combination {
    pub fn words(&self) -> String {
        let named = self.shares.iter().filter(|(_, share)| share.abs() >= NAMED);
        let word = |(i, (name, share)): (usize, &(String, f64))| {
            let sign = if *share < 0.0 {
                "− "
            } else if i > 0 {
                "+ "
            } else {
                ""
            };
            format!("{sign}{:.2} {name}", share.abs())
        };
        named.enumerate().map(word).collect::<Vec<_>>().join(" ")
    }
}

/// A trial that was not made, and what it would tell.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct NextTrial {
    pub what: String,
    /// Width of the least known combination after it, over the width now.
    pub leaves: f64,
}

/// What the speeds alone say of the terms, the nuisances taken out.
fn information(joint: &Joint, parameters: &[f64]) -> DMatrix<f64> {
    let n_terms = joint.terms.len();
    let mut jacobian = DMatrix::zeros(joint.n_residuals(), parameters.len());
    joint.jacobian(parameters, &mut jacobian);
    for row in joint.n_places()..joint.n_places() + n_terms {
        jacobian.row_mut(row).fill(0.0);
    }
    let normal = jacobian.tr_mul(&jacobian);
    let n_own = parameters.len() - n_terms;
    let terms = normal.view((0, 0), (n_terms, n_terms)).into_owned();
    if n_own == 0 {
        return terms;
    }
    let between = normal.view((0, n_terms), (n_terms, n_own)).into_owned();
    let own = normal.view((n_terms, n_terms), (n_own, n_own)).into_owned();
    terms - &between * inverse(&own) * between.transpose()
}

fn widths(joint: &Joint) -> Vec<f64> {
    joint.known.iter().map(|known| known.given.standard_uncertainty).collect()
}

fn in_widths(matrix: &DMatrix<f64>, widths: &[f64]) -> DMatrix<f64> {
    DMatrix::from_fn(matrix.nrows(), matrix.ncols(), |i, j| matrix[(i, j)] * widths[i] * widths[j])
}

/// Every combination, the best known first.
pub(super) fn combinations(solved: &Solved) -> Vec<Combination> {
    let joint = &solved.joint;
    let eigen = SymmetricEigen::new(in_widths(&information(joint, &solved.parameters), &widths(joint)));
    let mut all: Vec<Combination> = (0..joint.terms.len())
        .map(|k| {
            let singular_value = eigen.eigenvalues[k].max(0.0).sqrt();
            let vector = eigen.eigenvectors.column(k);
            let sign = if vector[vector.iamax()] < 0.0 { -1.0 } else { 1.0 };
            let named = joint.terms.iter().zip(vector.iter());
            let shares = named.map(|(term, share)| (term.name().to_owned(), sign * share)).collect();
            Combination { shares, singular_value, determined: singular_value > 1.0 }
        })
        .collect();
    all.sort_by(|a, b| b.singular_value.total_cmp(&a.singular_value));
    all
}

/// Trials with another count, draw or mass, the most telling first.
pub(super) fn next_trials(trials: &[&FitTrial], solved: &Solved) -> Vec<NextTrial> {
    let joint = &solved.joint;
    let Some(last) = trials.last() else { return Vec::new() };
    let widths = widths(joint);
    let now =
        in_widths(&information(joint, &solved.parameters), &widths) + DMatrix::identity(widths.len(), widths.len());
    let eigen = SymmetricEigen::new(now.clone());
    let weakest = eigen.eigenvectors.column(eigen.eigenvalues.imin()).into_owned();
    let width = |matrix: &DMatrix<f64>| (weakest.transpose() * inverse(matrix) * &weakest)[(0, 0)].sqrt();
    let u_mps = typical_u_mps(trials) * joint.inflation.sqrt();
    let told = |(what, rig): (String, Rig)| {
        let planned = imagined(&what, &rig, last, &joint.terms, &solved.parameters, u_mps)?;
        let alone = Joint::of(&[&planned], &joint.terms, 1).ok()?;
        let mut parameters = alone.start();
        parameters[..joint.terms.len()].copy_from_slice(&solved.parameters[..joint.terms.len()]);
        let more = in_widths(&information(&alone, &parameters), &widths);
        let leaves = width(&(&now + more)) / width(&now);
        leaves.is_finite().then_some(NextTrial { what, leaves })
    };
    let mut all: Vec<NextTrial> = candidates(&last.rig).into_iter().filter_map(told).collect();
    all.sort_by(|a, b| a.leaves.total_cmp(&b.leaves));
    all
}

fn typical_u_mps(trials: &[&FitTrial]) -> f64 {
    let mut all: Vec<f64> = trials.iter().flat_map(|trial| trial.u_v_mps.iter().copied()).collect();
    all.sort_by(f64::total_cmp);
    all.get(all.len() / 2).copied().unwrap_or(1.0)
}

/// What a crew can change without building anything.
fn candidates(rig: &Rig) -> Vec<(String, Rig)> {
    let changed = |what: String, change: &dyn Fn(&mut Rig)| {
        let mut rig = rig.clone();
        change(&mut rig);
        (what, rig)
    };
    let count = rig.cords.count;
    let mass_kg = rig.payload.mass_kg.value;
    let draw_m = rig.plan.draw_m;
    let mut all = Vec::new();
    for other in [count.saturating_sub(2), count.saturating_sub(1), count + 1, count + 2] {
        if other > 0 && count > 0 {
            all.push(changed(format!("{other} cords"), &|rig| rig.cords.count = other));
        }
    }
    for part in [0.5, 0.7] {
        let draw_m = part * draw_m;
        all.push(changed(format!("a draw of {draw_m:.2} m"), &|rig| rig.plan.draw_m = draw_m));
    }
    for part in [0.5, 1.5] {
        let mass_kg = part * mass_kg;
        all.push(changed(format!("a payload of {mass_kg:.2} kg"), &|rig| rig.payload.mass_kg.value = mass_kg));
    }
    all.push(changed("the shuttle alone, drawn half as far".to_owned(), &|rig| {
        rig.payload.mass_kg = Given::exactly(0.0);
        rig.payload.drag_area_m2 = Given::exactly(0.0);
        rig.plan.draw_m *= 0.5;
    }));
    all
}

/// A trial as the model expects it; none where the rig can't be launched so.
fn imagined(
    what: &str,
    rig: &Rig,
    like: &FitTrial,
    terms: &[Term],
    parameters: &[f64],
    u_mps: f64,
) -> Option<FitTrial> {
    const PLACES: u32 = 40;
    let mut lossless = rig.clone();
    terms.iter().for_each(|term| term.clear(&mut lossless));
    let mut setup = LaunchSetup::planned(&lossless).ok()?;
    terms.iter().zip(parameters).for_each(|(term, value)| term.put(&mut setup, *value));
    let way_m = rig.rail.zero_mark_x_m - setup.start_x_m;
    let place = |k: u32| setup.start_x_m + way_m * (0.04 + 0.92 * f64::from(k) / f64::from(PLACES));
    let places_m: Vec<f64> = (0..=PLACES).map(place).collect();
    let speeds: Vec<f64> = passings(&setup, &places_m).ok()?.iter().map_while(|one| one.map(|p| p.v_mps)).collect();
    let trial = FitTrial::from_speeds(what, rig, &places_m, &speeds, u_mps).ok()?;
    Some(FitTrial { nuisances: like.nuisances.clone(), ..trial })
}
