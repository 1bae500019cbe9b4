//! A monotone spline whose knots stand at even shares of the readings and whose heights are fitted.
//!
//! The rises from knot to knot are the parameters, as logarithms, so the spline rises whatever the readings do. Between
//! knots it is the curve of `estimation`, the very one that the launch model uses.

use super::error::CordError;
use super::law::{Point, relative};
use crate::estimation::{Bound, Curve, FitOptions, Stepped, fit_nonlinear};

/// Logarithm of the least rise from knot to knot as a share of the highest tension.
const LEAST_LOGARITHM: f64 = -9.0;

/// Elongation and tension of the knots in turn, and the spline through them.
pub(super) fn fit(points: &[Point], knots: usize) -> Result<(Vec<f64>, Curve), CordError> {
    let places = places(points, knots)?;
    let highest_n = points.iter().map(|point| point.tension_n).fold(0.0, f64::max);
    let start = start(points, &places, highest_n);
    let residuals = |rises: &[f64], into: &mut [f64]| {
        let curve = curve(&places, rises, highest_n);
        for (residual, point) in into.iter_mut().zip(points) {
            *residual = curve.as_ref().map_or(f64::NAN, |curve| curve.value(point.elongation)) - point.tension_n;
        }
    };
    // A rise that wants to be zero would run to minus infinity: the lower bound stands for it.
    let bounds = vec![Bound::Between(LEAST_LOGARITHM, 2.0); start.len()];
    let options = FitOptions { bounds, uncertainties: relative(points), tolerance: 1e-10, ..FitOptions::default() };
    let model = Stepped::new(points.len(), vec![1.0; start.len()], residuals);
    let fit = fit_nonlinear(&model, &start, &options)?;
    let curve = curve(&places, &fit.parameters, highest_n).ok_or_else(|| no_curve(points))?;
    let heights = places.iter().map(|place| curve.value(*place));
    let parameters = places.iter().zip(heights).flat_map(|(place, height)| [*place, height]).collect();
    Ok((parameters, curve))
}

fn no_curve(points: &[Point]) -> CordError {
    CordError::NoLaw { branch: "spline's", why: format!("no curve through {} readings", points.len()) }
}

/// Zero, then even shares of the readings' elongations, the last at the furthest reading.
fn places(points: &[Point], knots: usize) -> Result<Vec<f64>, CordError> {
    let mut elongations: Vec<f64> = points.iter().map(|point| point.elongation).filter(|e| *e > 0.0).collect();
    elongations.sort_by(f64::total_cmp);
    let furthest = *elongations.last().ok_or_else(|| no_curve(points))?;
    elongations.dedup_by(|later, earlier| *later - *earlier < 0.01 * furthest);
    let mut places = vec![0.0];
    for knot in 1..=knots {
        let share = knot as f64 / knots as f64 * elongations.len() as f64;
        let place = elongations[(share.round() as usize).clamp(1, elongations.len()) - 1];
        if place > places[places.len() - 1] + 0.005 * furthest {
            places.push(place);
        }
    }
    if places.len() < 3 {
        return Err(CordError::TooFew { branch: "spline's", found: places.len() - 1, wanted: 2 });
    }
    Ok(places)
}

/// Logarithms of the rises between the mean tensions near the knots.
fn start(points: &[Point], places: &[f64], highest_n: f64) -> Vec<f64> {
    let near = |place: f64| {
        let nearest = points
            .iter()
            .map(|point| ((point.elongation - place).abs(), point.tension_n))
            .min_by(|one, other| one.0.total_cmp(&other.0));
        nearest.map_or(0.0, |(_, tension_n)| tension_n)
    };
    let mut below = 0.0;
    places[1..]
        .iter()
        .map(|place| {
            let rise = (near(*place) - below).max(0.01 * highest_n);
            below += rise;
            (rise / highest_n).ln()
        })
        .collect()
}

fn curve(places: &[f64], rises: &[f64], highest_n: f64) -> Option<Curve> {
    let mut height_n = 0.0;
    let mut knots = vec![(0.0, 0.0)];
    for (place, rise) in places[1..].iter().zip(rises) {
        height_n += highest_n * rise.exp();
        knots.push((*place, height_n));
    }
    Curve::through(&knots).ok()
}
