//! Timed holds: relaxation at constant length as a Prony series, creep at constant load as it was seen.
//!
//! G(t) = 1 − Σ gᵢ (1 − e^(−t/τᵢ)), convolved with the winch-back that led to the hold, taken as even over w (R. M.
//! Christensen, *Theory of Viscoelasticity*, 1982, section 1.2). What the cell itself creeps by is taken off the readings
//! first and named apart. Terms faster than a third of the winch-back have gone while the cord was drawn: what would be left of
//! them in the hold is too little to tell their share, and they count as part of the curve. The number of terms, 1 to 3, is the one with the least corrected information criterion (C. M.
//! Hurvich, C.-L. Tsai, Biometrika 76 (1989) 297-307).

use super::error::CordError;
use crate::estimation::{Bound, FitOptions, Stepped, fit_nonlinear};
use crate::rig::RelaxationTerm;

/// Shortest time of a term, as a share of the winch-back.
const FASTEST: f64 = 1.0 / 3.0;

/// A hold at one length.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Hold {
    /// From the first pull to the start of the hold.
    pub(super) winch_s: f64,
    /// (since the start of the hold s, tension N).
    pub(super) readings: Vec<(f64, f64)>,
}

/// Relaxation with its uncertainty.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Relaxation {
    /// By increasing time.
    pub terms: Vec<RelaxationTerm>,
    /// Standard uncertainty of each share.
    pub share_uncertainties: Vec<f64>,
    /// Root mean square of the residuals over the tension.
    pub relative_rms: f64,
    /// Longest hold: nothing is known beyond.
    pub longest_s: f64,
    /// Largest share of the tension that was taken off as the cell's own creep.
    pub cell_creep_removed: f64,
}

/// How a cord lengthened at constant load.
#[derive(Debug, Clone, PartialEq)]
pub struct Creep {
    pub serial: String,
    pub tension_n: f64,
    pub elongation: f64,
    /// Growth of the elongation for each tenfold of time.
    pub per_tenfold: f64,
    pub longest_s: f64,
}

/// Part of the tension left after a steady winch-back and a hold, against a draw in no time at all.
pub fn held_part(terms: &[RelaxationTerm], winch_s: f64, hold_s: f64) -> f64 {
    let lost = terms.iter().map(|term| {
        let (ramp, hold) = (winch_s / term.time_s, hold_s / term.time_s);
        let ramp_part = if ramp > 1e-9 { -(-ramp).exp_m1() / ramp } else { 1.0 };
        term.share * (1.0 - ramp_part * (-hold).exp())
    });
    1.0 - lost.sum::<f64>()
}

/// Relative creep of the cell since the hold began, with the terms of its own record.
pub(super) fn cell_creep(terms: &[RelaxationTerm], hold_s: f64) -> f64 {
    terms.iter().map(|term| term.share * -(-hold_s / term.time_s).exp_m1()).sum()
}

/// The Prony series of all holds together, each with a tension of its own; `None` without a hold of four readings.
pub(super) fn relaxation(holds: &[Hold], cell: &[RelaxationTerm]) -> Result<Option<Relaxation>, CordError> {
    let holds: Vec<Hold> =
        holds.iter().filter(|hold| hold.readings.len() > 3).map(|hold| without_cell(hold, cell)).collect();
    let n_readings: usize = holds.iter().map(|hold| hold.readings.len()).sum();
    let longest_s = holds.iter().flat_map(|hold| &hold.readings).map(|one| one.0).fold(0.0, f64::max);
    if holds.is_empty() || longest_s <= 0.0 {
        return Ok(None);
    }
    let mut best: Option<(f64, Relaxation)> = None;
    let mut failed = None;
    for n_terms in 1..=3 {
        let n_fitted = 2 * n_terms + holds.len();
        if n_readings < n_fitted + 2 {
            break;
        }
        match prony(&holds, n_terms, n_readings, longest_s) {
            Ok(found) => {
                let (n, k) = (n_readings as f64, n_fitted as f64 + 1.0);
                let penalty = 2.0 * k + 2.0 * k * (k + 1.0) / (n - k - 1.0).max(0.5);
                let criterion = n * found.relative_rms.powi(2).max(1e-24).ln() + penalty;
                if best.as_ref().is_none_or(|(least, _)| criterion < *least) {
                    best = Some((criterion, found));
                }
            }
            Err(error) => failed = Some(error),
        }
    }
    match (best, failed) {
        (Some((_, mut found)), _) => {
            found.cell_creep_removed = cell_creep(cell, longest_s);
            Ok(Some(found))
        }
        (None, Some(error)) => Err(error),
        (None, None) => Ok(None),
    }
}

