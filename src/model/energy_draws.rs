//! The energy split at separation as a distribution.

use super::energy::EnergySplit;
use crate::estimation::Distribution;

/// One source or use of energy from release to separation, in joules.
#[derive(Debug, Clone, PartialEq)]
pub struct ForecastedEnergy {
    pub name: &'static str,
    pub is_source: bool,
    /// With every input at its best value.
    pub best_j: f64,
    pub monte_carlo: Distribution,
}

/// Every source and use that some launch has, sources first, from its draws (in the order of [`EnergySplit::terms`]).
pub fn forecasted_energy(best: &EnergySplit, draws: Vec<Vec<f64>>) -> Vec<ForecastedEnergy> {
    const NOTHING_J: f64 = 1e-6;
    let n_sources = best.sources().len();
    let all = best.terms().zip(draws).enumerate().map(|(k, ((name, best_j), draws))| ForecastedEnergy {
        name,
        is_source: k < n_sources,
        best_j,
        monte_carlo: Distribution::of(draws),
    });
    let there = |entry: &ForecastedEnergy| {
        let (low, high) = (entry.monte_carlo.quantile(0.0), entry.monte_carlo.quantile(1.0));
        [entry.best_j, low, high].into_iter().any(|joules| joules.abs() > NOTHING_J)
    };
    all.filter(there).collect()
}
