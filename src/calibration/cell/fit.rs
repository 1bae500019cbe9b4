//! The whole way from a sheet to a calibration.

use crate::estimation::{LinearFit, Scatter, least_squares};
use crate::rig::{Coefficients, Sheet};

use super::e74;
use super::error::CellError;
use super::figures::{self, Figures};
use super::loads::{Direction, Load, loads};
use super::manners::{self, Manners};
use super::uncertainty::{Budget, StepUncertainty};

/// Robust deviations beyond which a reading is flagged.
const FAR: f64 = 6.0;
/// Median absolute deviation to standard deviation, normal distribution: 1/Φ⁻¹(3/4).
const MAD_TO_SD: f64 = 1.482_602_218_505_602;
/// Share of the greatest load within which deviations are never called far.
const NEVER_FAR: f64 = 0.002;
/// Two loads are the same step within this share of the greatest.
pub(super) const SAME_STEP: f64 = 0.001;

/// A reading and what the curve makes of it.
#[derive(Debug, Clone, PartialEq)]
pub struct Point {
    pub load: Load,
    /// Reading less the zero of its run.
    pub deflection_counts: f64,
    pub fitted_n: f64,
    /// Applied minus fitted.
    pub residual_n: f64,
    /// So far from the others that something happened: it stays in the fit.
    pub flagged: bool,
}

/// A calibrated cell.
#[derive(Debug, Clone, PartialEq)]
pub struct CellCalibration {
    /// Of use: zero, curve, standard uncertainties that cover as the budget does.
    pub coefficients: Coefficients,
    pub degree: usize,
    /// Every reading in its order, creep readings too.
    pub points: Vec<Point>,
    pub figures: Figures,
    pub budget: Budget,
    /// Uncertainty at each load.
    pub steps: Vec<StepUncertainty>,
    pub manners: Manners,
}

impl CellCalibration {
    pub fn flagged(&self) -> impl Iterator<Item = &Point> {
        self.points.iter().filter(|point| point.flagged)
    }

    /// Least and greatest load.
    pub fn tested_n(&self) -> (f64, f64) {
        let forces = self.points.iter().map(|point| point.load.force_n);
        forces.fold((0.0, f64::NEG_INFINITY), |(low, high), force| (force.min(low), force.max(high)))
    }
}

/// Calibrates a cell from a sheet with its readings.
///
/// # Errors
/// [`CellError`]: what in which reading is wrong, or why there is no curve.
pub fn calibrate(sheet: &Sheet) -> Result<CellCalibration, CellError> {
    let loads = loads(sheet)?;
    in_order(&loads)?;
    let deflections = deflections(&loads)?;
    let fitted: Vec<usize> = (0..loads.len()).filter(|at| is_fitted(&loads[*at])).collect();
    let greatest_n = loads.iter().map(|load| load.force_n).fold(0.0, f64::max);
    let distinct = steps_of(&loads, greatest_n);
    all_different(&loads)?;
    let degree = match sheet.degree {
        Some(degree) => degree,
        None => justified(&loads, &deflections, &distinct)?,
    };
    if distinct.len() < degree + 2 {
        return Err(CellError::TooFewLoads { found: distinct.len(), wanted: degree + 2, degree });
    }
    let rows: Vec<Vec<f64>> = fitted.iter().map(|at| row(deflections[*at], degree)).collect();
    let forces: Vec<f64> = fitted.iter().map(|at| loads[*at].force_n).collect();
    let fit = least_squares(&rows, &forces, Scatter::Unknown)?;
    let flags = flags(&loads, &deflections, greatest_n);
    let points = points(loads, &deflections, &flags, &fit, degree);
    monotonic(&fit, &points)?;
    let figures = figures::of(&points, &distinct, greatest_n);
    let budget = Budget::of(sheet, &points, &fit, &rows, &figures);
    let steps = budget.steps(&points, &distinct);
    let manners = manners::of(sheet, &points, &distinct, &budget)?;
    Ok(CellCalibration {
        coefficients: used(&points, &fit, &steps, &budget),
        degree,
        points,
        figures,
        budget,
        steps,
        manners,
    })
}

