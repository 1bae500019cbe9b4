//! Whether a loss earns its place: the fit with and without it.
//!
//! All fits compared share one width of the data, that of the largest. Compared is Akaike's criterion for few data, of
//! quasi-likelihood (K. P. Burnham, D. R. Anderson, *Model Selection and Multimodel Inference*, 2nd edition, 2002, sections
//! 2.4 and 2.5), and beside it the F test of nested fits (N. R. Draper, H. Smith, *Applied Regression Analysis*, 3rd edition,
//! 1998, section 6.1), with as many degrees of freedom as there are independent places.

use serde::Serialize;
use statrs::distribution::{ContinuousCDF, FisherSnedecor};

use super::error::FitError;
use super::solve::{FitOptions, Solved, solved};
use super::term::Term;
use super::trial::FitTrial;

/// The criterion must fall by this for one more loss.
const EARNS: f64 = 2.0;

/// The fit without one of its losses, which then stays at what the rig file says.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Nested {
    pub without: Term,
    /// Of the smaller fit less that of the larger: above zero, the loss is wanted.
    pub delta_aicc: f64,
    pub f: f64,
    /// That chance alone makes F so large.
    pub p: f64,
}

/// The smallest set of losses that is adequate, and how it was come to.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Proposal {
    pub terms: Vec<Term>,
    pub steps: Vec<String>,
}

/// Akaike's criterion of a fit, with as many data as there are independent places.
fn criterion(objective: f64, n_terms: usize, n_independent: f64) -> f64 {
    let k = n_terms as f64;
    objective + 2.0 * k + 2.0 * k * (k + 1.0) / (n_independent - k - 1.0).max(1.0)
}

fn n_independent(solved: &Solved) -> f64 {
    solved.joint.n_places() as f64 / solved.together
}

/// What stands against a trial's model with nothing fitted: speeds alone, the nuisances left to move.
fn objective_without(
    trials: &[&FitTrial],
    options: &FitOptions,
    terms: &[Term],
    inflation: f64,
) -> Result<f64, FitError> {
    let options = FitOptions { terms: terms.to_vec(), ..options.clone() };
    Ok(solved(trials, &options, Some(inflation))?.objective)
}

/// Every loss of a fit left out in turn.
pub(super) fn nested(trials: &[&FitTrial], options: &FitOptions, whole: &Solved) -> Result<Vec<Nested>, FitError> {
    let terms = &whole.joint.terms;
    if terms.len() < 2 {
        return Ok(Vec::new());
    }
    let (n, inflation) = (n_independent(whole), whole.joint.inflation);
    let free = (n - terms.len() as f64).max(1.0);
    let one = |k: usize| {
        let fewer: Vec<Term> = terms.iter().copied().filter(|term| *term != terms[k]).collect();
        let smaller = objective_without(trials, options, &fewer, inflation)?;
        let f = (smaller - whole.objective).max(0.0) / (whole.objective / free).max(f64::MIN_POSITIVE);
        let delta_aicc = criterion(smaller, fewer.len(), n) - criterion(whole.objective, terms.len(), n);
        let p = FisherSnedecor::new(1.0, free).map_or(f64::NAN, |distribution| distribution.sf(f));
        Ok(Nested { without: terms[k], delta_aicc, f, p })
    };
    (0..terms.len()).map(one).collect()
}

/// Adds one loss after the other, each time the one that helps most, as long as it earns its place.
///
/// # Errors
/// As [`super::fit`].
pub fn propose(trials: &[FitTrial], candidates: &[Term], options: &FitOptions) -> Result<Proposal, FitError> {
    let all: Vec<&FitTrial> = trials.iter().collect();
    let largest = solved(&all, &FitOptions { terms: candidates.to_vec(), ..options.clone() }, None)?;
    let (n, inflation) = (n_independent(&largest), largest.joint.inflation);
    let mut chosen: Vec<Term> = Vec::new();
    let mut best = f64::INFINITY;
    let mut steps = Vec::new();
    loop {
        let rest = candidates.iter().filter(|term| !chosen.contains(term));
        let mut tried = Vec::new();
        for term in rest {
            let terms: Vec<Term> = chosen.iter().copied().chain([*term]).collect();
            let objective = objective_without(&all, options, &terms, inflation)?;
            tried.push((*term, criterion(objective, terms.len(), n)));
        }
        let Some((term, reached)) = tried.into_iter().min_by(|a, b| a.1.total_cmp(&b.1)) else { break };
        if reached > best - EARNS {
            steps.push(format!("{} would change the criterion by {:+.1}: not added", term.name(), reached - best));
            break;
        }
        let by = if best.is_finite() { format!(", {:+.1}", reached - best) } else { String::new() };
        steps.push(format!("{} added: criterion {reached:.1}{by}", term.name()));
        best = reached;
        chosen.push(term);
    }
    Ok(Proposal { terms: chosen, steps })
}
