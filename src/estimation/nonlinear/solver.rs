//! The crate's solver behind our bounds and weights.

use levenberg_marquardt::{LeastSquaresProblem, LevenbergMarquardt, TerminationReason};
use nalgebra::storage::Owned;
use nalgebra::{DMatrix, DVector, Dyn};

use super::bounds::Bound;
use super::residuals::Residuals;

/// Stands for a residual outside the model's domain, so that the solver steps back instead of giving up.
const FAR_OFF: f64 = 1e100;

/// What the solver ended with.
#[derive(Debug)]
pub(super) struct Solved {
    pub(super) parameters: Vec<f64>,
    pub(super) termination: TerminationReason,
    pub(super) evaluations: usize,
}

struct Problem<'a, R> {
    model: &'a R,
    bounds: &'a [Bound],
    weights: &'a [f64],
    free: DVector<f64>,
}

/// One run from `start` with fixed weights (factors on the residuals).
pub(super) fn solve(
    model: &impl Residuals,
    bounds: &[Bound],
    weights: &[f64],
    start: &[f64],
    patience: usize,
    tolerance: f64,
) -> Solved {
    let free = DVector::from_iterator(start.len(), bounds.iter().zip(start).map(|(bound, at)| bound.inside(*at)));
    let problem = Problem { model, bounds, weights, free };
    let solver = LevenbergMarquardt::new()
        .with_ftol(tolerance)
        .with_xtol(tolerance)
        .with_gtol(tolerance)
        .with_patience(patience);
    let (problem, report) = solver.minimize(problem);
    Solved {
        parameters: problem.parameters(),
        termination: report.termination,
        evaluations: report.number_of_evaluations,
    }
}

impl<R: Residuals> Problem<'_, R> {
    fn parameters(&self) -> Vec<f64> {
        self.bounds.iter().zip(self.free.iter()).map(|(bound, free)| bound.outside(*free).0).collect()
    }
}

impl<R: Residuals> LeastSquaresProblem<f64, Dyn, Dyn> for Problem<'_, R> {
    type ResidualStorage = Owned<f64, Dyn>;
    type JacobianStorage = Owned<f64, Dyn, Dyn>;
    type ParameterStorage = Owned<f64, Dyn>;

    fn set_params(&mut self, free: &DVector<f64>) {
        self.free.copy_from(free);
    }

    fn params(&self) -> DVector<f64> {
        self.free.clone()
    }

    fn residuals(&self) -> Option<DVector<f64>> {
        let mut residuals = vec![0.0; self.model.n_residuals()];
        self.model.residuals(&self.parameters(), &mut residuals);
        let weighted = residuals.iter().zip(self.weights).map(|(residual, weight)| {
            let weighted = residual * weight;
            if weighted.abs() < FAR_OFF { weighted } else { FAR_OFF }
        });
        Some(DVector::from_iterator(residuals.len(), weighted))
    }

    fn jacobian(&self) -> Option<DMatrix<f64>> {
        let mut jacobian = DMatrix::zeros(self.model.n_residuals(), self.bounds.len());
        self.model.jacobian(&self.parameters(), &mut jacobian);
        for (k, bound) in self.bounds.iter().enumerate() {
            let slope = bound.outside(self.free[k]).1;
            for (i, weight) in self.weights.iter().enumerate() {
                jacobian[(i, k)] *= slope * weight;
            }
        }
        Some(jacobian)
    }
}
