//! Standard uncertainty of a force that the calibrated cell indicates, as a function of the force.
//!
//! By the law of propagation (JCGM 100:2008, 5.1.2 and 5.2.2): each mass moves the curve as a whole where it hung, so its
//! share is the fit of what its error would do; what all loads share (gravity, air, the masses' reference) is a scale.

use crate::estimation::{Component, LinearFit, Scatter, combined, least_squares, propagated};
use crate::rig::{Sheet, Standard};

use super::figures::Figures;
use super::fit::{Point, SAME_STEP, is_fitted, row};
use super::loads::weight_n;

/// One share of the uncertainty at a force.
#[derive(Debug, Clone, PartialEq)]
pub struct Share {
    pub source: &'static str,
    pub component: Component,
}

/// The uncertainty at a load.
#[derive(Debug, Clone, PartialEq)]
pub struct StepUncertainty {
    pub force_n: f64,
    pub standard_n: f64,
    pub degrees_of_freedom: f64,
    /// For 95 % coverage.
    pub expanded_n: f64,
    pub shares: Vec<Share>,
}

/// Everything the uncertainty of a force is made of.
#[derive(Debug, Clone, PartialEq)]
pub struct Budget {
    degree: usize,
    covariance: Vec<Vec<f64>>,
    fit_dof: f64,
    /// Change of the parameters for one standard uncertainty of each mass.
    mass_shifts: Vec<Vec<f64>>,
    common_relative: f64,
    slopes: Component,
    scatter: Component,
    off_curve_n: Vec<(f64, f64)>,
    creep_relative: f64,
    zero: Component,
    resolution_n: f64,
}

impl Budget {
    pub(super) fn of(sheet: &Sheet, points: &[Point], fit: &LinearFit, rows: &[Vec<f64>], figures: &Figures) -> Self {
        let known = |standard_uncertainty, degrees_of_freedom| Component { standard_uncertainty, degrees_of_freedom };
        let (zero_sd_n, n_zeros) = figures.zeros_n;
        // A zero seen once may be anywhere: its return, or the scatter, is the least that is known of it.
        let zero = if n_zeros > 1 {
            known(zero_sd_n, n_zeros as f64 - 1.0)
        } else {
            known(figures.scatter_n.0, figures.scatter_n.1)
        };
        Self {
            degree: fit.parameters.len(),
            covariance: fit.covariance.clone(),
            fit_dof: fit.degrees_of_freedom as f64,
            mass_shifts: mass_shifts(sheet, points, rows),
            common_relative: common_relative(sheet),
            slopes: figures.run_slopes.map_or(Component::certain(0.0), |(sd, runs)| known(sd, runs as f64 - 1.0)),
            scatter: known(figures.scatter_n.0, figures.scatter_n.1),
            off_curve_n: figures.off_curve_n.clone(),
            creep_relative: figures.creep_relative.unwrap_or(0.0),
            zero,
            resolution_n: (sheet.step_counts / figures.sensitivity_counts_per_n).abs(),
        }
    }

    /// All shares at a deflection, from the zero at that time, that the curve makes a force of.
    pub fn shares(&self, deflection_counts: f64, force_n: f64) -> Vec<Share> {
        // Rectangular distributions: JCGM 100:2008, 4.3.7.
        let rectangular = |half_width: f64| Component::certain(half_width.abs() / 3f64.sqrt());
        let at = row(deflection_counts, self.degree);
        let masses: f64 = self
            .mass_shifts
            .iter()
            .map(|shift| shift.iter().zip(&at).map(|(change, factor)| change * factor).sum::<f64>().powi(2))
            .sum();
        let share = |source, component| Share { source, component };
        let fit = Component {
            standard_uncertainty: propagated(&self.covariance, &at),
            degrees_of_freedom: self.fit_dof.max(1.0),
        };
        let slopes = Component { standard_uncertainty: self.slopes.standard_uncertainty * force_n, ..self.slopes };
        vec![
            share("masses", Component::certain(masses.abs().sqrt())),
            share("gravity, air, reference", Component::certain(self.common_relative * force_n)),
            share("curve", fit),
            share("slope between runs", slopes),
            share("scatter", self.scatter),
            share("ways off the curve", rectangular(self.off_curve_n(force_n))),
            share("creep", rectangular(self.creep_relative * force_n)),
            share("resolution", rectangular(0.5 * self.resolution_n)),
        ]
    }

