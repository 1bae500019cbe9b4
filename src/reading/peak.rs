//! Peak acceleration in the power stroke, in multiples of 9.80665 m/s², by channel class; 3 ms value and onset.
//!
//! The accelerometer's samples go through the two passes of a channel class, one by one and unsmoothed, and bias and
//! scale as the smoother found them are taken off the filtered peak. A gap in the stroke or a saturated sample makes
//! the result absent: a filter run over either gives a plausible wrong number. So does a rate or a stated bandwidth below
//! what the class asks; a channel that states no bandwidth is called "filtered", never by its class alone.
//!
//! The greatest of many noisy samples lies above the greatest true one. How far is worked out by laying drawn noise of the
//! channel's own size over the smoothed course, and taken off (see [`Window::effect`]).

use crate::estimation::CfcFilter;
use crate::rig::{Rig, Role, ThreeMs};
use crate::units::STANDARD_GRAVITY_MPS2;

use super::motion::Track;
use super::rows::{Book, Budget};
use super::sensors::Sensors;
use super::stretch::{Effect, Window, label};

/// Class of the limit in the rig file, of the onset and of the arrest.
pub(super) const CLASS: u32 = 60;
/// Class of the 3 ms value where the channel allows it.
const THREE_MS_CLASS: u32 = 180;
const THREE_MS_S: f64 = 0.003;
/// Name of the 3 ms value where it is absent; else the class stands in it.
const THREE_MS: &str = "g_3ms_specific";
/// The onset rate is the mean slope over this time.
const SLOPE_S: f64 = 0.001;
const LEAST_SLOPE_POINTS: f64 = 4.0;
/// How long before the release a filtered step may begin.
const BEFORE_S: f64 = 0.02;
/// Incline as built against the rig file: the kinematic value needs it.
const INCLINE_RAD: f64 = 0.002;

/// All results of this file, for a rig.
pub(super) fn names(rig: &Rig) -> Vec<String> {
    let classes = rig.details.reading.classes.iter();
    let mut names: Vec<String> =
        classes.flat_map(|class| ["specific", "kinematic"].map(|kind| format!("peak_g_cfc{class}_{kind}"))).collect();
    names.extend(["peak_g_raw_specific", THREE_MS, "onset_rate", "time_to_peak"].map(str::to_owned));
    names
}

