//! Motion of the shuttle from the end of the hold to rest: encoder and accelerometer through one smoother.
//!
//! State: position x, speed v and acceleration a in the rail's frame (a driven by white jerk); speed w and acceleration c
//! of the rail itself, which recoils; and three constants: accelerometer bias b and scale error s, encoder scale error e,
//! each with its calibration as the prior.
//!
//! ```text
//! encoder        z = (1 + e)·x                   + quantisation, uniform over one count (GUM 4.3.7)
//! accelerometer  z = (1 + s)·(a + c + g·sin θ) + b + noise as seen in the hold
//! while standing 0 = v, 0 = a, 0 = w, 0 = c
//! ```
//!
//! Products of states are linearised about the prediction. A first pass shows how much jerk to allow where (a release
//! and a brake need a thousand times what the stroke does) and how much the rail moves; the second one uses it.
//! Covariances therefore hold noise and calibration together. Samples at the end of a channel's range are left out: there
//! the channel only says "at least". Without the rail's states a recoil of 0.03 m/s moved s by 0.26 %.

use nalgebra::{SMatrix, SVector};

use crate::calibration::Signal;

use super::apart;
use super::dynamics::{
    A, BIAS, Drive, ENCODER_SCALE, LINKS, N, RAIL_A, RAIL_V, RailModel, SCALE, V, X, process, transition,
};
use super::result::Motion;
use super::sensors::limits;
use super::series::{BIN_S, Binned, Stats, span, stats_between};
use super::smoother::{Estimate, Filter};

/// Samples closer than this belong to one point in time.
const SAME_TIME_S: f64 = 2e-6;
/// How much hold before the release is taken along, and how much rest after the stop.
const HOLD_S: f64 = 0.5;
const REST_S: f64 = 0.2;
/// Longest run-out that is looked at when no rest was seen.
const LONGEST_S: f64 = 3.0;
/// Power density of the white jerk, (m/s³)²·s: standing, in the stroke, and while the release or the brake acts.
const JERK_STANDING: f64 = 1e-2;
const JERK_STROKE: f64 = 5e3;
const JERK_FIRST_PASS: f64 = 1e5;
const JERK_SHOCK: f64 = 1e7;
/// Share of a channel's limit within which noise is cut off on one side.
const CLEAR_OF_LIMIT: f64 = 0.02;
/// Pseudo-measurements of a standing shuttle.
const STANDING_SPEED_MPS: f64 = 1e-3;
const STANDING_ACCELERATION_MPS2: f64 = 0.05;
/// Least speed of the rail in the second pass, as a standard deviation.
const RAIL_LEAST_MPS: f64 = 5e-4;
/// Accelerometer scale, over its calibration's uncertainty, from which the two sensors contradict each other.
const STRAINED: f64 = 4.0;
/// A rail that swings slower than this, as the rig file has it, can't be told from an accelerometer's scale in a stroke.
const SLOW_RAIL_PER_S: f64 = 60.0;
/// Over which the rail's movement in the first pass is looked at, either side.
const RAIL_WINDOW_S: f64 = 0.02;
/// Incline as built against the rig file, as a standard uncertainty: it shows as accelerometer bias.
const INCLINE_RAD: f64 = 0.002;

/// What the smoother needs to know beside the samples.
#[derive(Debug, Clone, Copy)]
pub(super) struct Setting {
    pub release_s: f64,
    pub u_release_s: f64,
    /// Since when the shuttle stood before the release; `None` when it was let go while it still moved.
    pub stood_from_s: Option<f64>,
    /// g·sin θ.
    pub gravity_along_mps2: f64,
    /// Where the shuttle stands at the hold when no encoder says so, and how well that is known.
    pub planned_x_m: f64,
    pub u_planned_x_m: f64,
    pub brake_x_m: f64,
    pub end_s: f64,
    /// How the rail moves if the rig file is right about its feet.
    pub rail: Option<RailModel>,
}

