//! The model against closed forms, tables and its own promises. Reference files: tests/reference/ (sources in each).

mod energy;
mod facts;
mod forecast;
mod rig;
mod sources;
mod surroundings;

use super::{CordSet, Curve};

/// Rows of a reference CSV after its comments and header, as numbers; words become NaN.
fn reference(name: &str) -> Vec<Vec<f64>> {
    let path = format!("{}/tests/reference/{name}", env!("CARGO_MANIFEST_DIR"));
    let text = std::fs::read_to_string(&path).unwrap_or_else(|error| panic!("{path}: {error}"));
    let rows = text.lines().filter(|line| !line.starts_with('#')).skip(1);
    rows.map(|row| row.split(',').map(|cell| cell.parse().unwrap_or(f64::NAN)).collect()).collect()
}

#[track_caller]
fn assert_close(what: &str, found: f64, expected: f64, relative: f64, absolute: f64) {
    let allowed = relative * expected.abs() + absolute;
    assert!((found - expected).abs() <= allowed, "{what}: found {found}, expected {expected}, allowed ±{allowed:e}");
}

/// One massless cord with a constant stiffness, taut by `stretch_m` at x = 0.
fn linear_cord(stiffness_n_per_m: f64, stretch_m: f64) -> CordSet {
    let tension_n = Curve::through(&[(0.0, 0.0), (1.0, stiffness_n_per_m * stretch_m)]).unwrap();
    CordSet::simple(1.0, stretch_m, stretch_m, tension_n)
}
