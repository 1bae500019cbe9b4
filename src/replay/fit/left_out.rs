//! How well the fit forecasts a trial that it has not seen: each in turn left out, fitted without it, forecast from its hold.

use serde::Serialize;

use super::joint::Joint;
use super::outcome::LossFit;
use super::solve::{FitOptions, Solved, solved};
use super::term::Term;
use super::trial::FitTrial;
use crate::estimation::coverage_factor;

/// No fit of a few trials shows that less is left unexplained, relative.
pub(super) const LEAST_UNEXPLAINED: f64 = 0.003;
/// Errors over their uncertainty from which a trial does not belong to the others.
const OUTLYING: f64 = 4.0;

/// One trial forecast by the others.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct LeftOut {
    pub id: String,
    /// At the last place compared.
    pub measured_mps: f64,
    pub forecast_mps: f64,
    /// Of the difference: losses, the trial's own hold and day, its measurement.
    pub u_mps: f64,
}

impl LeftOut {
    pub fn error_mps(&self) -> f64 {
        self.forecast_mps - self.measured_mps
    }

    pub fn over_u(&self) -> f64 {
        self.error_mps() / self.u_mps
    }
}

/// Every trial that the others can forecast.
pub(super) fn left_out(trials: &[&FitTrial], options: &FitOptions, whole: &Solved) -> Vec<LeftOut> {
    if trials.len() < 3 {
        return Vec::new();
    }
    let forecast = |index: usize| {
        let others: Vec<&FitTrial> =
            trials.iter().enumerate().filter(|(i, _)| *i != index).map(|(_, trial)| *trial).collect();
        let fitted = solved(&others, options, None).ok()?;
        forecast(trials[index], &whole.joint.terms, &fitted)
    };
    (0..trials.len()).filter_map(forecast).collect()
}

/// The speed at a trial's last place by losses found elsewhere.
fn forecast(trial: &FitTrial, terms: &[Term], fitted: &Solved) -> Option<LeftOut> {
    let alone = Joint::of(&[trial], terms, 1).ok()?;
    let mut parameters = alone.start();
    parameters[..terms.len()].copy_from_slice(&fitted.parameters[..terms.len()]);
    let mut speeds = Vec::new();
    alone.speeds(0, &parameters, &mut speeds);
    let slopes = alone.slopes(0, &parameters);
    let last = |k: usize| slopes.iter().find(|(parameter, _)| *parameter == k).and_then(|(_, column)| column.last());
    let gradient: Vec<f64> = (0..terms.len()).map(|k| last(k).copied().unwrap_or(0.0)).collect();
    let of_losses = |i: usize, j: usize| gradient[i] * gradient[j] * fitted.covariance[(i, j)];
    let losses: f64 = (0..terms.len()).map(|i| (0..terms.len()).map(|j| of_losses(i, j)).sum::<f64>()).sum();
    let own: f64 = alone.nuisances(0).map(|k| last(k).copied().unwrap_or(0.0).powi(2)).sum();
    let measured = trial.u_v_mps.last()?.powi(2);
    let found = LeftOut {
        id: trial.id.clone(),
        measured_mps: *trial.v_mps.last()?,
        forecast_mps: *speeds.last()?,
        u_mps: (losses.max(0.0) + own + measured).sqrt(),
    };
    found.error_mps().is_finite().then_some(found)
}

/// Says of the trial that the others forecast worst why it does not belong to them, if it does not. One at a time: a trial that
/// is wrong spoils the forecasts of the others too.
pub(super) fn mark_outliers(found: &mut LossFit) {
    let over_u = |one: &LeftOut| one.over_u().abs();
    let Some(worst) = found.left_out.iter().max_by(|a, b| over_u(a).total_cmp(&over_u(b))) else { return };
    let relative = worst.error_mps() / worst.measured_mps;
    if worst.over_u().abs() < OUTLYING || relative.abs() < 3.0 * LEAST_UNEXPLAINED {
        return;
    }
    let sentence = format!(
        "the others forecast it {:.2} m/s {} ({:.1} times the uncertainty): check its masses, cords and hold, and fit without it",
        worst.error_mps().abs(),
        if worst.error_mps() > 0.0 { "faster" } else { "slower" },
        worst.over_u().abs()
    );
    let id = worst.id.clone();
    found.trials.iter_mut().filter(|trial| trial.id == id).for_each(|trial| trial.outlier = Some(sentence.clone()));
}

/// What is left of the errors beyond their uncertainties, widened for how few they are.
pub(super) fn unexplained(all: &[LeftOut]) -> f64 {
    let n = all.len() as f64;
    if all.is_empty() {
        return LEAST_UNEXPLAINED;
    }
    let mean = |of: &dyn Fn(&LeftOut) -> f64| all.iter().map(of).sum::<f64>() / n;
    let seen = mean(&|one| (one.error_mps() / one.measured_mps).powi(2));
    let known = mean(&|one| (one.u_mps / one.measured_mps).powi(2));
    let widened = coverage_factor(0.95, n) / coverage_factor(0.95, f64::INFINITY);
    LEAST_UNEXPLAINED.hypot(widened * (seen - known).max(0.0).sqrt())
}
