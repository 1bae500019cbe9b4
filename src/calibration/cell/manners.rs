//! The series seen in the manner of ASTM E74 and of ISO 376, with what keeps it from a class.
//!
//! The conditions are from memory and stricter rather than laxer than the standards; only an accredited laboratory
//! certifies to them.

use crate::estimation::RunningMean;
use crate::rig::{Sheet, Standard};

use super::e74::{self, CLASS_A_FACTOR, CLASS_AA_FACTOR};
use super::error::CellError;
use super::fit::{Point, SAME_STEP, is_fitted};
use super::iso376::{self, RelativeErrors, Step};
use super::loads::Direction;
use super::uncertainty::Budget;

/// Expanded relative uncertainty of the applied force that E74 wants of its standards, percent (remembered).
const E74_STANDARD: f64 = 0.005;

/// In the manner of ASTM E74.
#[derive(Debug, Clone, PartialEq)]
pub struct E74 {
    pub degree: usize,
    pub n_readings: usize,
    /// Standard deviation from the fitted deflection, N.
    pub s_n: f64,
    pub lower_limit_factor_n: f64,
    /// Least force of class A and of class AA; only where nothing stands against a class.
    pub class_lower_limits_n: Option<(f64, f64)>,
    /// What stands against a class.
    pub against: Vec<String>,
}

/// In the manner of ISO 376.
#[derive(Debug, Clone, PartialEq)]
pub struct Iso376 {
    pub errors: RelativeErrors,
    pub class: Option<&'static str>,
    /// What stands against a class.
    pub against: Vec<String>,
}

/// Both, as far as the series allows.
#[derive(Debug, Clone, PartialEq)]
pub struct Manners {
    /// Or why not.
    pub e74: Result<E74, String>,
    pub iso376: Result<Iso376, String>,
}

pub(super) fn of(sheet: &Sheet, points: &[Point], distinct: &[f64], budget: &Budget) -> Result<Manners, CellError> {
    let applied = applied_expanded_percent(sheet, budget);
    Ok(Manners { e74: in_e74(points, distinct, applied), iso376: in_iso376(points, distinct, applied) })
}

/// Expanded (k = 2) relative uncertainty of the force applied, the worst mass for itself, percent.
fn applied_expanded_percent(sheet: &Sheet, budget: &Budget) -> f64 {
    let own = match &sheet.standard {
        Standard::Masses { masses, .. } => {
            masses.iter().map(|mass| mass.uncertainty_kg / mass.mass_kg).fold(0.0, f64::max)
        }
        _ => 0.0,
    };
    200.0 * own.hypot(budget.common_relative())
}

fn in_e74(points: &[Point], distinct: &[f64], applied: f64) -> Result<E74, String> {
    let rising: Vec<&Point> =
        points.iter().filter(|p| is_fitted(&p.load) && p.load.direction == Direction::Up).collect();
    let greatest_n = distinct.last().copied().unwrap_or(1.0);
    let force: Vec<f64> = rising.iter().map(|point| point.load.force_n / greatest_n).collect();
    let deflection: Vec<f64> = rising.iter().map(|point| point.deflection_counts).collect();
    let means: Vec<f64> = distinct
        .iter()
        .map(|step_n| {
            let same = rising.iter().filter(|point| (point.load.force_n - step_n).abs() <= SAME_STEP * greatest_n);
            same.map(|point| point.deflection_counts).collect::<RunningMean>().mean()
        })
        .collect();
    let steps: Vec<f64> = distinct.iter().map(|force_n| force_n / greatest_n).collect();
    let degree = e74::justified_degree(&steps, &means, 5).map_err(|error| error.to_string())?;
    let fit = e74::deflection(&force, &deflection, degree).map_err(|error| error.to_string())?;
    let n_per_deflection = greatest_n / fit.coefficients[1].abs();
    let factor_n = fit.lower_limit_factor * n_per_deflection;
    let runs = distinct_texts(rising.iter().map(|point| point.load.run.as_str()));
    let rotations = rotations(&rising);
    let mut against = Vec::new();
    let mut need = |holds: bool, what: String| {
        if !holds {
            against.push(what)
        }
    };
    need(rising.len() >= 30, format!("{} rising readings, 30 are wanted", rising.len()));
    need(distinct.len() >= 10, format!("{} loads, 10 are wanted", distinct.len()));
    need(runs >= 3, format!("{runs} runs, 3 are wanted"));
    need(rotations.len() >= 2, "the cell was not turned between runs".to_owned());
    need(
        applied <= E74_STANDARD,
        format!("the applied force is known to {applied:.3} % (expanded), {E74_STANDARD} % is wanted"),
    );
    need(!points.iter().any(|point| point.flagged), "a reading is flagged".to_owned());
    let class_lower_limits_n = against.is_empty().then_some((CLASS_A_FACTOR * factor_n, CLASS_AA_FACTOR * factor_n));
    Ok(E74 {
        degree,
        n_readings: rising.len(),
        s_n: fit.s_m * n_per_deflection,
        lower_limit_factor_n: factor_n,
        class_lower_limits_n,
        against,
    })
}

