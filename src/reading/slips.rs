//! An encoder that loses its place: jumps that no shuttle makes, and counts that stand while it moves.
//!
//! A jump within one sample is a slip of the wheel or counts lost: what comes after is shifted back by it, with the loss of
//! knowledge in the zero's uncertainty. Counts that stand still in full motion and then catch up are left out as a gap.
//! Both are told; nothing is invented between.

use crate::calibration::Signal;
use crate::rig::Role;

/// A jump beyond what the samples about it move, in counts, that is no quantisation.
const JUMP_COUNTS: f64 = 6.0;
/// Samples either side whose median movement is the usual one.
const ABOUT: usize = 6;
/// Standing for this long in motion is a dropout.
const STANDS_S: f64 = 0.004;
/// Slower than this it may really stand.
const MOVING_MPS: f64 = 0.5;
/// More jumps than this and the channel is not repaired: its place means nothing.
const MOST_JUMPS: usize = 20;

/// What was made of an encoder, and what a person should know of it.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Repaired {
    pub signal: Signal,
    pub findings: Vec<String>,
}

/// `None` where every sample follows from the one before.
pub(super) fn repaired(signal: &Signal) -> Option<Repaired> {
    if signal.role != Role::ShuttlePosition || signal.value.len() < 4 * ABOUT || signal.resolution <= 0.0 {
        return None;
    }
    let kept = without_dropouts(signal);
    let (mut signal, mut findings) = kept.unwrap_or_else(|| (signal.clone(), Vec::new()));
    let jumps = jumps(&signal);
    if jumps.len() > MOST_JUMPS {
        findings.push(format!(
            "channel {} jumps {} times by more than {JUMP_COUNTS} counts: its place means nothing, look at the wheel and the cable",
            signal.name,
            jumps.len()
        ));
    } else {
        for (idx, by_m) in &jumps {
            findings.push(format!(
                "channel {} jumps by {:+.1} mm within one sample at {:.4} s, faster than any shuttle: the encoder slipped or lost counts; what follows is shifted back by that",
                signal.name,
                1e3 * by_m,
                signal.time_s[*idx]
            ));
            signal.value[*idx..].iter_mut().for_each(|value| *value -= by_m);
            signal.zero_uncertainty = signal.zero_uncertainty.hypot(signal.resolution);
        }
    }
    (!findings.is_empty()).then_some(Repaired { signal, findings })
}

/// Movement from sample to sample, without steps over gaps.
fn step_m(signal: &Signal, idx: usize) -> Option<f64> {
    let usual_s = 1.5 / signal.nominal_rate_hz;
    (signal.time_s[idx] - signal.time_s[idx - 1] < usual_s).then(|| signal.value[idx] - signal.value[idx - 1])
}

/// First sample after each jump, and how far it went beyond the usual movement.
fn jumps(signal: &Signal) -> Vec<(usize, f64)> {
    let bound_m = JUMP_COUNTS * signal.resolution;
    let n = signal.value.len();
    let found = (1..n).filter_map(|idx| {
        let by_m = step_m(signal, idx)?;
        if by_m.abs() < bound_m {
            return None;
        }
        let about = (idx.saturating_sub(ABOUT).max(1)..(idx + ABOUT + 1).min(n)).filter(|other| *other != idx);
        let mut usual: Vec<f64> = about.filter_map(|other| step_m(signal, other)).collect();
        usual.sort_by(f64::total_cmp);
        let beyond_m = by_m - usual.get(usual.len() / 2).copied().unwrap_or(0.0);
        // A rate of 10 kHz and 20 m/s move 20 counts of 0.1 mm a sample, steadily: the bound grows with it.
        let largest = usual.iter().map(|step| step.abs()).fold(0.0, f64::max);
        (beyond_m.abs() > bound_m.max(0.5 * largest)).then_some((idx, beyond_m))
    });
    found.collect()
}

/// The signal without the samples that stood in motion; `None` where there are none.
fn without_dropouts(signal: &Signal) -> Option<(Signal, Vec<String>)> {
    let n_stands = ((STANDS_S * signal.nominal_rate_hz) as usize).max(3);
    let mut findings = Vec::new();
    let mut lost = vec![false; signal.value.len()];
    let mut first = 0;
    for run in signal.value.chunk_by(|a, b| a == b) {
        let end = first + run.len();
        if run.len() >= n_stands && first > n_stands && end < signal.value.len() {
            let before_s = signal.time_s[first] - signal.time_s[first - n_stands];
            let before_mps = (signal.value[first] - signal.value[first - n_stands]) / before_s;
            let caught_up_m = signal.value[end] - signal.value[end - 1];
            let missed_m = before_mps * (signal.time_s[end] - signal.time_s[first]);
            if before_mps.abs() > MOVING_MPS && caught_up_m > 0.5 * missed_m.abs() {
                findings.push(format!(
                    "channel {} stands still for {:.1} ms at {:.4} s in full motion and then catches up: those samples are left out",
                    signal.name,
                    1e3 * (signal.time_s[end - 1] - signal.time_s[first]),
                    signal.time_s[first]
                ));
                lost[first + 1..end].fill(true);
            }
        }
        first = end;
    }
    (!findings.is_empty()).then(|| {
        let keep = |column: &[f64]| column.iter().zip(&lost).filter(|(_, lost)| !**lost).map(|(v, _)| *v).collect();
        (Signal { time_s: keep(&signal.time_s), value: keep(&signal.value), ..signal.clone() }, findings)
    })
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::reading::synthetic::{Trial, play};

    fn encoder(trial: &Trial) -> (Signal, f64) {
        let played = play(trial);
        (played.signals[1].clone(), played.release_s)
    }

    #[test]
    fn a_plain_launch_needs_no_repair() {
        let (signal, _) = encoder(&Trial::nominal(3));
        assert_eq!(repaired(&signal), None);
    }

    #[test]
    fn a_slip_in_the_stroke_is_found_and_taken_back() {
        let (clean, release_s) = encoder(&Trial::nominal(3));
        let mut slipped = clean.clone();
        let at = slipped.time_s.partition_point(|t| *t < release_s + 0.25);
        slipped.value[at..].iter_mut().for_each(|x_m| *x_m += 0.012);
        let repaired = repaired(&slipped).unwrap();
        assert!(repaired.findings[0].contains("+12."), "{:?}", repaired.findings);
        let worst = repaired.signal.value.iter().zip(&clean.value).map(|(a, b)| (a - b).abs()).fold(0.0, f64::max);
        assert!(worst < 2.5e-4, "{worst}");
    }

    #[test]
    fn counts_that_stand_in_motion_become_a_gap() {
        let (clean, release_s) = encoder(&Trial::nominal(3));
        let mut stands = clean.clone();
        let at = stands.time_s.partition_point(|t| *t < release_s + 0.25);
        let held = stands.value[at];
        stands.value[at..at + 200].fill(held);
        let repaired = repaired(&stands).unwrap();
        assert!(repaired.findings[0].contains("stands still for"), "{:?}", repaired.findings);
        assert!(repaired.signal.value.len() < clean.value.len() - 150);
    }
}