/// The smoothed motion and what the smoother learnt of the sensors.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Track {
    pub motion: Motion,
    /// a + g·sin θ.
    pub gravity_along_mps2: f64,
    pub bias_mps2: f64,
    pub u_bias_mps2: f64,
    pub scale: f64,
    pub u_scale: f64,
    pub u_encoder_scale: f64,
    /// Standard deviation of the accelerometer in the hold.
    pub noise_mps2: f64,
    pub rest_s: Option<f64>,
    /// Mean normalised squared innovation of the encoder in the stroke: about 1 when the sensors agree.
    pub consistency: f64,
    /// Speed of the rail against the ground and its uncertainty together with the shuttle's, where both sensors show it.
    pub rail_v_mps: Vec<f64>,
    pub u_ground_v_mps: Vec<f64>,
    /// a + c + g·sin θ: what shuttle and payload feel, and its standard uncertainty.
    pub specific_force_mps2: Vec<f64>,
    pub u_specific_force_mps2: Vec<f64>,
    pub has_position: bool,
    pub has_specific_force: bool,
    /// How far the two sensors contradict each other, over the accelerometer's calibration, where that parted them.
    pub parted: Option<f64>,
    /// The rail may move this fast, unseen: with the encoder alone, on feet that the rig file describes.
    pub unseen_rail_mps: f64,
}

#[derive(Debug, Clone, Copy, Default)]
struct Node {
    time_s: f64,
    /// Position and its variance.
    position: Option<(f64, f64)>,
    specific_force: Option<f64>,
}

struct Smoothing<'a> {
    setting: &'a Setting,
    nodes: Vec<Node>,
    prior: Estimate<N>,
    noise_variance: f64,
    rest_s: Option<f64>,
    /// Encoder and accelerometer: only both together show the rail's movement.
    sees_rail: bool,
    rail: RailModel,
}

/// `None` when neither channel has samples around the release.
///
/// Both together where they agree within the accelerometer's calibration, else each for itself: [`apart`].
pub(super) fn track(position: Option<&Signal>, force: Option<&Signal>, setting: &Setting) -> Option<Track> {
    let joint = together(position, force, setting)?;
    let (Some(position), Some(force)) = (position, force) else { return Some(joint) };
    let strain = joint.scale.abs() / force.scale_relative_uncertainty.max(1e-6);
    let slow = setting.rail.is_some_and(|rail| rail.rate_per_s < SLOW_RAIL_PER_S);
    if strain > STRAINED || slow { apart::track(position, force, strain, setting).or(Some(joint)) } else { Some(joint) }
}

/// One smoother over what there is.
pub(super) fn together(position: Option<&Signal>, force: Option<&Signal>, setting: &Setting) -> Option<Track> {
    let rest_s = rest(position, force, setting);
    let from_s = setting.release_s - HOLD_S;
    let to_s = rest_s.map_or(setting.release_s + LONGEST_S, |rest_s| rest_s + REST_S).min(setting.end_s + 1e-9);
    let nodes = nodes(position, force, from_s, to_s);
    if nodes.len() < 10 {
        return None;
    }
    let standing = force.and_then(|signal| stats_between(signal, from_s, setting.release_s - 0.01));
    let floor = force.map_or(1.0, |signal| signal.resolution / 12f64.sqrt());
    let noise_mps2 = standing.map_or(floor, |stats: Stats| stats.deviation.max(floor)).max(1e-6);
    let prior = prior(position, force, &nodes, setting);
    let sees_rail = position.is_some() && force.is_some();
    let noise_variance = noise_mps2 * noise_mps2;
    let rail = RailModel::ON_FEET;
    let smoothing = Smoothing { setting, nodes, prior, noise_variance, rest_s, sees_rail, rail };
    let first = smoothing.run(None).0;
    let drives = smoothing.drives(&first, force.is_some());
    let (smoothed, consistency) = smoothing.run(Some(&drives));
    Some(smoothing.finish(&smoothed, consistency, position, force, noise_mps2))
}