pub(super) fn report(
    sensors: &Sensors<'_>,
    track: &Track,
    release: (f64, f64),
    separation_s: f64,
    rig: &Rig,
    book: &mut Book,
) {
    let window = match sensors.specific_force {
        None => Err(sensors.why_not(Role::ShuttleSpecificForce)),
        Some(signal) => Window::new(signal, track, (release.0, separation_s), rig),
    };
    match window {
        Ok(window) => {
            let peak = Peak { window: &window, track, rig };
            for class in &rig.details.reading.classes {
                peak.class_rows(*class, book);
            }
            peak.raw_row(book);
            peak.three_ms_row(book);
            peak.onset_rows(release, book);
        }
        Err(reason) => {
            for name in names(rig) {
                book.absent(&name, reason.clone());
            }
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

fn greatest(values: &[f64]) -> f64 {
    values.iter().copied().fold(f64::NEG_INFINITY, f64::max)
}

fn g(mps2: f64) -> f64 {
    mps2 / STANDARD_GRAVITY_MPS2
}

struct Peak<'a> {
    window: &'a Window<'a>,
    track: &'a Track,
    rig: &'a Rig,
}

impl Peak<'_> {
    /// Bias and scale taken off.
    fn true_mps2(&self, indicated: f64) -> f64 {
        (indicated - self.track.bias_mps2) / (1.0 + self.track.scale)
    }

    fn budget(&self, value_mps2: f64, effect: Effect) -> Budget {
        Budget::default()
            .with("scale of the accelerometer", g(value_mps2 * self.track.u_scale))
            .with("bias of the accelerometer", g(self.track.u_bias_mps2))
            .with("noise", g(effect.deviation))
            .with("noise's share in a greatest value", g(0.5 * effect.excess))
            .with("bandwidth of the channel", g(effect.bandwidth))
    }

    fn class_rows(&self, class: u32, book: &mut Book) {
        let names = ["specific", "kinematic"].map(|kind| format!("peak_g_cfc{class}_{kind}"));
        let filter = match self.window.filter(class) {
            Ok(filter) => filter,
            Err(reason) => return names.iter().for_each(|name| book.absent(name, reason.clone())),
        };
        let effect = self.window.effect(Some(&filter), &greatest);
        let value = self.true_mps2(greatest(&self.window.filtered(Some(&filter))) - effect.excess);
        let method = |kind: &str| {
            format!("{kind} along the rail at the shuttle, greatest in the power stroke; {}", label(self.window, class))
        };
        book.result(&names[0], g(value), "g", self.budget(value, effect), method("specific force"));
        let kinematic = value - self.track.gravity_along_mps2;
        let incline = g(STANDARD_GRAVITY_MPS2 * self.rig.rail.incline_rad.cos() * INCLINE_RAD);
        let budget = self.budget(value, effect).with("incline", incline);
        book.result(&names[1], g(kinematic), "g", budget, method("kinematic acceleration"));
    }

    fn raw_row(&self, book: &mut Book) {
        let effect = self.window.effect(None, &greatest);
        let sample = self.true_mps2(greatest(&self.window.filtered(None)));
        let value = sample - effect.excess;
        let method = format!(
            "specific force along the rail at the shuttle, unfiltered: the greatest sample in the power stroke is {:.2} g, of which noise alone gives {:.2} g, taken off",
            g(sample),
            g(effect.excess)
        );
        book.result("peak_g_raw_specific", g(value), "g", self.budget(value, effect), method);
    }

    fn three_ms_row(&self, book: &mut Book) {
        let found =
            [THREE_MS_CLASS, CLASS].into_iter().find_map(|class| Some((class, self.window.filter(class).ok()?)));
        let Some((class, filter)) = found else {
            return book.absent(THREE_MS, self.window.filter(CLASS).err().unwrap_or_default());
        };
        let kind = self.rig.details.reading.three_ms;
        let width = THREE_MS_S * self.window.rate_hz;
        let statistic = |values: &[f64]| match kind {
            ThreeMs::Contiguous => contiguous(values, width),
            ThreeMs::Cumulative => cumulative(values, width),
        };
        let effect = self.window.effect(Some(&filter), &statistic);
        let value = self.true_mps2(statistic(&self.window.filtered(Some(&filter))) - effect.excess);
        let method = format!(
            "specific force along the rail at the shuttle that was exceeded for 3 ms in the power stroke, {}; {}",
            kind.word(),
            label(self.window, class)
        );
        book.result(&format!("g_3ms_cfc{class}_specific"), g(value), "g", self.budget(value, effect), method);
    }

    /// Onset rate and time to the peak, both of the CFC 60 signal.
    fn onset_rows(&self, release: (f64, f64), book: &mut Book) {
        let filter = match self.window.filter(CLASS) {
            Ok(filter) => filter,
            Err(reason) => {
                book.absent("onset_rate", reason.clone());
                return book.absent("time_to_peak", reason);
            }
        };
        let label = label(self.window, CLASS);
        let rate_hz = self.window.rate_hz;
        self.onset_row(&filter, &label, book);
        let place = |values: &[f64]| greatest_at(values) as f64 / rate_hz;
        let effect = self.window.effect(Some(&filter), &place);
        let time_s = self.window.first_s() + place(&self.window.filtered(Some(&filter))) - release.0;
        let budget = Budget::default()
            .with("noise on a flat top", effect.deviation.hypot(effect.excess))
            .with("release instant", release.1)
            .with("sampling step", 1.0 / rate_hz / 12f64.sqrt());
        book.result(
            "time_to_peak",
            time_s,
            "s",
            budget,
            format!("from the release to the peak of the specific force; {label}"),
        );
    }

    fn onset_row(&self, filter: &CfcFilter, label: &str, book: &mut Book) {
        const NAME: &str = "onset_rate";
        let rate_hz = self.window.rate_hz;
        let least_hz = LEAST_SLOPE_POINTS / SLOPE_S;
        if rate_hz < 0.999 * least_hz {
            return book.absent(
                NAME,
                format!("a slope over 1 ms needs {least_hz:.0} samples a second, the channel has {rate_hz:.0}"),
            );
        }
        let width = SLOPE_S * rate_hz;
        let n_early = (BEFORE_S * rate_hz) as usize;
        let slope = |values: &[f64]| steepest(values, width) / SLOPE_S;
        let effect = self.window.effect_from(n_early, Some(filter), &slope);
        let value =
            (slope(&self.window.filtered_from(n_early, Some(filter))) - effect.excess) / (1.0 + self.track.scale);
        let budget = Budget::default()
            .with("scale of the accelerometer", g(value * self.track.u_scale))
            .with("noise", g(effect.deviation.hypot(0.5 * effect.excess)))
            .with("bandwidth of the channel", g(effect.bandwidth));
        let method = format!(
            "greatest mean slope over 1 ms of the specific force between release and separation; {label}: the filter bounds it"
        );
        book.result(NAME, g(value), "g/s", budget, method);
    }
}

/// The level that is exceeded over `width` sample steps without a break, straight lines between the samples.
fn contiguous(values: &[f64], width: f64) -> f64 {
    /// Parts of a step in which the best beginning is looked for, next to the best sample.
    const FINE: usize = 16;
    let at = |place: f64| {
        let (idx, share) = (place.floor() as usize, place.fract());
        let next = values.get(idx + 1).copied().unwrap_or(f64::NEG_INFINITY);
        if share == 0.0 { values[idx] } else { values[idx] * (1.0 - share) + next * share }
    };
    let level = |begin: f64| {
        let (first, last) = (begin.ceil() as usize, (begin + width).floor() as usize);
        let inside = values[first..=last].iter().copied().fold(f64::INFINITY, f64::min);
        inside.min(at(begin)).min(at(begin + width))
    };
    let last_begin = values.len() as f64 - 1.0 - width;
    if last_begin < 0.0 {
        return f64::NAN;
    }
    let coarse = (0..=last_begin.floor() as usize).map(|begin| begin as f64);
    let best = coarse.max_by(|a, b| level(*a).total_cmp(&level(*b))).unwrap_or(0.0);
    let fine = (0..=2 * FINE).map(|k| (best - 1.0 + k as f64 / FINE as f64).clamp(0.0, last_begin));
    fine.map(level).fold(f64::NEG_INFINITY, f64::max)
}

/// The level that is exceeded over `width` sample steps in all; each sample stands for one step.
fn cumulative(values: &[f64], width: f64) -> f64 {
    let mut sorted = values.to_vec();
    sorted.sort_by(|a, b| b.total_cmp(a));
    let place = (width - 0.5).max(0.0);
    let below = place.floor() as usize;
    match (sorted.get(below), sorted.get(below + 1)) {
        (Some(above), Some(under)) => above + place.fract() * (under - above),
        _ => f64::NAN,
    }
}

/// Greatest rise over `width` sample steps, straight lines between the samples.
fn steepest(values: &[f64], width: f64) -> f64 {
    let (whole, share) = (width.floor() as usize, width.fract());
    let rise = |run: &[f64]| run[whole] * (1.0 - share) + run[whole + 1] * share - run[0];
    values.windows(whole + 2).map(rise).fold(f64::NEG_INFINITY, f64::max)
}

fn greatest_at(values: &[f64]) -> usize {
    values.iter().enumerate().max_by(|a, b| a.1.total_cmp(b.1)).map_or(0, |(idx, _)| idx)
}

#[cfg(test)]
mod tests {
    use super::{contiguous, cumulative};

    // The definition itself: two humps stand over 5 for 3.5 steps in all; the level held over 2 steps in a row is 2.
    #[test]
    fn cumulative_counts_all_humps_and_contiguous_one() {
        let values = [0.0, 6.0, 7.0, 1.0, 5.0, 8.0, 2.0, 2.0];
        assert_eq!(cumulative(&values, 3.5), 5.0);
        assert_eq!(contiguous(&values, 2.0), 2.0);
        assert!(cumulative(&values, 9.0).is_nan());
    }

    // A triangle of height 1 over 20 steps either side is over 1 − w/40 for w steps: similar triangles.
    #[test]
    fn a_triangle_is_exceeded_between_samples_too() {
        let triangle: Vec<f64> = (-20..=20).map(|k: i32| 1.0 - f64::from(k.abs()) / 20.0).collect();
        for width in [3.0, 3.5, 4.25] {
            assert!((contiguous(&triangle, width) - (1.0 - width / 40.0)).abs() < 0.02, "{width}");
            assert!((cumulative(&triangle, width) - (1.0 - width / 40.0)).abs() < 0.02, "{width}");
        }
    }
}
