//! Counts to values by a channel's coefficients.

use std::ops::RangeInclusive;

use thiserror::Error;

use super::Signal;
use crate::rig::{Channel, Coefficients};

/// Why counts can't become a signal.
#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum CalibrationError {
    #[error(
        "channel {channel}: {counts} counts at sample {index} lie outside {min} to {max}, which its encoding can carry"
    )]
    OutOfRange { channel: String, index: usize, counts: f64, min: f64, max: f64 },
    #[error("channel {channel}: sample {index} is not a number")]
    NotANumber { channel: String, index: usize },
    #[error("channel {channel}: {n_times} times for {n_counts} samples")]
    UnequalLengths { channel: String, n_times: usize, n_counts: usize },
    #[error("channel {channel}: time {time_s} s of sample {index} does not follow {before_s} s")]
    TimeNotIncreasing { channel: String, index: usize, time_s: f64, before_s: f64 },
    #[error("channel {channel}: the calibration turns round near {counts:.0} counts, within the range it is used over")]
    NotMonotonic { channel: String, counts: f64 },
}

/// `value = Σ coefficients[k] · (counts − zero_counts)^k`, in the role's unit, by Horner's rule.
pub fn to_value(calibration: &Coefficients, counts: f64) -> f64 {
    let from_zero = counts - calibration.zero_counts;
    calibration.coefficients.iter().rev().fold(0.0, |sum, coefficient| sum * from_zero + coefficient)
}

/// Change of the value for one count more, in the role's unit: the derivative of [`to_value`].
pub fn value_per_count(calibration: &Coefficients, counts: f64) -> f64 {
    let from_zero = counts - calibration.zero_counts;
    let powers = calibration.coefficients.iter().enumerate().skip(1).rev();
    powers.fold(0.0, |sum, (power, coefficient)| sum * from_zero + power as f64 * coefficient)
}

/// Standard uncertainty of one value from zero and scale, in the role's unit (uncorrelated; JCGM 100:2008, 5.1.2).
pub fn value_uncertainty(calibration: &Coefficients, value: f64) -> f64 {
    calibration.zero_uncertainty.hypot(calibration.scale_relative_uncertainty * value)
}

/// What a signal needs beside counts and times: from the device's description and the clock fit.
#[derive(Debug, Clone, PartialEq)]
pub struct Sampling {
    pub nominal_rate_hz: f64,
    /// Anti-alias bandwidth, where the device states it.
    pub bandwidth_hz: Option<f64>,
    /// Standard uncertainty of the time axis against the trial's other signals.
    pub time_uncertainty_s: f64,
    /// The counts that the encoding can carry; at its ends the channel saturates. `None` for float encodings.
    pub counts_range: Option<RangeInclusive<f64>>,
    /// The step in which counts move: 1 for integers, what a display resolves for printed numbers.
    pub count_step: f64,
}

/// The signal of a channel's counts. `time_s` has the channel's group delay already taken off.
///
/// # Errors
/// [`CalibrationError`]: lengths differ, times do not increase, a count is no number or lies outside the encoding, or
/// the calibration is not monotonic over it. Nothing is dropped or repaired.
pub fn signal_from_counts(
    channel: &Channel,
    sampling: &Sampling,
    time_s: Vec<f64>,
    counts: impl ExactSizeIterator<Item = f64>,
) -> Result<Signal, CalibrationError> {
    let name = &channel.name;
    if counts.len() != time_s.len() {
        let (n_times, n_counts) = (time_s.len(), counts.len());
        return Err(CalibrationError::UnequalLengths { channel: name.clone(), n_times, n_counts });
    }
    increasing(name, &time_s)?;
    let range = saturation(channel, sampling.counts_range.as_ref())?;
    let mut value = Vec::with_capacity(time_s.len());
    for (index, counts) in counts.enumerate() {
        in_encoding(name, index, counts, sampling.counts_range.as_ref())?;
        value.push(to_value(&channel.calibration, counts));
    }
    let calibration = &channel.calibration;
    Ok(Signal {
        name: name.clone(),
        role: channel.role,
        time_s,
        value,
        zero_uncertainty: calibration.zero_uncertainty,
        scale_relative_uncertainty: calibration.scale_relative_uncertainty,
        time_uncertainty_s: sampling.time_uncertainty_s,
        nominal_rate_hz: sampling.nominal_rate_hz,
        bandwidth_hz: sampling.bandwidth_hz,
        resolution: value_per_count(calibration, calibration.zero_counts).abs() * sampling.count_step,
        range,
    })
}

