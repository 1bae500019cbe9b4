//! What a cell is like: sensitivity, non-linearity, reversibility, repeatability, creep, return to zero.

use crate::estimation::{RunningMean, Scatter, least_squares};

use super::fit::{Point, SAME_STEP, is_fitted};
use super::loads::Direction;

/// Figures of a cell. What the readings can't show is absent.
#[derive(Debug, Clone, PartialEq)]
pub struct Figures {
    /// Slope of the straight line through zero, counts per newton.
    pub sensitivity_counts_per_n: f64,
    /// Greatest distance of the rising steps' means from that line, N.
    pub non_linearity_n: f64,
    /// Per step: load N, half of the difference between the way down and the way up, N.
    pub hysteresis: Vec<(f64, f64)>,
    /// Greatest difference between the ways, N; none without unloading readings.
    pub reversibility_n: Option<f64>,
    /// Standard deviation of one step between runs, pooled, N; none with a single run.
    pub repeatability_n: Option<f64>,
    /// Relative standard deviation of the runs' slopes, and how many runs.
    pub run_slopes: Option<(f64, usize)>,
    /// Scatter about each run's own slope, N, with its degrees of freedom.
    pub scatter_n: (f64, f64),
    /// Per step from no load on: load N, how far the mean of the further way lies from the curve, N. Holds hysteresis
    /// and what the curve can't follow.
    pub off_curve_n: Vec<(f64, f64)>,
    /// Change of the held reading, last less first, over the load; none without creep readings.
    pub creep_relative: Option<f64>,
    /// Last unloaded reading of a run less its first, the greatest, N; none where no run ends unloaded.
    pub zero_return_n: Option<f64>,
    /// Standard deviation of the runs' first unloaded readings, N, and how many.
    pub zeros_n: (f64, usize),
}

pub(super) fn of(points: &[Point], distinct: &[f64], greatest_n: f64) -> Figures {
    let fitted: Vec<&Point> = points.iter().filter(|point| is_fitted(&point.load)).collect();
    let counts_per_n = line(&fitted);
    let at = |force_n: f64, direction: Direction| {
        fitted.iter().copied().filter(move |p| {
            p.load.direction == direction && (p.load.force_n - force_n).abs() <= SAME_STEP * greatest_n
        })
    };
    let mean_n = |force_n: f64, direction| {
        at(force_n, direction).map(|p| p.deflection_counts / counts_per_n).collect::<RunningMean>().mean()
    };
    let off_line = |force_n: &f64| (mean_n(*force_n, Direction::Up) - force_n).abs();
    let half = |force_n: &f64| {
        let half_n = 0.5 * (mean_n(*force_n, Direction::Down) - mean_n(*force_n, Direction::Up));
        half_n.is_finite().then_some((*force_n, half_n))
    };
    let hysteresis: Vec<(f64, f64)> = distinct.iter().filter_map(half).collect();
    let widest = hysteresis.iter().map(|(_, half_n)| 2.0 * half_n.abs()).reduce(f64::max);
    let step_sds = distinct.iter().flat_map(|force_n| {
        [Direction::Up, Direction::Down].map(|way| at(*force_n, way).map(|p| p.residual_n).collect::<RunningMean>())
    });
    let off_curve = |force_n: &f64| {
        let means = [Direction::Up, Direction::Down]
            .map(|way| at(*force_n, way).map(|p| p.residual_n).collect::<RunningMean>().mean().abs());
        // The maximum of a number and no number is the number.
        (*force_n, means[0].max(means[1]))
    };
    let zero_return_n = zero_return(points, counts_per_n);
    let at_zero = (0.0, zero_return_n.unwrap_or(0.0).abs());
    let off_curve_n = std::iter::once(at_zero).chain(distinct.iter().map(off_curve)).collect();
    Figures {
        sensitivity_counts_per_n: counts_per_n,
        non_linearity_n: distinct.iter().map(off_line).filter(|off| off.is_finite()).fold(0.0, f64::max),
        hysteresis,
        reversibility_n: widest,
        repeatability_n: pooled(step_sds).map(|(sd, _)| sd),
        run_slopes: run_slopes(&fitted),
        scatter_n: scatter(&fitted, counts_per_n, distinct, greatest_n),
        off_curve_n,
        creep_relative: creep(points, counts_per_n),
        zero_return_n,
        zeros_n: zeros(points, counts_per_n),
    }
}