fn without_cell(hold: &Hold, cell: &[RelaxationTerm]) -> Hold {
    let readings = hold.readings.iter().map(|(t, n)| (*t, n / (1.0 + cell_creep(cell, *t)))).collect();
    Hold { winch_s: hold.winch_s, readings }
}

/// Shares and times, the holds' own tensions eliminated: they are linear.
fn prony(holds: &[Hold], n_terms: usize, n_readings: usize, longest_s: f64) -> Result<Relaxation, CordError> {
    let shortest_s = holds
        .iter()
        .flat_map(|hold| hold.readings.iter().map(|one| one.0).filter(|t| *t > 0.0))
        .fold(f64::INFINITY, f64::min)
        .min(0.5 * longest_s);
    let winch_s = holds.iter().map(|hold| hold.winch_s).fold(f64::INFINITY, f64::min);
    let fastest_s = (0.3 * shortest_s).max(FASTEST * winch_s).min(0.5 * longest_s);
    let (low, high) = (fastest_s.ln(), (5.0 * longest_s).ln());
    let mut start = Vec::new();
    for term in 0..n_terms {
        let place = (term as f64 + 0.7) / (n_terms as f64 + 0.4);
        start.extend([0.05, low + place * (longest_s / fastest_s).ln()]);
    }
    let bounds = (0..n_terms).flat_map(|_| [Bound::Between(0.0, 0.5), Bound::Between(low, high)]).collect();
    let model = Stepped::new(n_readings, [0.01, 1.0].repeat(n_terms), |p: &[f64], into: &mut [f64]| {
        let terms = terms_of(p);
        let mut place = 0;
        for hold in holds {
            let shape: Vec<f64> = hold.readings.iter().map(|one| held_part(&terms, hold.winch_s, one.0)).collect();
            let products: f64 = shape.iter().zip(&hold.readings).map(|(part, one)| part * one.1).sum();
            let tension_n = products / shape.iter().map(|part| part * part).sum::<f64>();
            for (part, one) in shape.iter().zip(&hold.readings) {
                into[place] = part * tension_n / one.1 - 1.0;
                place += 1;
            }
        }
    });
    let options = FitOptions { bounds, tolerance: 1e-12, ..FitOptions::default() };
    let fit = fit_nonlinear(&model, &start, &options)?;
    let freedom = (n_readings - 2 * n_terms).saturating_sub(holds.len()).max(1) as f64;
    let widen = (fit.degrees_of_freedom as f64 / freedom).sqrt();
    let mut found: Vec<(RelaxationTerm, f64)> = terms_of(&fit.parameters)
        .into_iter()
        .enumerate()
        .map(|(term, what)| (what, widen * fit.standard_uncertainty(2 * term)))
        .collect();
    found.sort_by(|one, other| one.0.time_s.total_cmp(&other.0.time_s));
    Ok(Relaxation {
        terms: found.iter().map(|one| one.0).collect(),
        share_uncertainties: found.iter().map(|one| one.1).collect(),
        relative_rms: (fit.sum_of_squares / n_readings as f64).sqrt(),
        longest_s,
        cell_creep_removed: 0.0,
    })
}

fn terms_of(parameters: &[f64]) -> Vec<RelaxationTerm> {
    parameters.chunks(2).map(|pair| RelaxationTerm { share: pair[0], time_s: pair[1].exp() }).collect()
}

/// Growth of the elongation for each tenfold of time, by a straight line over the logarithm; `None` for fewer than three
/// readings after the first second.
pub(super) fn creep(serial: &str, tension_n: f64, readings: &[(f64, f64)]) -> Option<Creep> {
    let late: Vec<(f64, f64)> =
        readings.iter().filter(|one| one.0 >= 1.0).map(|(t, elongation)| (t.log10(), *elongation)).collect();
    if late.len() < 3 {
        return None;
    }
    let n = late.len() as f64;
    let mean = late.iter().fold((0.0, 0.0), |sum, one| (sum.0 + one.0 / n, sum.1 + one.1 / n));
    let (xy, xx) = late
        .iter()
        .fold((0.0, 0.0), |sum, one| (sum.0 + (one.0 - mean.0) * (one.1 - mean.1), sum.1 + (one.0 - mean.0).powi(2)));
    let longest_s = readings.iter().map(|one| one.0).fold(0.0, f64::max);
    (xx > 0.0).then(|| Creep { serial: serial.into(), tension_n, elongation: mean.1, per_tenfold: xy / xx, longest_s })
}