fn distinct_texts<'a>(texts: impl Iterator<Item = &'a str>) -> usize {
    texts.collect::<std::collections::BTreeSet<_>>().len()
}

fn rotations(points: &[&Point]) -> Vec<f64> {
    let mut all: Vec<f64> = points.iter().map(|point| point.load.rotation_deg.rem_euclid(360.0)).collect();
    all.sort_by(f64::total_cmp);
    all.dedup_by(|a, b| (*a - *b).abs() < 1.0);
    all
}

/// The runs in the standard's series: two without turning, two more at other rotations with their way back.
struct Series<'a> {
    x1: &'a str,
    x2: &'a str,
    x3: &'a str,
    x5: &'a str,
}

fn series(points: &[Point]) -> Result<Series<'_>, String> {
    let mut runs: Vec<(&str, f64, bool)> = Vec::new();
    for Point { load, .. } in points {
        match runs.iter_mut().find(|run| run.0 == load.run) {
            Some(run) => run.2 |= load.direction == Direction::Down && load.force_n > 0.0,
            None => runs.push((&load.run, load.rotation_deg.rem_euclid(360.0), false)),
        }
    }
    let (x1, rest) = runs.split_first().ok_or("there are no runs")?;
    let same = |a: f64, b: f64| (a - b).abs() < 1.0;
    let x2 = rest.iter().find(|run| same(run.1, x1.1)).ok_or("no second run at the first rotation (X2)")?;
    let x3 = rest.iter().find(|run| !same(run.1, x1.1) && run.2).ok_or("no turned run up and down (X3, X4′)")?;
    let x5 = rest
        .iter()
        .find(|run| !same(run.1, x1.1) && !same(run.1, x3.1) && run.2)
        .ok_or("no second turned run up and down (X5, X6′)")?;
    Ok(Series { x1: x1.0, x2: x2.0, x3: x3.0, x5: x5.0 })
}

fn in_iso376(points: &[Point], distinct: &[f64], applied: f64) -> Result<Iso376, String> {
    let series = series(points)?;
    let greatest_n = distinct.last().copied().unwrap_or(0.0);
    let at = |run: &str, way: Direction, force_n: f64| {
        points
            .iter()
            .find(|p| {
                let load = &p.load;
                load.run == run && load.direction == way && (load.force_n - force_n).abs() <= SAME_STEP * greatest_n
            })
            .map(|point| point.deflection_counts)
    };
    let step = |force_n: &f64| {
        let force_n = *force_n;
        let back = |run, forth| at(run, Direction::Down, force_n).or((force_n >= greatest_n).then_some(forth));
        let [x1, x2, x3, x5] = [series.x1, series.x2, series.x3, series.x5].map(|run| at(run, Direction::Up, force_n));
        let (x3, x5) = (x3?, x5?);
        let (x4_back, x6_back) = (back(series.x3, x3)?, back(series.x5, x5)?);
        Some(Step { force_n, x1: x1?, x2: x2?, x3, x5, x4_back, x6_back })
    };
    let steps: Vec<Step> = distinct.iter().filter_map(step).collect();
    if steps.len() < 3 {
        return Err(format!("{} loads were read in every run of the series", steps.len()));
    }
    let zero_change = zero_change(points);
    let held: Vec<&Point> = points.iter().filter(|point| point.load.direction == Direction::Creep).collect();
    let creep = held.first().zip(held.last()).filter(|_| held.len() > 1);
    let creep_change = creep.map_or(0.0, |(first, last)| last.deflection_counts - first.deflection_counts);
    let errors =
        iso376::relative_errors(&steps, zero_change.unwrap_or(0.0), creep_change).map_err(|e| e.to_string())?;
    let mut against = Vec::new();
    let mut need = |holds: bool, what: String| {
        if !holds {
            against.push(what)
        }
    };
    need(steps.len() >= 8, format!("{} loads in every run, 8 are wanted", steps.len()));
    need(creep.is_some(), "no creep readings (30 s and 300 s)".to_owned());
    need(zero_change.is_some(), "no run ends with a zero reading".to_owned());
    need(!points.iter().any(|point| point.flagged), "a reading is flagged".to_owned());
    let class = errors.class(applied);
    need(class.is_some(), format!("an error, or the applied force ({applied:.3} % expanded), is over class 2"));
    Ok(Iso376 { class: class.filter(|_| against.is_empty()), errors, against })
}

/// The greatest last zero less the first of its run, in counts.
fn zero_change(points: &[Point]) -> Option<f64> {
    let last = points.iter().filter(|point| point.load.force_n == 0.0 && point.load.direction == Direction::Down);
    last.map(|point| point.deflection_counts).max_by(|a, b| a.abs().total_cmp(&b.abs()))
}
