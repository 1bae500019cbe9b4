//! A stretch of the accelerometer that filters may run over, and what noise and bandwidth do to a number read off it.

use crate::calibration::Signal;
use crate::estimation::{CfcFilter, Random, StartUp};
use crate::rig::{FilterStartUp, ReadingSettings, Rig};
use crate::units::STANDARD_GRAVITY_MPS2;

use super::motion::Track;
use super::sensors::limits;
use super::series::{longest_gap_s, rate_hz, span};

/// How far a filter looks beyond the stretch, so that its ends do not reach in: CFC 60 has forgotten by then.
const MARGIN_S: f64 = 0.2;
/// In how wide a margin around the stretch no sample may be missing.
const GAP_MARGIN_S: f64 = 0.02;
/// Noise is drawn this often; the excess is known to a fifth of the noise's deviation then.
const N_DRAWS: u64 = 24;
const SEED: u64 = 60;

/// What disturbs a number read off a filtered stretch, in the number's unit as indicated.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Effect {
    /// By how much noise raises it on average.
    pub excess: f64,
    /// Its scatter for noise.
    pub deviation: f64,
    /// What the channel's own bandwidth takes from it.
    pub bandwidth: f64,
}

#[derive(Debug)]
pub(super) struct Window<'a> {
    signal: &'a Signal,
    settings: &'a ReadingSettings,
    /// Samples that the filter runs over, and those of the stretch within them.
    wide: std::ops::Range<usize>,
    inside: std::ops::Range<usize>,
    /// Smoothed course of the indication at the samples of `wide`.
    course: Vec<f64>,
    noise: Vec<Vec<f64>>,
    pub rate_hz: f64,
}

impl<'a> Window<'a> {
    /// # Errors
    /// A sentence when samples are missing or saturated in it.
    pub(super) fn new(
        signal: &'a Signal,
        track: &Track,
        (from_s, to_s): (f64, f64),
        rig: &'a Rig,
    ) -> Result<Self, String> {
        let rate_hz = rate_hz(signal);
        let gap_s = longest_gap_s(signal, from_s - GAP_MARGIN_S, to_s + GAP_MARGIN_S);
        if gap_s > 1.5 / rate_hz {
            return Err(format!(
                "{:.1} ms without samples between {from_s:.3} and {to_s:.3} s: no filter may run over that",
                1e3 * gap_s
            ));
        }
        let stretch = span(signal, from_s, to_s);
        refuse_saturated(signal, &signal.value[stretch.clone()])?;
        let wide = gapless_around(signal, from_s - MARGIN_S, to_s + MARGIN_S, from_s, 1.5 / rate_hz);
        let inside = stretch.start - wide.start..stretch.end - wide.start;
        let course = course(track, &signal.time_s[wide.clone()]);
        let noise = (0..N_DRAWS)
            .map(|stream| {
                let mut random = Random::new(SEED, stream);
                (0..wide.len()).map(|_| track.noise_mps2 * random.normal()).collect()
            })
            .collect();
        Ok(Self { signal, settings: &rig.details.reading, wide, inside, course, noise, rate_hz })
    }

    /// The filter of a class.
    ///
    /// # Errors
    /// A sentence where the channel's rate or its stated bandwidth does not allow the class.
    pub(super) fn filter(&self, class: u32) -> Result<CfcFilter, String> {
        let needed_hz = minus_3_db_hz(class);
        if let Some(bandwidth_hz) = self.signal.bandwidth_hz.filter(|hz| *hz < needed_hz) {
            return Err(format!(
                "CFC {class} reaches to {needed_hz:.0} Hz, channel {} states a bandwidth of {bandwidth_hz:.0} Hz: use a lower class",
                self.signal.name
            ));
        }
        CfcFilter::under_rule(class, self.rate_hz, self.settings.least_rate_per_class)
            .map_err(|error| error.to_string())
    }

    fn start_up(&self) -> StartUp {
        match self.settings.start_up {
            FilterStartUp::Hold => StartUp::Hold,
            FilterStartUp::Zero => StartUp::Zero,
        }
    }

    fn run(&self, values: &[f64], filter: Option<&CfcFilter>) -> Vec<f64> {
        filter.map_or_else(|| values.to_vec(), |filter| filter.two_pass(values, self.start_up()))
    }

    /// The stretch as indicated, filtered.
    pub(super) fn filtered(&self, filter: Option<&CfcFilter>) -> Vec<f64> {
        self.filtered_from(0, filter)
    }

    /// The same with samples before it.
    pub(super) fn filtered_from(&self, n_early: usize, filter: Option<&CfcFilter>) -> Vec<f64> {
        self.run(&self.signal.value[self.wide.clone()], filter)[self.part(n_early)].to_vec()
    }

    fn part(&self, n_early: usize) -> std::ops::Range<usize> {
        self.inside.start.saturating_sub(n_early)..self.inside.end
    }

    /// When the stretch's first sample was taken.
    pub(super) fn first_s(&self) -> f64 {
        self.signal.time_s[self.wide.start + self.inside.start]
    }

