//! Peak acceleration in the power stroke, in multiples of 9.80665 m/s², as filtered.
//!
//! The accelerometer's samples go through the two passes of a channel class, one by one and unsmoothed, and bias and
//! scale as the smoother found them are taken off the filtered peak. A gap in the stroke or a saturated sample makes
//! the result absent: a filter run over either gives a plausible wrong number.

use crate::calibration::Signal;
use crate::rig::{Rig, Role};
use crate::units::STANDARD_GRAVITY_MPS2;

use super::motion::Track;
use super::rows::{Book, Budget};
use super::sensors::{Sensors, limits};
use super::series::{longest_gap_s, rate_hz, span};
use crate::estimation::{CfcFilter, StartUp};

pub(super) const CLASS: u32 = 60;
/// How far the filter looks beyond the stroke, so that its ends do not reach in.
const MARGIN_S: f64 = 0.2;
/// In how wide a margin around the stroke no sample may be missing.
const GAP_MARGIN_S: f64 = 0.02;
/// Incline as built against the rig file: the kinematic value needs it.
const INCLINE_RAD: f64 = 0.002;

pub(super) const NAMES: [&str; 3] = ["peak_g_cfc60_specific", "peak_g_cfc60_kinematic", "peak_g_raw_specific"];

pub(super) fn report(sensors: &Sensors<'_>, track: &Track, stroke_s: (f64, f64), rig: &Rig, book: &mut Book) {
    let outcome = match sensors.specific_force {
        None => Err(sensors.why_not(Role::ShuttleSpecificForce)),
        Some(signal) => filtered_between(signal, stroke_s).map(|peak| write(signal, &peak, track, rig, book)),
    };
    if let Err(reason) = outcome {
        for name in NAMES {
            book.absent(name, reason.clone());
        }
    }
}

/// What the smoother learnt of the accelerometer, so that a filtered peak can be had again from the samples alone.
pub(super) fn report_sensor(track: &Track, book: &mut Book) {
    if !track.has_specific_force {
        return;
    }
    let against = if track.has_position { "the encoder and the standing shuttle" } else { "the standing shuttle" };
    let bias = Budget::default().with("smoother", track.u_bias_mps2);
    book.result(
        "accelerometer_bias",
        track.bias_mps2,
        "m/s^2",
        bias,
        format!("indication too high by this, from {against}; incline errors show here"),
    );
    let scale = Budget::default().with("smoother", track.u_scale);
    book.result(
        "accelerometer_scale_error",
        track.scale,
        "1",
        scale,
        format!("indication too large by this share, from {against}"),
    );
}

/// Extremes of a filtered stretch, as indicated: bias and scale still in it.
pub(super) struct Filtered {
    pub greatest_mps2: f64,
    pub least_mps2: f64,
    pub raw_greatest_mps2: f64,
    pub noise_gain: f64,
    pub rate_hz: f64,
}

pub(super) fn filtered_between(signal: &Signal, (from_s, to_s): (f64, f64)) -> Result<Filtered, String> {
    let rate_hz = rate_hz(signal);
    let gap_s = longest_gap_s(signal, from_s - GAP_MARGIN_S, to_s + GAP_MARGIN_S);
    if gap_s > 1.5 / rate_hz {
        return Err(format!(
            "{:.1} ms without samples between {from_s:.3} and {to_s:.3} s: no filter may run over that",
            1e3 * gap_s
        ));
    }
    let stretch = &signal.value[span(signal, from_s, to_s)];
    refuse_saturated(signal, stretch)?;
    let filter = CfcFilter::new(CLASS, rate_hz).map_err(|error| error.to_string())?;
    let wide = gapless_around(signal, from_s - MARGIN_S, to_s + MARGIN_S, from_s, 1.5 / rate_hz);
    let filtered = filter.two_pass(&signal.value[wide.clone()], StartUp::Hold);
    let inside = wide.zip(filtered).filter(|(idx, _)| (from_s..to_s).contains(&signal.time_s[*idx]));
    let (least_mps2, greatest_mps2) = inside
        .map(|(_, value)| value)
        .fold((f64::INFINITY, f64::NEG_INFINITY), |(low, high), value| (low.min(value), high.max(value)));
    let raw_greatest_mps2 = stretch.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    Ok(Filtered { greatest_mps2, least_mps2, raw_greatest_mps2, noise_gain: filter.noise_gain(), rate_hz })
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

fn write(signal: &Signal, peak: &Filtered, track: &Track, rig: &Rig, book: &mut Book) {
    let true_mps2 = |indicated: f64| (indicated - track.bias_mps2) / (1.0 + track.scale);
    let g = |mps2: f64| mps2 / STANDARD_GRAVITY_MPS2;
    let calibration =
        |value: f64| Budget::default().with("scale", g(value * track.u_scale)).with("bias", g(track.u_bias_mps2));
    let class = match signal.bandwidth_hz {
        Some(_) => "CFC 60".to_owned(),
        None => {
            "filtered as CFC 60, but the anti-alias bandwidth is not stated, so the class is not claimed".to_owned()
        }
    };
    let rate_hz = peak.rate_hz;
    let method = |kind: &str| {
        format!(
            "{kind} along the rail at the shuttle, greatest in the power stroke; {class}, SAE J211-1 two passes at {rate_hz:.0} samples a second, held ends"
        )
    };
    let value = true_mps2(peak.greatest_mps2);
    let noise = g(peak.noise_gain * track.noise_mps2);
    book.result(NAMES[0], g(value), "g", calibration(value).with("noise", noise), method("specific force"));
    let kinematic = value - track.gravity_along_mps2;
    let incline = g(STANDARD_GRAVITY_MPS2 * rig.rail.incline_rad.cos() * INCLINE_RAD);
    let budget = calibration(value).with("noise", noise).with("incline", incline);
    book.result(NAMES[1], g(kinematic), "g", budget, method("kinematic acceleration"));
    let raw = true_mps2(peak.raw_greatest_mps2);
    let budget = calibration(raw).with("noise", g(track.noise_mps2));
    book.result(NAMES[2], g(raw), "g", budget, "specific force along the rail at the shuttle, greatest single sample in the power stroke, unfiltered: noise makes it high");
}
