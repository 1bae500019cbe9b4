//! What a launch gave, as soon as the shuttle rests: the display's first answer, not the trial's reading.
//!
//! Launch speed is the shuttle's encoder speed at separation, the instant at which its specific force falls to what
//! the payload's own drag would give (F_contact = m_p (f_shuttle + D/m_p), zero when f_shuttle = −D/m_p). Peak g is the
//! greatest specific force between release and separation through CFC 60. The sealed trial's reading, with its
//! uncertainties, replaces both.

use std::collections::VecDeque;

use crate::reading::{CfcFilter, StartUp};
use crate::rig::Rig;
use crate::units::STANDARD_GRAVITY_MPS2;

use super::state::LaunchSeen;

const KEPT_NS: i64 = 4_000_000_000;
const N_KEPT_MAX: usize = 80_000;
/// Half-width of the straight line through the encoder that gives the speed.
const HALF_WINDOW_NS: i64 = 5_000_000;

/// The last seconds of one channel, sample by sample, bounded.
#[derive(Debug, Default)]
pub struct Tail {
    samples: VecDeque<(i64, f64)>,
}

impl Tail {
    pub fn push(&mut self, t_ns: i64, value: f64) {
        while self.samples.len() >= N_KEPT_MAX || self.samples.front().is_some_and(|(first, _)| t_ns - first > KEPT_NS)
        {
            self.samples.pop_front();
        }
        self.samples.push_back((t_ns, value));
    }

    fn since(&self, from_ns: i64) -> impl Iterator<Item = (i64, f64)> + '_ {
        self.samples.iter().copied().filter(move |(t_ns, _)| *t_ns >= from_ns)
    }
}

/// The launch as its encoder and accelerometer saw it.
#[derive(Debug, Default)]
pub struct LaunchWatch {
    pub x_m: Tail,
    pub specific_force_mps2: Tail,
}

impl LaunchWatch {
    /// Judges the launch that was noticed at `launch_ns`; none when the encoder or the accelerometer did not see it.
    pub fn judge(&self, rig: &Rig, launch_ns: i64) -> Option<LaunchSeen> {
        // The phase tracker notices a release tens of milliseconds late.
        let from_ns = launch_ns - 200_000_000;
        let force = filtered(&self.specific_force_mps2, from_ns)?;
        let fastest_mps = self.fastest_mps(from_ns)?;
        let payload = &rig.payload;
        let drag_n = 0.5 * rig.site.air_density_kg_per_m3 * payload.drag_area_m2.value * fastest_mps * fastest_mps;
        let free_mps2 = -drag_n / payload.mass_kg.value;
        let (peak_idx, peak_mps2) = greatest_before_fall(&force, free_mps2)?;
        let (separation_ns, _) = *force[peak_idx..].iter().find(|(_, f)| *f <= free_mps2)?;
        let launch_speed_mps = self.speed_at(separation_ns)?;
        Some(LaunchSeen { launch_speed_mps, peak_g: peak_mps2 / STANDARD_GRAVITY_MPS2 })
    }

    /// Slope of the straight line through the encoder around an instant (least squares).
    fn speed_at(&self, t_ns: i64) -> Option<f64> {
        let near = self.x_m.since(t_ns - HALF_WINDOW_NS).take_while(|(t, _)| *t <= t_ns + HALF_WINDOW_NS);
        let points: Vec<_> = near.map(|(t, x_m)| ((t - t_ns) as f64 * 1e-9, x_m)).collect();
        slope(&points)
    }

    fn fastest_mps(&self, from_ns: i64) -> Option<f64> {
        let points: Vec<_> = self.x_m.since(from_ns).map(|(t, x_m)| ((t - from_ns) as f64 * 1e-9, x_m)).collect();
        let chunk = points.len().div_ceil(200).max(2);
        points.chunks(chunk).filter_map(slope).reduce(f64::max)
    }
}

