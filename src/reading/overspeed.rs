//! An encoder that can't follow: beyond some speed its counter loses counts and shows a slower shuttle.
//!
//! One sensor alone can't tell that from a slower launch. The accelerometer's integral can: where the two agree at low speed
//! and the encoder falls behind for good beyond one, it is the encoder. It is then refused whole, since its place after the
//! lost counts means nothing.

use crate::calibration::Signal;

use super::release::Release;
use super::series::span;

/// Grid on which speeds are compared, and half the span of the encoder's difference.
const STEP_S: f64 = 0.002;
const HALF_SPAN_S: f64 = 0.004;
/// Longest stroke that is looked at.
const LONGEST_S: f64 = 1.5;
/// How far the encoder must lag: a rail recoils by a few tenths of a metre a second, an accelerometer's scale is off by less.
const LAG_SHARE: f64 = 0.1;
const LAG_MPS: f64 = 1.0;
/// Speeds agree where they differ by less than this share, from this speed on.
const AGREE_SHARE: f64 = 0.06;
const FROM_MPS: f64 = 1.5;
/// Points that must agree before the lag, and lag after.
const N_LEAST: usize = 8;

/// Speed from which on the encoder lags, and by how much at the end; `None` where it follows.
pub(super) fn lags_beyond(position: &Signal, force: &Signal, release: &Release) -> Option<(f64, f64)> {
    let speeds = speeds(position, force, release)?;
    let fastest = speeds.iter().enumerate().max_by(|a, b| a.1.0.total_cmp(&b.1.0))?.0;
    let stroke: Vec<(f64, f64)> = speeds[..=fastest].iter().copied().filter(|(felt, _)| *felt > FROM_MPS).collect();
    let lags = |(felt, seen): &(f64, f64)| felt - seen > LAG_MPS.max(LAG_SHARE * felt);
    let first = stroke.iter().rposition(|pair| !lags(pair))? + 1;
    let agree = |(felt, seen): &&(f64, f64)| (seen - felt).abs() < AGREE_SHARE * felt;
    // What lies between the agreement and the full lag is on its way.
    let good = stroke[..first].iter().take_while(agree).count();
    let (felt, seen) = stroke.last()?;
    (good >= N_LEAST && stroke.len() - first >= N_LEAST).then(|| (stroke[good - 1].0, felt - seen))
}

/// Speed by the accelerometer and by the encoder from the release on.
fn speeds(position: &Signal, force: &Signal, release: &Release) -> Option<Vec<(f64, f64)>> {
    let standing = release.standing_force_mps2?;
    let window = span(force, release.time_s, release.time_s + LONGEST_S);
    let (times_s, values) = (&force.time_s[window.clone()], &force.value[window]);
    let mut felt_mps = 0.0;
    let mut next_s = release.time_s + STEP_S;
    let mut speeds = Vec::new();
    for (pair_s, pair) in times_s.windows(2).zip(values.windows(2)) {
        felt_mps += (0.5 * (pair[0] + pair[1]) - standing) * (pair_s[1] - pair_s[0]);
        if pair_s[1] >= next_s {
            let Some(seen_mps) = difference(position, pair_s[1]) else { break };
            speeds.push((felt_mps, seen_mps));
            next_s += STEP_S;
        }
    }
    Some(speeds)
}

/// Central difference of the encoder about an instant.
fn difference(position: &Signal, at_s: f64) -> Option<f64> {
    let window = span(position, at_s - HALF_SPAN_S, at_s + HALF_SPAN_S);
    let (first, last) = (window.start, window.end.checked_sub(1)?);
    let over_s = position.time_s[last] - position.time_s.get(first)?;
    (over_s > HALF_SPAN_S).then(|| (position.value[last] - position.value[first]) / over_s)
}

#[cfg(test)]
mod tests {
    use crate::reading::synthetic::{Trial, play};
    use crate::reading::{Reading, read};
    use crate::rig::Role;

    fn reading_with(limit_mps: f64) -> (Reading, f64) {
        let trial = Trial::nominal(4);
        let mut played = play(&trial);
        let encoder = played.signals.iter_mut().find(|signal| signal.role == Role::ShuttlePosition).unwrap();
        let mut lost_m = 0.0;
        let before = encoder.value.clone();
        for idx in 1..before.len() {
            let most_m = limit_mps * (encoder.time_s[idx] - encoder.time_s[idx - 1]);
            let moved_m = before[idx] - before[idx - 1];
            // A whole count may fall into one sample at any speed.
            if moved_m > most_m + encoder.resolution {
                lost_m += moved_m - most_m;
            }
            encoder.value[idx] = before[idx] - lost_m;
        }
        (read(&played.signals, &trial.rig), played.launch_speed_mps)
    }

    #[test]
    fn an_encoder_that_cannot_follow_is_named_and_the_speed_is_the_accelerometers() {
        let (reading, truth_mps) = reading_with(11.0);
        let told = reading.findings.iter().find(|finding| finding.contains("loses counts"));
        assert!(told.is_some_and(|finding| finding.contains("beyond 1")), "{:?}", reading.findings);
        let speed = reading.result("launch_speed").unwrap();
        assert!((speed.low..=speed.high).contains(&truth_mps), "{speed:?} for {truth_mps}");
        assert!(reading.result("draw").is_some(), "{:?}", reading.absence("draw"));
        assert!(reading.absence("separation_x").is_some_and(|absent| absent.reason.contains("loses counts")));
    }

    #[test]
    fn an_encoder_that_follows_is_not_accused() {
        let (reading, _) = reading_with(40.0);
        assert!(!reading.findings.iter().any(|finding| finding.contains("loses counts")), "{:?}", reading.findings);
    }
}