/// Powers 1 to `degree` of a deflection: no load, no deflection.
pub(super) fn row(deflection: f64, degree: usize) -> Vec<f64> {
    std::iter::successors(Some(deflection), |power| Some(power * deflection)).take(degree).collect()
}

pub(super) fn is_fitted(load: &Load) -> bool {
    load.direction != Direction::Creep && load.force_n > 0.0
}

/// Loads must rise on the way up and fall on the way down.
fn in_order(loads: &[Load]) -> Result<(), CellError> {
    for pair in loads.windows(2) {
        let [before, this] = pair else { continue };
        if before.run != this.run || this.direction == Direction::Creep || before.direction == Direction::Creep {
            continue;
        }
        let (wrong, wanted) = match this.direction {
            Direction::Up if before.direction == Direction::Down => (true, "rising"),
            Direction::Up => (this.force_n < before.force_n, "rising"),
            _ => (this.force_n > before.force_n, "falling"),
        };
        if wrong {
            let (place, run) = (this.place.clone(), this.run.clone());
            return Err(CellError::Order { place, run, force_n: this.force_n, before_n: before.force_n, wanted });
        }
    }
    Ok(())
}

/// Readings less the first unloaded reading of their run.
fn deflections(loads: &[Load]) -> Result<Vec<f64>, CellError> {
    let mut zero: Option<(&str, f64)> = None;
    let mut all = Vec::with_capacity(loads.len());
    for load in loads {
        let zero_counts = match zero {
            Some((run, counts)) if run == load.run => counts,
            _ if load.force_n == 0.0 && load.direction == Direction::Up => {
                zero = Some((&load.run, load.counts));
                load.counts
            }
            _ => return Err(CellError::NoZero { run: load.run.clone() }),
        };
        all.push(load.counts - zero_counts);
    }
    Ok(all)
}

/// The different loads over zero, rising.
fn steps_of(loads: &[Load], greatest_n: f64) -> Vec<f64> {
    let mut forces: Vec<f64> = loads.iter().filter(|load| is_fitted(load)).map(|load| load.force_n).collect();
    forces.sort_by(f64::total_cmp);
    forces.dedup_by(|a, b| (*a - *b).abs() <= SAME_STEP * greatest_n);
    forces
}

fn all_different(loads: &[Load]) -> Result<(), CellError> {
    match loads.first() {
        Some(first) if loads.len() > 1 && loads.iter().all(|load| load.counts == first.counts) => {
            Err(CellError::AllEqual { counts: first.counts })
        }
        _ => Ok(()),
    }
}

/// Up to cubic, as the mean deflections of the rising loads justify it in the manner of ASTM E74.
fn justified(loads: &[Load], deflections: &[f64], distinct: &[f64]) -> Result<usize, CellError> {
    let greatest_n = distinct.last().copied().unwrap_or(0.0);
    let mean = |force_n: &f64| {
        let at_step = loads.iter().zip(deflections).filter(|(load, _)| {
            load.direction == Direction::Up && (load.force_n - force_n).abs() <= SAME_STEP * greatest_n
        });
        let (sum, n) = at_step.fold((0.0, 0.0), |(sum, n), (_, deflection)| (sum + deflection, n + 1.0));
        (n > 0.0).then(|| (*force_n / greatest_n, sum / n))
    };
    let (force, means): (Vec<f64>, Vec<f64>) = distinct.iter().filter_map(mean).unzip();
    if force.len() < 3 {
        return Err(CellError::TooFewLoads { found: force.len(), wanted: 3, degree: 1 });
    }
    Ok(e74::justified_degree(&force, &means, 3)?)
}

fn median(values: &[f64]) -> f64 {
    let mut sorted: Vec<f64> = values.iter().copied().filter(|value| value.is_finite()).collect();
    sorted.sort_by(f64::total_cmp);
    match (sorted.get(sorted.len() / 2), sorted.len()) {
        (Some(upper), n) if n % 2 == 0 => f64::midpoint(*upper, sorted[n / 2 - 1]),
        (Some(middle), _) => *middle,
        (None, _) => f64::NAN,
    }
}