/// Specific force since `from_ns` through CFC 60 (SAE J211-1), with its times.
fn filtered(tail: &Tail, from_ns: i64) -> Option<Vec<(i64, f64)>> {
    let (times, raw): (Vec<i64>, Vec<f64>) = tail.since(from_ns).unzip();
    let span_s = (times.last()? - times.first()?) as f64 * 1e-9;
    let rate_hz = (times.len() - 1) as f64 / span_s;
    let filter = CfcFilter::new(60, rate_hz).ok()?;
    Some(times.into_iter().zip(filter.two_pass(&raw, StartUp::Hold)).collect())
}

/// The greatest value before the shuttle is first as free as the payload, and where it stands. The arrest's shock,
/// which comes later, is no part of the launch.
fn greatest_before_fall(force: &[(i64, f64)], free_mps2: f64) -> Option<(usize, f64)> {
    let pulling = force.iter().position(|(_, f)| *f > STANDARD_GRAVITY_MPS2)?;
    let stroke = force[pulling..].iter().take_while(|(_, f)| *f > free_mps2);
    let greatest = stroke.enumerate().max_by(|(_, (_, a)), (_, (_, b))| a.total_cmp(b));
    greatest.map(|(idx, (_, f))| (pulling + idx, *f))
}

fn slope(points: &[(f64, f64)]) -> Option<f64> {
    let n = points.len() as f64;
    let t_mean = points.iter().map(|(t, _)| t).sum::<f64>() / n;
    let x_mean = points.iter().map(|(_, x)| x).sum::<f64>() / n;
    let spread = points.iter().map(|(t, _)| (t - t_mean).powi(2)).sum::<f64>();
    let product = points.iter().map(|(t, x)| (t - t_mean) * (x - x_mean)).sum::<f64>();
    (spread > 0.0).then(|| product / spread)
}

#[cfg(test)]
mod tests {
    use std::f64::consts::PI;

    use super::*;
    use crate::live::testing::north_pier;

    /// Closed form: a = A sin(πt/T) gives v(T) = 2AT/π and x(t) = (AT/π)(t − (T/π) sin(πt/T)); then the shuttle coasts
    /// and is braked hard, which is no part of the launch.
    #[test]
    fn a_half_sine_pull_gives_its_speed_at_separation_and_its_g() {
        let mut watch = LaunchWatch::default();
        let (pull_mps2, stroke_s, start_s) = (62.0, 0.4, 1.0);
        let rate = PI / stroke_s;
        let end_mps = 2.0 * pull_mps2 / rate;
        for k in 0..18_000_i64 {
            let since_s = k as f64 * 1e-4 - start_s;
            let stroke = since_s.clamp(0.0, stroke_s);
            let stroke_x_m = pull_mps2 / rate * (stroke - (rate * stroke).sin() / rate);
            let f_mps2 = match since_s {
                s if s < 0.0 => 1.0,
                s if s < stroke_s => pull_mps2 * (rate * s).sin(),
                s if s < stroke_s + 0.06 => -5.0,
                _ => -290.0,
            };
            watch.x_m.push(k * 100_000, stroke_x_m + end_mps * (since_s - stroke_s).max(0.0));
            watch.specific_force_mps2.push(k * 100_000, f_mps2);
        }
        let seen = watch.judge(&north_pier(), 1_020_000_000).unwrap();
        assert!((seen.launch_speed_mps / end_mps - 1.0).abs() < 0.002, "{seen:?}, {end_mps}");
        assert!((seen.peak_g * 9.80665 / pull_mps2 - 1.0).abs() < 0.002, "{seen:?}");
    }

    #[test]
    fn nothing_is_made_up_when_a_channel_did_not_see_the_launch() {
        let mut watch = LaunchWatch::default();
        for k in 0..10_000_i64 {
            watch.x_m.push(k * 100_000, 0.0);
        }
        assert_eq!(watch.judge(&north_pier(), 500_000_000), None);
    }
}