fn increasing(channel: &str, time_s: &[f64]) -> Result<(), CalibrationError> {
    let steady = |pair: &[f64]| pair[1] > pair[0];
    match time_s.windows(2).position(|pair| !steady(pair)) {
        None => Ok(()),
        Some(at) => Err(CalibrationError::TimeNotIncreasing {
            channel: channel.to_owned(),
            index: at + 1,
            time_s: time_s[at + 1],
            before_s: time_s[at],
        }),
    }
}

fn in_encoding(
    channel: &str,
    index: usize,
    counts: f64,
    range: Option<&RangeInclusive<f64>>,
) -> Result<(), CalibrationError> {
    let channel = || channel.to_owned();
    match range {
        _ if !counts.is_finite() => Err(CalibrationError::NotANumber { channel: channel(), index }),
        Some(range) if !range.contains(&counts) => {
            let (min, max) = (*range.start(), *range.end());
            Err(CalibrationError::OutOfRange { channel: channel(), index, counts, min, max })
        }
        _ => Ok(()),
    }
}

/// Values at the ends of the encoding, lower first; refused if the calibration turns round between them.
fn saturation(channel: &Channel, range: Option<&RangeInclusive<f64>>) -> Result<Option<(f64, f64)>, CalibrationError> {
    let Some(range) = range else { return Ok(None) };
    let calibration = &channel.calibration;
    let (low, high) = (to_value(calibration, *range.start()), to_value(calibration, *range.end()));
    if let Some(counts) = turning_point(calibration, range) {
        return Err(CalibrationError::NotMonotonic { channel: channel.name.clone(), counts });
    }
    Ok(Some((low.min(high), low.max(high))))
}