/// Which readings lie far from what the median slope and the median zero make of the others.
fn flags(loads: &[Load], deflections: &[f64], greatest_n: f64) -> Vec<bool> {
    let slopes: Vec<f64> = loads
        .iter()
        .zip(deflections)
        .filter(|(load, _)| is_fitted(load))
        .map(|(load, deflection)| load.force_n / deflection)
        .collect();
    let slope = median(&slopes);
    let zeros: Vec<f64> = loads.iter().filter(|load| load.force_n == 0.0).map(|load| load.counts).collect();
    let zero = median(&zeros);
    // From the reading itself: a run whose zero is off would otherwise be flagged whole.
    let off: Vec<f64> = loads.iter().map(|load| load.force_n - slope * (load.counts - zero)).collect();
    let spread = MAD_TO_SD * median(&off.iter().map(|off| off.abs()).collect::<Vec<_>>());
    off.iter().map(|off| off.is_nan() || off.abs() > FAR * spread + NEVER_FAR * greatest_n).collect()
}

fn points(loads: Vec<Load>, deflections: &[f64], flags: &[bool], fit: &LinearFit, degree: usize) -> Vec<Point> {
    let point = |((load, deflection), flagged): ((Load, &f64), &bool)| {
        let fitted_n = fit.predict(&row(*deflection, degree)).0;
        let residual_n = load.force_n - fitted_n;
        Point { load, deflection_counts: *deflection, fitted_n, residual_n, flagged: *flagged }
    };
    loads.into_iter().zip(deflections).zip(flags).map(point).collect()
}

/// The curve must not turn round between no load and the greatest deflection.
fn monotonic(fit: &LinearFit, points: &[Point]) -> Result<(), CellError> {
    const PLACES: u32 = 200;
    let far = points.iter().map(|point| point.deflection_counts).max_by(|a, b| a.abs().total_cmp(&b.abs()));
    let far = far.unwrap_or(0.0);
    let slope = |deflection: f64| -> f64 {
        let terms = fit.parameters.iter().enumerate();
        terms.map(|(power, value)| (power + 1) as f64 * value * deflection.powi(power as i32)).sum()
    };
    let start = slope(0.0).signum();
    let turned =
        (1..=PLACES).map(|place| far * f64::from(place) / f64::from(PLACES)).find(|d| slope(*d) * start <= 0.0);
    turned.map_or(Ok(()), |counts| Err(CellError::NotMonotonic { counts }))
}

/// What a channel uses: the zero is the mean of the runs' first unloaded readings, the two uncertainties cover at every load what
/// the budget's expanded uncertainty covers there.
fn used(points: &[Point], fit: &LinearFit, steps: &[StepUncertainty], budget: &Budget) -> Coefficients {
    const NORMAL_95: f64 = 1.959_963_984_540_054;
    let zeros: Vec<f64> = points
        .iter()
        .filter(|point| point.load.force_n == 0.0 && point.load.direction == Direction::Up && !point.flagged)
        .map(|p| p.load.counts)
        .collect();
    let zero_counts = if zeros.is_empty() { 0.0 } else { zeros.iter().sum::<f64>() / zeros.len() as f64 };
    let tared = budget.at_zero().expanded(0.95) / NORMAL_95;
    let zero_uncertainty = budget.at_recorded_zero().expanded(0.95) / NORMAL_95;
    let beyond = |step: &StepUncertainty| {
        let as_normal = step.expanded_n / NORMAL_95;
        (as_normal * as_normal - tared * tared).max(0.0).sqrt() / step.force_n
    };
    let mut coefficients = vec![0.0];
    coefficients.extend(&fit.parameters);
    Coefficients {
        zero_counts,
        coefficients,
        zero_uncertainty,
        scale_relative_uncertainty: steps.iter().map(beyond).fold(0.0, f64::max),
    }
}
