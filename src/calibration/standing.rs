//! What is to be said of a trial's calibrations: age, range, and the cells' zeros before and after it. Pure.

use jiff::civil::Date;

use crate::rig::{RecordState, Rig};
use crate::units::brief;

use super::Signal;

/// How long the zero is looked at, at each end of a trial.
const ZERO_S: f64 = 0.5;
/// Fewer samples make no zero.
const ZERO_SAMPLES: usize = 10;

/// A sentence for every doubt, with all the channels that share it: a calibration that is expired, without record, or of a
/// day that can't be told.
pub fn doubts(rig: &Rig, day: Option<Date>) -> Vec<String> {
    let mut doubts: Vec<(String, Vec<&str>)> = Vec::new();
    let mut doubt = |what: String, channel| match doubts.iter_mut().find(|(known, _)| *known == what) {
        Some((_, channels)) => channels.push(channel),
        None => doubts.push((what, vec![channel])),
    };
    for channel in &rig.channels {
        if let Some(excitation_v) = channel.record.as_ref().and_then(|record| record.excitation_v) {
            doubt(
                format!(
                    "calibrated as a share of its excitation, {excitation_v} V then; in use counts are taken as they come, so \
                     another excitation is another scale: keep it, and check it with the shunt"
                ),
                channel.name.as_str(),
            );
        }
        let state = RecordState::of(channel.record.as_ref(), day);
        if !state.is_valid() {
            doubt(state.to_string(), channel.name.as_str());
        }
    }
    for channel in &rig.uncalibrated {
        doubt("no calibration: counts only".to_owned(), channel.name.as_str());
    }
    let told = |(what, channels): (String, Vec<&str>)| {
        format!("channel{} {}: {what}", if channels.len() > 1 { "s" } else { "" }, channels.join(", "))
    };
    doubts.into_iter().map(told).collect()
}

/// All that is to be said of the calibrations behind a trial's signals: what every reading of it carries.
pub fn said_of(rig: &Rig, day: Option<Date>, signals: &[Signal]) -> Vec<String> {
    let mut said = doubts(rig, day);
    said.extend(signals.iter().filter_map(|signal| out_of_range(rig, signal)));
    said
}

/// The rig as it is on a day: scales are less certain by their drift since the calibration.
pub fn on_day(mut rig: Rig, day: Option<Date>) -> Rig {
    for channel in &mut rig.channels {
        if let Some(record) = &channel.record {
            let zero_counts = channel.calibration.zero_counts;
            channel.calibration = record.coefficients_on(day);
            channel.calibration.zero_counts = zero_counts;
        }
    }
    rig
}

/// A sentence where a signal left the range within which its channel was calibrated.
pub fn out_of_range(rig: &Rig, signal: &Signal) -> Option<String> {
    let channel = rig.channels.iter().find(|channel| channel.name == signal.name)?;
    let record = channel.record.as_ref()?;
    let (low, high) = record.tested;
    // Where nothing hangs a cell scatters about zero; an encoder passes its last mark by a little.
    let margin = 0.01 * (high - low);
    let least = signal.value.iter().copied().fold(f64::INFINITY, f64::min);
    let most = signal.value.iter().copied().fold(f64::NEG_INFINITY, f64::max);
    let unit = record.kind.unit();
    let (from, to) = (brief(low, 5), brief(high, 5));
    let beyond = if most > high + margin { most } else { least };
    (most > high + margin || least < low - margin).then(|| {
        format!(
            "channel {} reached {beyond:.4} {unit}, its calibration {} was tested from {from} to {to} {unit}: beyond it \
             values and uncertainties are extrapolated",
            channel.name, record.name
        )
    })
}