    /// At no load, from the zero at that time.
    pub fn at_zero(&self) -> Component {
        combined(&self.shares(0.0, 0.0).iter().map(|share| share.component).collect::<Vec<_>>())
    }

    /// At no load, from the calibration's own zero: as far as the zeros of its runs were apart.
    pub fn at_recorded_zero(&self) -> Component {
        combined(&[self.at_zero(), self.zero])
    }

    /// At a deflection that the curve makes a force of.
    pub fn at(&self, deflection_counts: f64, force_n: f64) -> StepUncertainty {
        let shares = self.shares(deflection_counts, force_n);
        let all = combined(&shares.iter().map(|share| share.component).collect::<Vec<_>>());
        StepUncertainty {
            force_n,
            standard_n: all.standard_uncertainty,
            degrees_of_freedom: all.degrees_of_freedom,
            expanded_n: all.expanded(0.95),
            shares,
        }
    }

    /// At each of the calibrated loads.
    pub(super) fn steps(&self, points: &[Point], distinct: &[f64]) -> Vec<StepUncertainty> {
        let greatest_n = distinct.last().copied().unwrap_or(0.0);
        let deflection = |force_n: f64| {
            let here = points
                .iter()
                .filter(|p| is_fitted(&p.load) && (p.load.force_n - force_n).abs() <= SAME_STEP * greatest_n);
            let (sum, n) = here.fold((0.0, 0.0), |(sum, n), point| (sum + point.deflection_counts, n + 1.0));
            sum / f64::max(n, 1.0)
        };
        distinct.iter().map(|force_n| self.at(deflection(*force_n), *force_n)).collect()
    }

    /// Relative standard uncertainty of what all loads share.
    pub(super) fn common_relative(&self) -> f64 {
        self.common_relative
    }

    /// How far a way lies from the curve, linear between the steps.
    fn off_curve_n(&self, force_n: f64) -> f64 {
        let mut before = self.off_curve_n.first().copied().unwrap_or_default();
        for step in &self.off_curve_n {
            if force_n <= step.0 && step.0 > before.0 {
                return before.1 + (step.1 - before.1) * (force_n - before.0) / (step.0 - before.0);
            }
            before = *step;
        }
        before.1
    }
}

/// What one standard uncertainty of each mass does to the parameters: the fit of the force that it adds where it hung.
fn mass_shifts(sheet: &Sheet, points: &[Point], rows: &[Vec<f64>]) -> Vec<Vec<f64>> {
    let Standard::Masses { masses, .. } = &sheet.standard else { return Vec::new() };
    let fitted: Vec<&Point> = points.iter().filter(|point| is_fitted(&point.load)).collect();
    let shift = |(index, mass): (usize, &crate::rig::Mass)| {
        let per_kg_n = weight_n(mass, &sheet.place) / mass.mass_kg;
        let added: Vec<f64> = fitted
            .iter()
            .map(|point| if point.load.masses.contains(&index) { per_kg_n * mass.uncertainty_kg } else { 0.0 })
            .collect();
        least_squares(rows, &added, Scatter::Unknown).ok().map(|fit| fit.parameters)
    };
    masses.iter().enumerate().filter_map(shift).collect()
}

/// Gravity, air density and the reference of all masses (or the reference transducer), relative.
fn common_relative(sheet: &Sheet) -> f64 {
    match &sheet.standard {
        Standard::Masses { masses, common_relative_uncertainty } => {
            let place = &sheet.place;
            let gravity = place.gravity_uncertainty_mps2 / place.gravity_mps2;
            let lightest = masses.iter().map(|mass| mass.density_kg_per_m3).fold(f64::INFINITY, f64::min);
            let air = place.air_density_uncertainty_kg_per_m3 / lightest;
            gravity.hypot(air).hypot(*common_relative_uncertainty)
        }
        Standard::ReferenceTransducer { relative_uncertainty } => *relative_uncertainty,
        _ => 0.0,
    }
}
