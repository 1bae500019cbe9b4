//! Speed at given places: what a fit compares with a trial, without course, energy or anchors.

use super::along::{Along, state_of};
use super::error::ModelError;
use super::event::Segment;
use super::march::{Keep, March};
use super::run::ROOM;
use super::setup::LaunchSetup;
use super::system::Layout;

/// The shuttle as it first passes a place.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Passing {
    /// From release.
    pub t_s: f64,
    /// In the rail's frame.
    pub v_mps: f64,
    pub ground_v_mps: f64,
}

/// The shuttle at places along the rail, which rise; none at those it does not reach. Places before the start are not
/// reached. Computes no further than the last place.
///
/// # Errors
/// As [`super::simulate`].
pub fn passings(setup: &LaunchSetup, places_m: &[f64]) -> Result<Vec<Option<Passing>>, ModelError> {
    setup.check()?;
    let layout = Layout::of(setup, false);
    match layout.n_used {
        0..=4 => passings_in::<4>(setup, layout, places_m),
        5..=8 => passings_in::<8>(setup, layout, places_m),
        _ => passings_in::<ROOM>(setup, layout, places_m),
    }
}

fn passings_in<const N: usize>(
    setup: &LaunchSetup,
    layout: Layout,
    places_m: &[f64],
) -> Result<Vec<Option<Passing>>, ModelError> {
    let mut march = March::<N>::released(setup, layout, Keep::Course)?;
    march.run_to_place(places_m.last().copied().unwrap_or(f64::NEG_INFINITY))?;
    let mut segments = march.segments.iter().flatten().peekable();
    let at = |place_m: &f64| {
        while segments.next_if(|segment| end_x_m(segment) < *place_m).is_some() {}
        let segment = segments.peek()?;
        let state = state_at(segment, *place_m)?;
        let rail_v_mps = layout.recoil.map_or(0.0, |i| state.1[i + 1]);
        Some(Passing { t_s: state.0, v_mps: state.1[1], ground_v_mps: state.1[1] + rail_v_mps })
    };
    Ok(places_m.iter().map(at).collect())
}

fn state<const N: usize>(segment: &Segment<N>, s: f64) -> (f64, [f64; N]) {
    state_of(s, segment.dense.at(s), segment.along)
}

fn end_x_m<const N: usize>(segment: &Segment<N>) -> f64 {
    state(segment, segment.dense.end()).1[0]
}

/// Newton on the segment's own polynomial, kept inside by bisection.
fn state_at<const N: usize>(segment: &Segment<N>, place_m: f64) -> Option<(f64, [f64; N])> {
    let (mut a, mut b) = (segment.dense.start, segment.dense.end());
    if segment.along == Along::Component(0) {
        return (a <= place_m && place_m <= b).then(|| state(segment, place_m));
    }
    if state(segment, a).1[0] > place_m {
        return None;
    }
    let mut s = 0.5 * (a + b);
    for _ in 0..60 {
        let (t_s, y) = state(segment, s);
        let off_m = y[0] - place_m;
        if off_m > 0.0 {
            b = s
        } else {
            a = s
        }
        // Speed is the slope where the step runs in time; elsewhere bisection narrows first.
        let newton = if segment.along == Along::Time { s - off_m / y[1] } else { f64::NAN };
        let next = if (newton - a) * (newton - b) < 0.0 { newton } else { 0.5 * (a + b) };
        if off_m.abs() < 1e-13 || (next - s).abs() <= 1e-15 * segment.dense.size.abs() {
            return Some((t_s, y));
        }
        s = next;
    }
    Some(state(segment, s))
}