/// Standard uncertainty from the change of a cell's zero over a trial, N: the cell is slack at both ends, and where the
/// zero was in between nobody knows (rectangular: JCGM 100:2008, 4.3.7). Nothing where an end is not slack.
pub fn zero_shift_uncertainty_n(signal: &Signal, slack_n: f64) -> f64 {
    let (Some(first_s), Some(last_s)) = (signal.time_s.first(), signal.time_s.last()) else { return 0.0 };
    let mean = |from_s: f64, to_s: f64| {
        let from = signal.time_s.partition_point(|time_s| *time_s < from_s);
        let to = signal.time_s.partition_point(|time_s| *time_s <= to_s);
        let part = &signal.value[from..to];
        (part.len() >= ZERO_SAMPLES).then(|| part.iter().sum::<f64>() / part.len() as f64)
    };
    let ends = (mean(*first_s, first_s + ZERO_S), mean(last_s - ZERO_S, *last_s));
    match ends {
        (Some(before_n), Some(after_n)) if before_n.abs() < slack_n && after_n.abs() < slack_n => {
            (after_n - before_n).abs() / 12f64.sqrt()
        }
        _ => 0.0,
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::rig::Role;

    fn signal(level: impl Fn(f64) -> f64) -> Signal {
        let time_s: Vec<f64> = (0..1000).map(|index| 0.01 * f64::from(index)).collect();
        Signal {
            name: "line".into(),
            role: Role::ReleaseLineTension,
            value: time_s.iter().map(|time_s| level(*time_s)).collect(),
            time_s,
            zero_uncertainty: 0.5,
            scale_relative_uncertainty: 0.001,
            time_uncertainty_s: 0.0,
            nominal_rate_hz: 100.0,
            bandwidth_hz: None,
            resolution: 0.001,
            range: None,
        }
    }

    #[test]
    fn a_zero_that_moved_over_the_trial_is_an_uncertainty() {
        let moved = signal(|time_s| {
            if time_s < 2.0 {
                0.5
            } else if time_s < 8.0 {
                600.0
            } else {
                3.9
            }
        });
        assert!((zero_shift_uncertainty_n(&moved, 15.0) - 3.4 / 12f64.sqrt()).abs() < 1e-9);
        let loaded_at_the_end = signal(|time_s| if time_s < 2.0 { 0.5 } else { 600.0 });
        assert_eq!(zero_shift_uncertainty_n(&loaded_at_the_end, 15.0), 0.0);
    }

    #[test]
    fn an_expired_calibration_and_a_tension_beyond_its_range_are_said() {
        let record = "kind = \"cell\"\nchannel = \"line\"\nsensor = \"s\"\nperson = \"p\"\ndate = \"2031-05-04\"\n\
                      valid_until = \"2032-05-04\"\n[values]\nzero_counts = 0\ncoefficients = [\"0 N\", \"0.001 N\"]\n\
                      zero_uncertainty = \"0.3 N\"\nscale_uncertainty = \"0.1 %\"\ntested_from = \"0 N\"\n\
                      tested_to = \"500 N\"\ndrift_per_year = \"0.1 %\"\n";
        let mut rig = crate::rig::testing::north_pier();
        rig.channels[0].record = crate::rig::CalibrationRecord::read("line.toml", record).0;
        rig.channels.truncate(1);
        let day = |text: &str| Some(text.parse().unwrap());
        assert_eq!(doubts(&rig, day("2031-06-01")), Vec::<String>::new());
        assert_eq!(
            doubts(&rig, day("2032-05-14")),
            ["channel line: calibration line.toml expired on 2032-05-04, 10 days ago: calibrate again"]
        );
        let mut by_share = rig.clone();
        by_share.channels[0].record.as_mut().unwrap().excitation_v = Some(5.0);
        let said = doubts(&by_share, day("2031-06-01"));
        assert!(
            said.len() == 1 && said[0].contains("line: calibrated as a share of its excitation, 5 V then"),
            "{said:?}"
        );
        assert!(on_day(rig.clone(), day("2032-05-04")).channels[0].calibration.scale_relative_uncertainty > 0.0014);
        let said = out_of_range(&rig, &signal(|_| 600.0)).unwrap();
        assert!(said.contains("reached 600.0000 N, its calibration line.toml was tested from 0 to 500 N"), "{said}");
        assert_eq!(out_of_range(&rig, &signal(|_| 450.0)), None);
        assert_eq!(said_of(&rig, day("2032-05-14"), &[signal(|_| 600.0), signal(|_| 450.0)]).len(), 2);
    }
}
