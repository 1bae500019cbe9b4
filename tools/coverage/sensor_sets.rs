//! What a rig with fewer or poorer sensors would have seen of the same trial.

use tautrail::calibration::Signal;
use tautrail::estimation::Random;
use tautrail::rig::Role;

pub struct SensorSet {
    pub name: &'static str,
    pub seen: fn(&[Signal], u64) -> Vec<Signal>,
}

pub const SETS: [SensorSet; 4] = [
    SensorSet { name: "both", seen: |signals, _| signals.to_vec() },
    SensorSet { name: "encoder only", seen: |signals, _| without(signals, Role::ShuttleSpecificForce) },
    SensorSet { name: "accelerometer only", seen: |signals, _| without(signals, Role::ShuttlePosition) },
    SensorSet { name: "poor rig", seen: poor },
];

fn without(signals: &[Signal], role: Role) -> Vec<Signal> {
    signals.iter().filter(|signal| signal.role != role).cloned().collect()
}

/// An indicator that says ten hundredths of a newton 80 times a second, some milliseconds late, and an accelerometer of
/// 1 kHz; no encoder, no cell at the anchor.
fn poor(signals: &[Signal], seed: u64) -> Vec<Signal> {
    const LATE_S: f64 = 0.002;
    let late_s = Random::new(seed, 80).normal() * LATE_S;
    let seen = signals.iter().filter_map(|signal| match signal.role {
        Role::ReleaseLineTension => {
            let mut slow = averaged(signal, 125);
            slow.time_s.iter_mut().for_each(|time_s| *time_s += late_s);
            slow.value.iter_mut().for_each(|value| *value = (*value * 10.0).round() / 10.0);
            Some(Signal { time_uncertainty_s: LATE_S, resolution: 0.1, bandwidth_hz: None, range: None, ..slow })
        }
        // A mean of ten samples: −3 dB at 0.443 of its rate (sinc).
        Role::ShuttleSpecificForce => Some(Signal { bandwidth_hz: Some(443.0), ..averaged(signal, 10) }),
        _ => None,
    });
    seen.collect()
}

/// Means of `n` samples without a gap between them.
fn averaged(signal: &Signal, n: usize) -> Signal {
    let mean = |values: &[f64]| values.iter().sum::<f64>() / values.len() as f64;
    let longest_s = 1.5 * n as f64 / signal.nominal_rate_hz;
    let pairs = signal.time_s.chunks_exact(n).zip(signal.value.chunks_exact(n));
    let (time_s, value) = pairs
        .filter(|(times_s, _)| times_s[n - 1] - times_s[0] < longest_s)
        .map(|(times_s, values)| (mean(times_s), mean(values)))
        .unzip();
    Signal { time_s, value, nominal_rate_hz: signal.nominal_rate_hz / n as f64, ..signal.clone() }
}