impl Smoothing<'_> {
    /// One pass forward and back; also the encoder's consistency in the stroke.
    fn run(&self, drives: Option<&[Drive]>) -> (Vec<Estimate<N>>, f64) {
        let mut filter = Filter::new(self.prior, self.nodes.len());
        let (mut sum, mut n) = (0.0, 0_u32);
        let mut last_s = self.nodes[0].time_s;
        for (idx, node) in self.nodes.iter().enumerate() {
            if idx > 0 {
                let dt_s = node.time_s - last_s;
                let drive = drives.map_or_else(|| self.first_drive(node), |drives| drives[idx]);
                let rate_per_s = self.rail.rate_per_s;
                filter.predict(transition(dt_s, rate_per_s), &process(dt_s, &drive, rate_per_s));
            }
            last_s = node.time_s;
            if let Some((z, variance)) = node.position {
                let innovation = filter.update(position_row(z), z, variance);
                if node.time_s > self.setting.release_s + 0.02 && z < self.setting.brake_x_m {
                    sum += innovation.normalised_square();
                    n += 1;
                }
            }
            self.update_force(&mut filter, node);
            self.update_standing(&mut filter, node);
            filter.mark();
        }
        let smoothed = if drives.is_some() { filter.smooth() } else { filter.smooth_states() };
        (smoothed, if n > 0 { sum / f64::from(n) } else { 1.0 })
    }

    fn update_standing(&self, filter: &mut Filter<N, LINKS>, node: &Node) {
        if self.stands(node.time_s) {
            filter.update(unit(V), 0.0, STANDING_SPEED_MPS.powi(2));
            filter.update(unit(A), 0.0, STANDING_ACCELERATION_MPS2.powi(2));
            filter.update(unit(RAIL_V), 0.0, STANDING_SPEED_MPS.powi(2));
            filter.update(unit(RAIL_A), 0.0, STANDING_ACCELERATION_MPS2.powi(2));
        }
    }

    /// About the prediction: (1 + ŝ)·(a + c) + b + f̂·s = z − (1 + ŝ)·g sin θ + f̂·ŝ.
    ///
    /// Never about a smoothed value: that shares the sample's own noise, and 5,000 samples of it moved s by 4 %.
    fn update_force(&self, filter: &mut Filter<N, LINKS>, node: &Node) {
        let Some(z) = node.specific_force else { return };
        let gravity = self.setting.gravity_along_mps2;
        let state = &filter.now().state;
        let (force, scale) = (state[A] + state[RAIL_A] + gravity, state[SCALE]);
        let mut row = SVector::<f64, N>::zeros();
        row[A] = 1.0 + scale;
        row[RAIL_A] = 1.0 + scale;
        row[BIAS] = 1.0;
        row[SCALE] = force;
        filter.update(row, z - (1.0 + scale) * gravity + force * scale, self.noise_variance);
    }

    fn stands(&self, time_s: f64) -> bool {
        let released_s = self.setting.release_s - 0.002 - 3.0 * self.setting.u_release_s;
        self.setting.stood_from_s.is_some_and(|from_s| time_s > from_s + 2.0 * BIN_S && time_s < released_s)
            || self.rest_s.is_some_and(|rest_s| time_s > rest_s + 2.0 * BIN_S)
    }

    fn first_jerk(&self, node: &Node) -> f64 {
        if self.stands(node.time_s) {
            return JERK_STANDING;
        }
        let near_release = (node.time_s - self.setting.release_s).abs() < 0.005 + 3.0 * self.setting.u_release_s;
        let braking = node.position.is_some_and(|(x, _)| x > self.setting.brake_x_m - 0.02);
        match (near_release, braking) {
            (true, _) => JERK_SHOCK,
            (_, true) => 0.1 * JERK_SHOCK,
            _ => JERK_FIRST_PASS,
        }
    }

    fn first_drive(&self, node: &Node) -> Drive {
        let rail_mps = if self.sees_rail && !self.stands(node.time_s) { self.rail.speed_mps } else { 0.0 };
        Drive { jerk_density: self.first_jerk(node), rail_mps }
    }

    /// Drives of the second pass: with an accelerometer the jerk is what the slopes of the first pass show, with both
    /// sensors the rail's movement is as large as the first pass saw it around.
    fn drives(&self, first: &[Estimate<N>], has_force: bool) -> Vec<Drive> {
        let acceleration: Vec<f64> = first.iter().map(|estimate| estimate.state[A]).collect();
        let slopes = if has_force { jerk_density(&self.nodes, &acceleration) } else { Vec::new() };
        let rail = if self.sees_rail { rail_speeds(&self.nodes, first) } else { vec![0.0; first.len()] };
        let at = |(idx, node): (usize, &Node)| {
            let jerk_density = match slopes.get(idx) {
                _ if self.stands(node.time_s) => JERK_STANDING,
                Some(density) => *density,
                None => Some(self.first_jerk(node)).filter(|&first| first > JERK_FIRST_PASS).unwrap_or(JERK_STROKE),
            };
            Drive { jerk_density, rail_mps: if self.stands(node.time_s) { 0.0 } else { rail[idx] } }
        };
        self.nodes.iter().enumerate().map(at).collect()
    }

    fn finish(
        &self,
        smoothed: &[Estimate<N>],
        consistency: f64,
        position: Option<&Signal>,
        force: Option<&Signal>,
        noise_mps2: f64,
    ) -> Track {
        let inflate = consistency.max(1.0);
        let gravity = self.setting.gravity_along_mps2;
        let column = |i: usize| smoothed.iter().map(|estimate| estimate.state[i]).collect::<Vec<_>>();
        let spread = |i: usize, extra: f64| {
            smoothed
                .iter()
                .map(|e| (e.covariance[(i, i)].max(0.0) * inflate + extra * extra).sqrt())
                .collect::<Vec<_>>()
        };
        let zero_m = position.map_or(0.0, |signal| signal.zero_uncertainty);
        let sensors = match (position, force) {
            (Some(_), Some(_)) => "encoder and accelerometer",
            (Some(_), None) => "encoder only",
            _ => "accelerometer only",
        };
        let motion = Motion {
            time_s: self.nodes.iter().map(|node| node.time_s).collect(),
            x_m: column(X),
            v_mps: column(V),
            a_mps2: column(A),
            u_x_m: spread(X, zero_m),
            u_v_mps: spread(V, 0.0),
            u_a_mps2: spread(A, 0.0),
            sensors: sensors.to_owned(),
        };
        let last = smoothed[smoothed.len() - 1];
        let deviation = |i: usize| last.covariance[(i, i)].max(0.0).sqrt();
        Track {
            motion,
            gravity_along_mps2: self.setting.gravity_along_mps2,
            bias_mps2: last.state[BIAS],
            u_bias_mps2: deviation(BIAS),
            scale: last.state[SCALE],
            u_scale: deviation(SCALE),
            u_encoder_scale: if position.is_some() { deviation(ENCODER_SCALE) } else { 0.0 },
            noise_mps2,
            rest_s: self.rest_s,
            consistency,
            rail_v_mps: column(RAIL_V),
            u_ground_v_mps: smoothed.iter().map(|e| u_sum(e, V, RAIL_V, inflate)).collect(),
            specific_force_mps2: smoothed.iter().map(|e| e.state[A] + e.state[RAIL_A] + gravity).collect(),
            u_specific_force_mps2: smoothed.iter().map(|e| u_sum(e, A, RAIL_A, inflate)).collect(),
            has_position: position.is_some(),
            has_specific_force: force.is_some(),
            parted: None,
            unseen_rail_mps: match (force, self.setting.rail) {
                // Anywhere in a swing: its speed's root mean square.
                (None, Some(rail)) => rail.speed_mps / 2f64.sqrt(),
                _ => 0.0,
            },
        }
    }
}