/// Counts per newton of the straight line through zero.
fn line(fitted: &[&Point]) -> f64 {
    let rows: Vec<Vec<f64>> = fitted.iter().map(|point| vec![point.load.force_n]).collect();
    let deflections: Vec<f64> = fitted.iter().map(|point| point.deflection_counts).collect();
    least_squares(&rows, &deflections, Scatter::Unknown).map_or(f64::NAN, |fit| fit.parameters[0])
}

/// Pooled standard deviation of groups and its degrees of freedom.
fn pooled(groups: impl Iterator<Item = RunningMean>) -> Option<(f64, f64)> {
    let (mut squares, mut free) = (0.0, 0.0);
    for group in groups.filter(|group| group.count() > 1) {
        let of_group = group.count() as f64 - 1.0;
        squares += of_group * group.standard_deviation().powi(2);
        free += of_group;
    }
    (free > 0.0).then(|| ((squares / free).sqrt(), free))
}

fn runs<'a>(points: &[&'a Point]) -> Vec<&'a str> {
    let mut runs: Vec<&str> = Vec::new();
    for point in points {
        if !runs.contains(&point.load.run.as_str()) {
            runs.push(&point.load.run);
        }
    }
    runs
}

fn run_slopes(fitted: &[&Point]) -> Option<(f64, usize)> {
    let slopes: RunningMean = runs(fitted)
        .iter()
        .map(|run| line(&fitted.iter().copied().filter(|point| point.load.run == *run).collect::<Vec<_>>()))
        .collect();
    (slopes.count() > 1).then(|| (slopes.standard_deviation() / slopes.mean().abs(), slopes.count() as usize))
}

/// Scatter of a step and way between runs once each run's own slope is taken off.
fn scatter(fitted: &[&Point], counts_per_n: f64, distinct: &[f64], greatest_n: f64) -> (f64, f64) {
    let runs = runs(fitted);
    let own: Vec<(&str, f64)> = runs
        .iter()
        .map(|run| (*run, line(&fitted.iter().copied().filter(|point| point.load.run == *run).collect::<Vec<_>>())))
        .collect();
    let off = |point: &Point| {
        let slope = own.iter().find(|(run, _)| *run == point.load.run).map_or(counts_per_n, |(_, slope)| *slope);
        point.deflection_counts / slope - point.load.force_n
    };
    let groups = distinct.iter().flat_map(|force_n| {
        [Direction::Up, Direction::Down].map(|way| {
            let same =
                |p: &&&Point| p.load.direction == way && (p.load.force_n - force_n).abs() <= SAME_STEP * greatest_n;
            fitted.iter().filter(same).map(|point| off(point)).collect::<RunningMean>()
        })
    });
    // A slope was taken from each run but one (the mean has its own).
    let taken = runs.len().saturating_sub(1) as f64;
    match pooled(groups) {
        Some((sd, free)) if free > taken => (sd * (free / (free - taken)).sqrt(), free - taken),
        _ => {
            // A single run: the residuals of the fit are all there is.
            let residuals: RunningMean = fitted.iter().map(|point| point.residual_n).collect();
            (residuals.standard_deviation(), (residuals.count() as f64 - 1.0).max(1.0))
        }
    }
}

fn creep(points: &[Point], counts_per_n: f64) -> Option<f64> {
    let held: Vec<&Point> = points.iter().filter(|point| point.load.direction == Direction::Creep).collect();
    let (first, last) = (held.first()?, held.last()?);
    let force_n = first.load.force_n;
    (held.len() > 1 && force_n > 0.0)
        .then(|| (last.deflection_counts - first.deflection_counts) / counts_per_n / force_n)
}

fn zero_return(points: &[Point], counts_per_n: f64) -> Option<f64> {
    let last = points.iter().filter(|point| point.load.force_n == 0.0 && point.load.direction == Direction::Down);
    last.map(|point| point.deflection_counts / counts_per_n).max_by(|a, b| a.abs().total_cmp(&b.abs()))
}

fn zeros(points: &[Point], counts_per_n: f64) -> (f64, usize) {
    let zeros: RunningMean = points
        .iter()
        .filter(|point| point.load.force_n == 0.0 && point.load.direction == Direction::Up)
        .map(|point| point.load.counts / counts_per_n)
        .collect();
    let sd = zeros.standard_deviation();
    (if sd.is_finite() { sd } else { 0.0 }, zeros.count() as usize)
}