/// Where the (at most cubic) polynomial turns round inside the range: a zero of its quadratic derivative.
fn turning_point(calibration: &Coefficients, range: &RangeInclusive<f64>) -> Option<f64> {
    let coefficient = |power: usize| calibration.coefficients.get(power).copied().unwrap_or(0.0);
    let (a, b, c) = (3.0 * coefficient(3), 2.0 * coefficient(2), coefficient(1));
    let roots = if a == 0.0 {
        if b == 0.0 { return None } else { [-c / b; 2] }
    } else {
        let root = (b * b - 4.0 * a * c).sqrt();
        [(-b - root) / (2.0 * a), (-b + root) / (2.0 * a)]
    };
    roots.into_iter().map(|root| root + calibration.zero_counts).find(|counts| range.contains(counts))
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;
    use crate::rig::Role;

    fn cell(coefficients: &[f64]) -> Channel {
        Channel {
            name: "line".into(),
            device: "winch-node".into(),
            device_channel: "line".into(),
            role: Role::ReleaseLineTension,
            calibration: Coefficients {
                zero_counts: 1000.0,
                coefficients: coefficients.to_vec(),
                zero_uncertainty: 0.5,
                scale_relative_uncertainty: 0.001,
            },
            record: None,
        }
    }

    fn i24() -> Sampling {
        Sampling {
            nominal_rate_hz: 10_000.0,
            bandwidth_hz: Some(2_000.0),
            time_uncertainty_s: 1e-5,
            counts_range: Some(-8_388_608.0..=8_388_607.0),
            count_step: 1.0,
        }
    }

    fn converted(channel: &Channel, time_s: &[f64], counts: &[f64]) -> Result<Signal, CalibrationError> {
        signal_from_counts(channel, &i24(), time_s.to_vec(), counts.iter().copied())
    }

    // By hand: 2 + 0.5·(1010 − 1000) + 0.01·(1010 − 1000)² = 8.
    #[test]
    fn a_quadratic_calibration_is_evaluated_about_its_zero() {
        let channel = cell(&[2.0, 0.5, 0.01]);
        assert_eq!(to_value(&channel.calibration, 1010.0), 8.0);
        assert_eq!(value_per_count(&channel.calibration, 1010.0), 0.7);
    }

    #[test]
    fn a_signal_keeps_every_sample_and_says_where_it_saturates() {
        let signal = converted(&cell(&[0.0, 0.001]), &[0.0, 1e-4, 2e-4], &[1000.0, 2000.0, 8_388_607.0]).unwrap();
        assert_eq!(signal.value, [0.0, 1.0, 8387.607]);
        assert_eq!(signal.range, Some((-8389.608, 8387.607)));
        assert_eq!(signal.resolution, 0.001);
    }

    #[test]
    fn a_reversed_sensor_still_has_its_range_in_order() {
        let signal = converted(&cell(&[0.0, -0.001]), &[0.0], &[2000.0]).unwrap();
        assert_eq!(signal.value, [-1.0]);
        assert!(signal.range.is_some_and(|(low, high)| low < high));
    }

    #[test]
    fn what_is_wrong_with_counts_is_said_with_its_place() {
        let straight = cell(&[0.0, 0.001]);
        let said = |result: Result<Signal, CalibrationError>| result.expect_err("must be refused").to_string();
        assert_eq!(
            said(converted(&straight, &[0.0, 1.0], &[0.0, 9e6])),
            "channel line: 9000000 counts at sample 1 lie outside -8388608 to 8388607, which its encoding can carry"
        );
        assert_eq!(said(converted(&straight, &[0.0], &[f64::NAN])), "channel line: sample 0 is not a number");
        assert_eq!(said(converted(&straight, &[0.0], &[])), "channel line: 1 times for 0 samples");
        assert_eq!(
            said(converted(&straight, &[0.5, 0.5], &[0.0, 0.0])),
            "channel line: time 0.5 s of sample 1 does not follow 0.5 s"
        );
        assert_eq!(
            said(converted(&cell(&[0.0, 1.0, -1e-4]), &[0.0], &[0.0])),
            "channel line: the calibration turns round near 6000 counts, within the range it is used over"
        );
    }

    // GUM 5.1.2: √(0.5² + (0.001·1200)²) = 1.3.
    #[test]
    fn zero_and_scale_uncertainty_add_in_quadrature() {
        assert!((value_uncertainty(&cell(&[0.0, 1.0]).calibration, 1200.0) - 1.3).abs() < 1e-12);
    }

    proptest! {
        #[test]
        fn the_slope_is_the_derivative_of_the_value(
            linear in 1e-5..1e-3f64, quadratic in -1e-11..1e-11f64, cubic in -1e-18..1e-18f64, counts in -8e6..8e6f64,
        ) {
            let calibration = cell(&[3.0, linear, quadratic, cubic]).calibration;
            let step = 100.0;
            let difference = (to_value(&calibration, counts + step) - to_value(&calibration, counts - step)) / (2.0 * step);
            let slope = value_per_count(&calibration, counts);
            prop_assert!((difference - slope).abs() <= 1e-6 * slope.abs().max(1e-6));
        }

        #[test]
        fn a_calibration_is_accepted_only_where_it_is_monotonic(
            linear in -1.0..1.0f64, quadratic in -1e-6..1e-6f64, cubic in -1e-13..1e-13f64,
        ) {
            prop_assume!(linear.abs() > 1e-9);
            let channel = cell(&[0.0, linear, quadratic, cubic]);
            let accepted = converted(&channel, &[0.0], &[0.0]).is_ok();
            let slopes: Vec<f64> = (0..=2000)
                .map(|step| value_per_count(&channel.calibration, -8_388_608.0 + 8_388.607_5 * f64::from(step)))
                .collect();
            let one_way = slopes.iter().all(|slope| *slope > 0.0) || slopes.iter().all(|slope| *slope < 0.0);
            // A turn and its return between two grid points may be refused unseen by the grid, never the other way.
            prop_assert!(one_way || !accepted);
        }
    }
}
