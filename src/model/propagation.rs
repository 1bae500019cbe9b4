//! First-order propagation of uncertainty through a launch (JCGM 100:2008, equations 13 and 16), with central differences
//! over one standard uncertainty.

use super::error::ModelError;
use super::inputs::{Inputs, Moved};
use super::interval::Interval;
use super::setup::LaunchSetup;

/// One answer with what each input changes in it.
#[derive(Debug, Clone, PartialEq)]
pub struct Propagated {
    pub interval: Interval,
    /// Change of the answer for one standard uncertainty of each input, in the order of the inputs.
    pub shares: Vec<f64>,
}

/// Propagates every input of `inputs` to the answers that `evaluate` takes from a moved launch and the deviates that moved it.
///
/// # Errors
/// The launch itself can't be computed; a moved input that ends so counts as no change.
pub fn first_order<const K: usize>(
    setup: &LaunchSetup,
    inputs: &Inputs,
    evaluate: impl Fn(&Moved, &[f64]) -> Result<[f64; K], ModelError>,
) -> Result<[Propagated; K], ModelError> {
    let mut deviates = vec![0.0; inputs.all.len()];
    let best = evaluate(&inputs.moved(setup, &deviates), &deviates)?;
    let mut shares: [Vec<f64>; K] = std::array::from_fn(|_| Vec::with_capacity(inputs.all.len()));
    for i in 0..inputs.all.len() {
        let mut at = |deviate: f64| {
            deviates[i] = deviate;
            let answer = evaluate(&inputs.moved(setup, &deviates), &deviates).unwrap_or(best);
            deviates[i] = 0.0;
            answer
        };
        let (up, down) = (at(1.0), at(-1.0));
        for (k, list) in shares.iter_mut().enumerate() {
            list.push(0.5 * (up[k] - down[k]));
        }
    }
    let mut best = best.into_iter();
    Ok(shares.map(|shares| {
        let value = best.next().unwrap_or(f64::NAN);
        Propagated { interval: Interval::normal(value, combined(inputs, &shares)), shares }
    }))
}

/// Combined standard uncertainty of correlated shares.
fn combined(inputs: &Inputs, shares: &[f64]) -> f64 {
    let rows = inputs.correlations.iter().zip(shares);
    let variance: f64 =
        rows.map(|(row, share)| share * row.iter().zip(shares).map(|(r, other)| r * other).sum::<f64>()).sum();
    variance.max(0.0).sqrt()
}