    /// What noise and bandwidth do to a statistic of the filtered stretch (JCGM 101:2008, section 7: by drawing).
    pub(super) fn effect(&self, filter: Option<&CfcFilter>, statistic: &dyn Fn(&[f64]) -> f64) -> Effect {
        self.effect_from(0, filter, statistic)
    }

    pub(super) fn effect_from(
        &self,
        n_early: usize,
        filter: Option<&CfcFilter>,
        statistic: &dyn Fn(&[f64]) -> f64,
    ) -> Effect {
        let part = self.part(n_early);
        let clean = self.run(&self.course, filter);
        let without = statistic(&clean[part.clone()]);
        let shifts: Vec<f64> = self
            .noise
            .iter()
            .map(|noise| {
                let noise = self.run(noise, filter);
                let sum: Vec<f64> = clean[part.clone()].iter().zip(&noise[part.clone()]).map(|(a, b)| a + b).collect();
                statistic(&sum) - without
            })
            .collect();
        let n = shifts.len() as f64;
        let excess = shifts.iter().sum::<f64>() / n;
        let deviation = (shifts.iter().map(|shift| (shift - excess).powi(2)).sum::<f64>() / (n - 1.0)).sqrt();
        let narrower = self.through_the_channel().map_or(without, |course| statistic(&self.run(&course, filter)[part]));
        Effect { excess, deviation, bandwidth: without - narrower }
    }

    /// The course once more through the channel's bandwidth; half of it stands for one pass.
    fn through_the_channel(&self) -> Option<Vec<f64>> {
        let bandwidth_hz = self.signal.bandwidth_hz.filter(|hz| *hz < 0.45 * self.rate_hz)?;
        let twice = CfcFilter::butterworth(bandwidth_hz, self.rate_hz).two_pass(&self.course, StartUp::Hold);
        Some(self.course.iter().zip(twice).map(|(a, b)| 0.5 * (a + b)).collect())
    }

    fn states_bandwidth(&self) -> bool {
        self.signal.bandwidth_hz.is_some()
    }
}

/// F_N of the class table: 5/3 of the class, for CFC 1000 1650 Hz (SAE J211-1, from memory).
fn minus_3_db_hz(class: u32) -> f64 {
    if class == 1000 { 1650.0 } else { f64::from(class) * 5.0 / 3.0 }
}

/// How a filtered number is to be called.
pub(super) fn label(window: &Window<'_>, class: u32) -> String {
    let rate_hz = window.rate_hz;
    let start_up = match window.start_up() {
        StartUp::Hold => "held ends",
        StartUp::Zero => "zero before the first sample",
    };
    let filter = format!("SAE J211-1 two passes at {rate_hz:.0} samples a second, {start_up}");
    if window.states_bandwidth() {
        format!("CFC {class}, {filter}")
    } else {
        format!("filtered as CFC {class}, but no anti-alias bandwidth is stated, so the class is not claimed; {filter}")
    }
}

/// The smoothed indication at given times, linear between nodes.
fn course(track: &Track, times_s: &[f64]) -> Vec<f64> {
    let nodes_s = &track.motion.time_s;
    let mut next = 1;
    let indicated = |idx: usize| track.specific_force_mps2[idx] * (1.0 + track.scale) + track.bias_mps2;
    times_s
        .iter()
        .map(|&time_s| {
            while next + 1 < nodes_s.len() && nodes_s[next] < time_s {
                next += 1;
            }
            let (t0, t1) = (nodes_s[next - 1], nodes_s[next]);
            let share = ((time_s - t0) / (t1 - t0)).clamp(0.0, 1.0);
            indicated(next - 1) * (1.0 - share) + indicated(next) * share
        })
        .collect()
}

fn refuse_saturated(signal: &Signal, stretch: &[f64]) -> Result<(), String> {
    let (low, high) = limits(signal);
    match stretch.iter().find(|value| **value >= high || **value <= low) {
        Some(value) => Err(format!(
            "the accelerometer saturates at {:.1} g: the peak is at least that",
            value / STANDARD_GRAVITY_MPS2
        )),
        None => Ok(()),
    }
}

/// The widest stretch without a gap around an instant, at most from `from_s` to `to_s`.
fn gapless_around(signal: &Signal, from_s: f64, to_s: f64, around_s: f64, gap_s: f64) -> std::ops::Range<usize> {
    let whole = span(signal, from_s, to_s);
    let centre = span(signal, from_s, around_s).end.clamp(whole.start, whole.end.saturating_sub(1));
    let gap_after = |idx: usize| signal.time_s[idx + 1] - signal.time_s[idx] > gap_s;
    let first = (whole.start..centre).rev().find(|&idx| gap_after(idx)).map_or(whole.start, |idx| idx + 1);
    let last = (centre..whole.end.saturating_sub(1)).find(|&idx| gap_after(idx)).map_or(whole.end, |idx| idx + 1);
    first..last
}
