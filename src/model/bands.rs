//! Speed and acceleration over x with their 95 % band.

use super::along::{Along, state_of};
use super::event::Segment;
use super::inputs::Inputs;
use super::march::{Keep, March};
use super::run::LaunchRun;
use super::setup::LaunchSetup;
use super::system::{Layout, System};
use crate::estimation::{Distribution, Random};

/// States of a launch whose course is followed without accounts.
const ROOM: usize = 24;
const N_PLACES: u32 = 80;
const N_DRAWS: u64 = 300;

/// A quantity over x: 95 % of the draws lie between `low` and `high`.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Band {
    pub best: Vec<f64>,
    pub low: Vec<f64>,
    pub high: Vec<f64>,
}

/// From release to separation of the launch at best values. All columns have the same length.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Bands {
    pub x_m: Vec<f64>,
    /// Ground frame.
    pub v_mps: Band,
    /// Kinematic, ground frame.
    pub a_mps2: Band,
}

/// Bands from draws of their own (a few hundred: the band is for the eye; results take every draw).
pub fn bands(setup: &LaunchSetup, inputs: &Inputs, run: &LaunchRun, seed: u64) -> Bands {
    let end_m = run.answers.separation.map_or_else(|| run.samples.last().map_or(0.0, |s| s.x_m), |at| at.x_m);
    let start_m = setup.start_x_m;
    let x_m: Vec<f64> =
        (0..=N_PLACES).map(|i| start_m + (end_m - start_m) * f64::from(i) / f64::from(N_PLACES)).collect();
    let draws: Vec<Vec<(f64, f64)>> = (0..N_DRAWS)
        .filter_map(|draw| {
            let mut random = Random::new(!seed, draw);
            let independent: Vec<f64> = inputs.all.iter().map(|_| random.normal()).collect();
            course(&inputs.moved(setup, &inputs.correlate(&independent)).setup, &x_m)
        })
        .collect();
    let best = course(setup, &x_m).unwrap_or_default();
    let band = |pick: fn(&(f64, f64)) -> f64| {
        let mut band = Band { best: best.iter().map(pick).collect(), ..Band::default() };
        for i in 0..x_m.len() {
            let here = Distribution::of(draws.iter().map(|course| pick(&course[i])));
            band.low.push(here.quantile(0.025));
            band.high.push(here.quantile(0.975));
        }
        band
    };
    Bands { v_mps: band(|at| at.0), a_mps2: band(|at| at.1), x_m }
}

/// Speed and acceleration at places, NaN beyond separation; none where there is no launch.
fn course(setup: &LaunchSetup, places_m: &[f64]) -> Option<Vec<(f64, f64)>> {
    setup.check().ok()?;
    let layout = Layout::of(setup, false);
    if layout.n_used > ROOM {
        return None;
    }
    let mut march = March::<ROOM>::released(setup, layout, Keep::Course).ok()?;
    march.run_to_separation().ok()?;
    let segments = march.segments.unwrap_or_default();
    let mut index = 0;
    let at = |x_m: &f64| {
        while index + 1 < segments.len() && x_at(&segments[index], segments[index].dense.end()) < *x_m {
            index += 1;
        }
        let Some(segment) = segments.get(index) else { return (f64::NAN, f64::NAN) };
        if x_at(segment, segment.dense.end()) < *x_m - 1e-9 {
            return (f64::NAN, f64::NAN);
        }
        let s = place_of_x(segment, *x_m);
        let system = System::new(setup, segment.phase.clone(), layout);
        let (_, y) = state_of(s, segment.dense.at(s), segment.along);
        let motion = system.motion(&y);
        (motion.v_mps + motion.rail_v_mps, system.forces_at(&y).ground_acceleration_mps2())
    };
    Some(places_m.iter().map(at).collect())
}

fn x_at(segment: &Segment<ROOM>, s: f64) -> f64 {
    if segment.along == Along::Component(0) { s } else { segment.dense.at(s)[0] }
}

/// Where in a segment the shuttle passes a place: bisection, fine enough for a picture.
fn place_of_x(segment: &Segment<ROOM>, x_m: f64) -> f64 {
    if segment.along == Along::Component(0) {
        return x_m.max(segment.dense.start);
    }
    let (mut a, mut b) = (segment.dense.start, segment.dense.end());
    for _ in 0..40 {
        let middle = 0.5 * (a + b);
        if x_at(segment, middle) < x_m { a = middle } else { b = middle }
    }
    b
}