fn unit(i: usize) -> SVector<f64, N> {
    let mut row = SVector::zeros();
    row[i] = 1.0;
    row
}

/// Standard uncertainty of the sum of two states.
fn u_sum(estimate: &Estimate<N>, i: usize, j: usize, inflate: f64) -> f64 {
    let p = &estimate.covariance;
    ((p[(i, i)] + 2.0 * p[(i, j)] + p[(j, j)]).max(0.0) * inflate).sqrt()
}

fn position_row(z: f64) -> SVector<f64, N> {
    let mut row = unit(X);
    row[ENCODER_SCALE] = z;
    row
}

/// Root mean square of the rail's speed around each node, as a first pass saw it.
fn rail_speeds(nodes: &[Node], first: &[Estimate<N>]) -> Vec<f64> {
    let mut sums = vec![0.0];
    for estimate in first {
        sums.push(sums[sums.len() - 1] + estimate.state[RAIL_V].powi(2));
    }
    let (mut low, mut high) = (0, 0);
    let rms = |node: &Node| {
        while nodes[low].time_s < node.time_s - RAIL_WINDOW_S {
            low += 1;
        }
        while high < nodes.len() && nodes[high].time_s <= node.time_s + RAIL_WINDOW_S {
            high += 1;
        }
        ((sums[high] - sums[low]).max(0.0) / (high - low).max(1) as f64).sqrt().max(RAIL_LEAST_MPS)
    };
    nodes.iter().map(rms).collect()
}

