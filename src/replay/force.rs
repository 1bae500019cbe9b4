//! Which loss the misfit looks like: the missing force along the stroke against the shapes of the loss terms.
//!
//! At equal place, moving mass × (measured − modelled acceleration) is the force that the model lacks. Each shape is
//! scaled to it by least squares; the one that leaves the least is named. A hint, not a fit: one launch cannot tell
//! shapes apart that look alike.

use serde::Serialize;

use super::course::Course;

/// A loss shape scaled to the missing force.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Shape {
    /// In words.
    pub name: &'static str,
    /// Newtons of mean missing force over the stroke that the shape explains, negative where force is missing.
    pub mean_n: f64,
    /// Share of the missing force's square that the shape explains.
    pub explained: f64,
}

/// Measured and modelled acceleration at equal place, with speed and cord force there.
struct Point {
    missing_n: f64,
    speed_mps: f64,
    cord_n: f64,
}

/// Best of the shapes; `None` where there is too little to compare.
pub(super) fn best_shape(x_m: &[f64], v_mps: &[f64], a_mps2: &[f64], course: &Course, mass_kg: f64) -> Option<Shape> {
    let points = points(x_m, v_mps, a_mps2, course, mass_kg);
    if points.len() < 20 {
        return None;
    }
    let square: f64 = points.iter().map(|point| point.missing_n.powi(2)).sum();
    type Basis = fn(&Point) -> f64;
    let shapes: [(&'static str, Basis); 4] = [
        ("a constant force, as rail friction makes", |_| 1.0),
        ("a force proportional to the cords' pull, as cord hysteresis, guides or a wrong cord force make", |p| {
            p.cord_n
        }),
        ("a force proportional to speed, as viscous losses make", |p| p.speed_mps),
        ("a force proportional to speed squared, as drag makes", |p| p.speed_mps.powi(2)),
    ];
    let scaled = shapes.into_iter().filter_map(|(name, basis)| {
        let along: f64 = points.iter().map(|p| basis(p) * p.missing_n).sum();
        let size: f64 = points.iter().map(|p| basis(p).powi(2)).sum();
        let factor = (size > 0.0).then(|| along / size)?;
        let mean_n = factor * points.iter().map(basis).sum::<f64>() / points.len() as f64;
        Some(Shape { name, mean_n, explained: if square > 0.0 { factor * along / square } else { 0.0 } })
    });
    scaled.max_by(|a, b| a.explained.total_cmp(&b.explained))
}

fn points(x_m: &[f64], v_mps: &[f64], a_mps2: &[f64], course: &Course, mass_kg: f64) -> Vec<Point> {
    let mut points = Vec::with_capacity(x_m.len());
    let mut next = 0;
    for ((x, v), a) in x_m.iter().zip(v_mps).zip(a_mps2) {
        while next < course.x_m.len() && course.x_m[next] < *x {
            next += 1;
        }
        let (Some(before), true) = (next.checked_sub(1), next < course.x_m.len()) else { continue };
        let share = (x - course.x_m[before]) / (course.x_m[next] - course.x_m[before]);
        let between = |column: &[f64]| column[before] * (1.0 - share) + column[next] * share;
        let missing_n = mass_kg * (a - between(&course.a_mps2));
        if missing_n.is_finite() {
            points.push(Point { missing_n, speed_mps: *v, cord_n: between(&course.anchor_tension_n) });
        }
    }
    points
}
