//! How the tension comes down from the loading to the unloading branch where a cord turns back early.
//!
//! The rule: turned at elongation e₁, it is the unloading branch plus the gap between the branches at e₁ times
//! exp(−(e₁ − e)/width). The card's unloading branch was read from the furthest turning point; a second, nearer one tells
//! the width. With one turning point only, the width is a guess and its spread is carried as an uncertainty.

use super::branch::BranchFit;
use super::order::Cycle;
use crate::estimation::{Bound, FitOptions, Stepped, fit_nonlinear};
use crate::rig::{CordBranch, Given};

/// Width and standard uncertainty where it was not measured: common practice, no published source.
const GUESSED: Given = Given { value: 0.05, standard_uncertainty: 0.03 };
/// A cycle counts as turned early below this share of the furthest elongation.
const EARLY: f64 = 0.92;

/// The rule's width.
#[derive(Debug, Clone, PartialEq)]
pub struct TurningPoint {
    pub width: Given,
    /// Elongations at which cords were turned, furthest last; one where the width is a guess.
    pub turned_at: Vec<f64>,
}

pub(super) fn is_early(cycle: &Cycle<'_>, furthest: f64) -> bool {
    cycle.furthest() < EARLY * furthest
}

/// The width from the cycles that turned early.
pub(super) fn turning(early: &[&Cycle<'_>], furthest: f64, loading: &BranchFit, unloading: &BranchFit) -> TurningPoint {
    let mut turned_at: Vec<f64> = early.iter().map(|cycle| cycle.furthest()).collect();
    turned_at.sort_by(f64::total_cmp);
    turned_at.dedup_by(|later, earlier| *later - *earlier < 0.02);
    turned_at.push(furthest);
    let readings: Vec<(f64, f64, f64, f64)> =
        early.iter().flat_map(|cycle| descents(cycle, loading, unloading)).collect();
    let width = fitted_width(&readings);
    match width {
        Some(width) => TurningPoint { width, turned_at },
        None => TurningPoint { width: GUESSED, turned_at: vec![furthest] },
    }
}

/// (elongation, turned at, gap at the turn, excess over the unloading branch) of an early cycle's unloading readings.
fn descents(cycle: &Cycle<'_>, loading: &BranchFit, unloading: &BranchFit) -> Vec<(f64, f64, f64, f64)> {
    let turned_at = cycle.furthest();
    // The cord's own factor, by its loading readings.
    let (product, square) = cycle.of(CordBranch::Load).fold((0.0, 0.0), |sum, reading| {
        let law_n = loading.law.tension_n(reading.elongation);
        (sum.0 + law_n * reading.tension_n, sum.1 + law_n * law_n)
    });
    let factor = product / square;
    let gap_n = loading.law.tension_n(turned_at) - unloading.law.tension_n(turned_at);
    if !(factor > 0.0 && gap_n > 0.0) {
        return Vec::new();
    }
    let of = |elongation: f64, tension_n: f64| {
        (elongation, turned_at, gap_n, tension_n / factor - unloading.law.tension_n(elongation))
    };
    cycle.of(CordBranch::Unload).map(|reading| of(reading.elongation, reading.tension_n)).collect()
}

fn fitted_width(readings: &[(f64, f64, f64, f64)]) -> Option<Given> {
    if readings.len() < 3 {
        return None;
    }
    let model = Stepped::new(readings.len(), vec![0.01], |p: &[f64], into: &mut [f64]| {
        for (residual, (elongation, turned_at, gap_n, excess_n)) in into.iter_mut().zip(readings) {
            *residual = gap_n * ((elongation - turned_at) / p[0]).exp() - excess_n;
        }
    });
    let options = FitOptions { bounds: vec![Bound::Between(0.003, 1.0)], ..FitOptions::default() };
    let fit = fit_nonlinear(&model, &[0.05], &options).ok()?;
    let found = Given { value: fit.parameters[0], standard_uncertainty: fit.standard_uncertainty(0) };
    (fit.on_bound.is_empty() && found.standard_uncertainty < found.value).then_some(found)
}