/// Squared slope of the acceleration over 2 ms, times 1 ms in which it may turn; the largest within 2 ms around.
fn jerk_density(nodes: &[Node], acceleration: &[f64]) -> Vec<f64> {
    let step_s = (nodes[nodes.len() - 1].time_s - nodes[0].time_s) / (nodes.len() - 1) as f64;
    let reach = ((0.001 / step_s).round() as usize).max(1);
    let mut sums = vec![0.0];
    for a in acceleration {
        sums.push(sums[sums.len() - 1] + a);
    }
    let n = acceleration.len();
    let mean = |centre: usize| {
        let (first, last) = (centre.saturating_sub(reach / 2), (centre + reach / 2 + 1).min(n));
        (sums[last] - sums[first]) / (last - first) as f64
    };
    let slope = |idx: usize| {
        let (first, last) = (idx.saturating_sub(reach), (idx + reach).min(n - 1));
        (mean(last) - mean(first)) / (nodes[last].time_s - nodes[first].time_s).max(step_s)
    };
    let density: Vec<f64> = (0..n).map(|idx| slope(idx).powi(2) * 1e-3).collect();
    let largest_around = |idx: usize| {
        let around = &density[idx.saturating_sub(2 * reach)..(idx + 2 * reach + 1).min(n)];
        around.iter().copied().fold(0.0, f64::max).clamp(5.0, JERK_SHOCK)
    };
    (0..n).map(largest_around).collect()
}

fn prior(position: Option<&Signal>, force: Option<&Signal>, nodes: &[Node], setting: &Setting) -> Estimate<N> {
    let first_x = nodes.iter().find_map(|node| node.position).map(|(x, _)| x);
    let mut state = SVector::zeros();
    state[X] = first_x.unwrap_or(setting.planned_x_m);
    let u_x = if first_x.is_some() { 0.01 } else { setting.u_planned_x_m };
    let u_v = if setting.stood_from_s.is_some_and(|from_s| from_s < nodes[0].time_s) { 0.1 } else { 3.0 };
    let u_bias = force.map_or(1e-3, |signal| signal.zero_uncertainty.hypot(9.81 * INCLINE_RAD));
    let u_scale = force.map_or(1e-6, |signal| signal.scale_relative_uncertainty.max(1e-6));
    let u_encoder = position.map_or(1e-6, |signal| signal.scale_relative_uncertainty.max(1e-7));
    let deviations = SVector::<f64, N>::from([u_x, u_v, 1.0, u_bias, u_scale, u_encoder, 1e-3, 1e-1]);
    Estimate { state, covariance: SMatrix::from_diagonal(&deviations.component_mul(&deviations)) }
}

