//! What a channel class makes of a launch's peak: the filtered peak over the unfiltered one, and how that ratio moves with
//! each uncertain input.
//!
//! Filtering every draw would cost more than the launch itself, and the ratio hardly moves: it is taken to first order in
//! the inputs (JCGM 100:2008, section 5.1), good to 1e-3 and better where the peak stays in its place, to 1 % where some
//! draws have it at release and others later. The record before release shows the weight along the rail alone.

use super::along::state_of;
use super::error::ModelError;
use super::event::Segment;
use super::inputs::Inputs;
use super::march::{Keep, March};
use super::setup::{FAST, LaunchSetup};
use super::system::{Layout, System};
use crate::estimation::{CfcFilter, StartUp};
use crate::rig::Rig;

/// Channel class of the limit's peak g.
const CLASS: u32 = 60;
/// Of the record behind the best value.
const RATE_HZ: f64 = 10_000.0;
/// Of those behind differences from it.
const COARSE_RATE_HZ: f64 = 2000.0;
/// Record before release and after separation: the class forgets by a factor e in 2 ms.
const MARGIN_S: f64 = 0.05;
const ROOM: usize = 24;

/// Peak in class 60 over the unfiltered one.
#[derive(Debug, Clone, PartialEq)]
pub struct CfcRatio {
    best: f64,
    /// Change for one standard uncertainty of each input.
    shares: Vec<f64>,
}

impl CfcRatio {
    /// # Errors
    /// As [`super::simulate`] for the best values; a moved input that gives no launch counts as no change.
    pub fn of(setup: &LaunchSetup, inputs: &Inputs) -> Result<Self, ModelError> {
        let best = ratio(setup, RATE_HZ)?;
        let fast = LaunchSetup { relative_tolerance: FAST, ..setup.clone() };
        let mut deviates = vec![0.0; inputs.all.len()];
        let mut shares = Vec::with_capacity(deviates.len());
        for i in 0..deviates.len() {
            let mut at = |deviate: f64| {
                deviates[i] = deviate;
                let moved = inputs.moved(&fast, &deviates).setup;
                deviates[i] = 0.0;
                ratio(&moved, COARSE_RATE_HZ)
            };
            shares.push(match (at(1.0), at(-1.0)) {
                (Ok(up), Ok(down)) => 0.5 * (up - down),
                _ => 0.0,
            });
        }
        Ok(Self { best, shares })
    }

    /// The ratio with each input moved by that many of its standard uncertainties.
    pub fn at(&self, deviates: &[f64]) -> f64 {
        self.best + self.shares.iter().zip(deviates).map(|(share, deviate)| share * deviate).sum::<f64>()
    }
}

/// Peak in class 60 over the unfiltered one, of the planned launch.
///
/// # Errors
/// A rig that can't be computed.
pub fn planned_peak_ratio(rig: &Rig) -> Result<f64, ModelError> {
    ratio(&LaunchSetup::planned(rig)?, RATE_HZ)
}

/// Filtered over unfiltered peak of one launch, from a record at a rate.
pub fn ratio(setup: &LaunchSetup, rate_hz: f64) -> Result<f64, ModelError> {
    setup.check()?;
    let layout = Layout::of(setup, false);
    let mut march = March::<ROOM>::released(setup, layout, Keep::Course)?;
    march.run_to_separation()?;
    let course = course(setup, layout, &march.segments.unwrap_or_default());
    let raw_mps2 = course.iter().map(|point| point.1).fold(f64::NEG_INFINITY, f64::max);
    let mut record = record(setup, &course, rate_hz);
    let n_margin = (MARGIN_S * rate_hz).ceil() as usize;
    let n_stroke = record.len() - n_margin;
    record.resize(record.len() + n_margin, record.last().copied().unwrap_or(0.0));
    let Ok(filter) = CfcFilter::new(CLASS, rate_hz) else { return Ok(1.0) };
    let filtered = filter.two_pass(&record, StartUp::Hold);
    let stroke = filtered.iter().skip(n_margin).take(n_stroke);
    Ok(stroke.copied().fold(f64::NEG_INFINITY, f64::max) / raw_mps2)
}

/// Specific force along the rail at even times, from before release to the end of its course.
fn record(setup: &LaunchSetup, course: &[(f64, f64)], rate_hz: f64) -> Vec<f64> {
    let mut record = vec![setup.gravity_along_mps2(); (MARGIN_S * rate_hz).ceil() as usize];
    let (mut next, mut t_s) = (0_u32, 0.0);
    for pair in course.windows(2) {
        let ((from_s, from), (to_s, to)) = (pair[0], pair[1]);
        while t_s < to_s {
            record.push(from + (to - from) * (t_s - from_s) / (to_s - from_s));
            next += 1;
            t_s = f64::from(next) / rate_hz;
        }
    }
    record
}

/// Time and specific force at even parts of every step.
fn course(setup: &LaunchSetup, layout: Layout, segments: &[Segment<ROOM>]) -> Vec<(f64, f64)> {
    const N_PARTS: u32 = 16;
    let mut course = Vec::with_capacity(segments.len() * (N_PARTS as usize + 1));
    for segment in segments {
        let system = System::new(setup, segment.phase.clone(), layout);
        for part in 0..=N_PARTS {
            let s = segment.dense.start + segment.dense.size * f64::from(part) / f64::from(N_PARTS);
            let (t_s, y) = state_of(s, segment.dense.at(s), segment.along);
            let moves_mps2 = if segment.phase.held { 0.0 } else { system.forces_at(&y).ground_acceleration_mps2() };
            course.push((t_s, moves_mps2 + setup.gravity_along_mps2()));
        }
    }
    course
}