/// Samples of both channels in one order of time.
fn nodes(position: Option<&Signal>, force: Option<&Signal>, from_s: f64, to_s: f64) -> Vec<Node> {
    let mut nodes: Vec<Node> = Vec::new();
    if let Some(signal) = position {
        let window = span(signal, from_s, to_s);
        let variances = quantisation(&signal.value[window.clone()], signal.resolution);
        nodes.extend(window.zip(variances).map(|(idx, variance)| Node {
            time_s: signal.time_s[idx],
            position: Some((signal.value[idx], variance)),
            specific_force: None,
        }));
    }
    if let Some(signal) = force {
        let (low, high) = limits(signal);
        let clear = |limit: f64| if limit.is_finite() { CLEAR_OF_LIMIT * limit.abs() } else { 0.0 };
        let inside = |value: f64| value > low + clear(low) && value < high - clear(high);
        let window = span(signal, from_s, to_s).filter(|&idx| inside(signal.value[idx]));
        nodes.extend(window.map(|idx| Node {
            time_s: signal.time_s[idx],
            position: None,
            specific_force: Some(signal.value[idx]),
        }));
    }
    nodes.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
    nodes.dedup_by(|later, earlier| {
        let same = later.time_s - earlier.time_s < SAME_TIME_S;
        if same {
            earlier.position = earlier.position.or(later.position);
            earlier.specific_force = earlier.specific_force.or(later.specific_force);
        }
        same
    });
    nodes
}

/// Variance of each count: a run of equal counts has one rounding error among them, so it weighs as one sample.
fn quantisation(values: &[f64], resolution: f64) -> Vec<f64> {
    let one = (resolution * resolution / 12.0).max(1e-14);
    let mut variances = Vec::with_capacity(values.len());
    for run in values.chunk_by(|a, b| (a - b).abs() < 0.5 * resolution) {
        variances.extend(std::iter::repeat_n(one * run.len() as f64, run.len()));
    }
    variances
}

/// When the shuttle came to stand for good, if it stood for a while before the record ends.
fn rest(position: Option<&Signal>, force: Option<&Signal>, setting: &Setting) -> Option<f64> {
    const QUIET_S: f64 = 0.15;
    let from_s = setting.release_s;
    let last_moving = if let Some(signal) = position {
        let x = Binned::new(signal, from_s, setting.end_s);
        let x_end = x.filled().next_back()?.1.mean;
        let still_m = f64::max(3.0 * signal.resolution, 5e-4);
        x.filled()
            .rev()
            .find(|(_, bin)| (bin.max - x_end).abs().max((bin.min - x_end).abs()) > still_m)
            .map(|(idx, _)| x.time_s(idx))
    } else {
        let f = Binned::new(force?, from_s, setting.end_s);
        let n = f.bins.len();
        let level = f.mean(n.saturating_sub((QUIET_S / BIN_S) as usize)..n)?;
        f.filled().rev().find(|(_, bin)| (bin.mean - level).abs() > 0.5).map(|(idx, _)| f.time_s(idx))
    };
    last_moving.map(|time_s| time_s + BIN_S / 2.0).filter(|time_s| setting.end_s - time_s > QUIET_S)
}

impl Track {
    /// Mean speed in the rail's frame between two instants; 0 where no node lies there.
    pub(super) fn mean_speed_mps(&self, from_s: f64, to_s: f64) -> f64 {
        let between = &self.motion.v_mps[self.index_at(from_s)..self.index_at(to_s)];
        if between.is_empty() { 0.0 } else { between.iter().sum::<f64>() / between.len() as f64 }
    }

    /// Index of the first node at or after an instant.
    pub(super) fn index_at(&self, time_s: f64) -> usize {
        self.motion.time_s.partition_point(|&t| t < time_s).min(self.motion.time_s.len().saturating_sub(1))
    }
}
