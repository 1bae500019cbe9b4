//! A computed launch: its course at any time, its events, its answers, its energy.

use super::along::{Along, state_of};
use super::anchor::{Place, anchor_course};
use super::cord::{CordPhase, CordSet};
use super::energy::{EnergySplit, split};
use super::error::ModelError;
use super::event::{Cost, Event, EventKind, Peak, Segment};
use super::march::{Keep, March};
use super::setup::LaunchSetup;
use super::system::{Layout, System};

/// States of a launch whose course is kept: room for every source and account at once.
pub(super) const ROOM: usize = 48;
/// Spacing of the shuttle's course for the cords' waves.
const PLACE_S: f64 = 2e-3;
/// Spacing of the sampled course.
const SAMPLE_S: f64 = 5e-4;

/// The launch at one instant. Forces are those of the whole launcher.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Sample {
    /// From release.
    pub t_s: f64,
    /// Shuttle, on the rail.
    pub x_m: f64,
    /// In the rail's frame, as an encoder on the rail sees it.
    pub v_mps: f64,
    /// In the ground's frame.
    pub ground_v_mps: f64,
    /// Kinematic, in the ground's frame.
    pub a_mps2: f64,
    /// Along the rail at the shuttle: kinematic acceleration plus g sin θ.
    pub specific_force_mps2: f64,
    /// Pull of the cords at the shuttle.
    pub cord_pull_n: f64,
    /// Tension of the cords at their anchor.
    pub anchor_tension_n: f64,
    /// Between shuttle and payload; zero once it has left.
    pub contact_n: f64,
}

/// Speed and place at which the payload left.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Separation {
    pub t_s: f64,
    pub x_m: f64,
    /// In the ground's frame: the launch speed.
    pub launch_speed_mps: f64,
    pub airspeed_mps: f64,
}

/// What one launch comes to.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Answers {
    /// None where the payload never left the shuttle.
    pub separation: Option<Separation>,
    /// Greatest kinematic acceleration while the payload is on, ground's frame, unfiltered.
    pub peak_kinematic_mps2: f64,
    /// Greatest specific force along the rail at the payload, unfiltered.
    pub peak_specific_mps2: f64,
    pub peak_x_m: f64,
    /// Greatest deceleration of the shuttle after separation, as a positive number.
    pub arrest_mps2: f64,
    /// From brake contact to standstill; none where there was no contact or no standstill.
    pub stopping_distance_m: Option<f64>,
    /// The shuttle came to the end of the rail moving.
    pub at_end_stop: bool,
}

/// A whole launch.
#[derive(Debug, Clone)]
pub struct LaunchRun {
    /// Course at a fixed spacing and at every event; all columns have the same length.
    pub samples: Vec<Sample>,
    pub events: Vec<Event>,
    pub answers: Answers,
    /// At separation, or at the end where there was none.
    pub energy_at_separation: EnergySplit,
    pub energy_at_end: EnergySplit,
    pub cost: Cost,
    setup: LaunchSetup,
    layout: Layout,
    segments: Vec<Segment<ROOM>>,
    /// Of each cord set with mass: tension at its anchor against time.
    anchors: Vec<Vec<(f64, f64)>>,
}

/// Computes a launch with its course and energy.
///
/// # Errors
/// Impossible numbers, a pull that does not move the shuttle, an integration that can't meet its tolerance.
pub fn simulate(setup: &LaunchSetup) -> Result<LaunchRun, ModelError> {
    setup.check()?;
    let layout = Layout::of(setup, true);
    let mut march = March::<ROOM>::released(setup, layout, Keep::Course)?;
    let first_cords = march.system.phase.cords;
    march.run()?;
    let at_separation = march
        .events
        .iter()
        .position(|event| event.kind == EventKind::Separation)
        .map_or(march.events.len(), |index| index + 1);
    let energy = |n: usize| split(setup, &layout, &march.events[..n], &march.event_states[..n], &first_cords);
    let mut run = LaunchRun {
        samples: Vec::new(),
        answers: answers(setup, &march.events, march.peak, march.arrest),
        energy_at_separation: energy(at_separation),
        energy_at_end: energy(march.events.len()),
        events: march.events,
        cost: march.cost,
        setup: setup.clone(),
        layout,
        segments: march.segments.unwrap_or_default(),
        anchors: Vec::new(),
    };
    run.sharpen_peak();
    run.follow_anchors();
    run.fill_samples();
    Ok(run)
}

/// Computes a launch's answers up to separation only: the cheap way, for thousands.
///
/// # Errors
/// As [`simulate`].
pub fn launch_answers(setup: &LaunchSetup) -> Result<Answers, ModelError> {
    quick(setup, false)
}

/// Computes a launch's answers, run-out included, without its course.
///
/// # Errors
/// As [`simulate`].
pub fn answers_to_rest(setup: &LaunchSetup) -> Result<Answers, ModelError> {
    quick(setup, true)
}

/// Computes where a launch's energy has gone at separation, without its course.
///
/// # Errors
/// As [`simulate`].
pub fn energy_at_separation(setup: &LaunchSetup) -> Result<EnergySplit, ModelError> {
    setup.check()?;
    let layout = Layout::of(setup, true);
    match layout.n_used {
        0..=16 => energy_in::<16>(setup, layout),
        _ => energy_in::<ROOM>(setup, layout),
    }
}

fn energy_in<const N: usize>(setup: &LaunchSetup, layout: Layout) -> Result<EnergySplit, ModelError> {
    let mut march = March::<N>::released(setup, layout, Keep::EventStates)?;
    let first_cords = march.system.phase.cords;
    march.run_to_separation()?;
    Ok(split(setup, &layout, &march.events, &march.event_states, &first_cords))
}

fn quick(setup: &LaunchSetup, to_rest: bool) -> Result<Answers, ModelError> {
    setup.check()?;
    let layout = Layout::of(setup, false);
    match layout.n_used {
        0..=4 => quick_in::<4>(setup, layout, to_rest),
        5..=8 => quick_in::<8>(setup, layout, to_rest),
        _ => quick_in::<ROOM>(setup, layout, to_rest),
    }
}

fn quick_in<const N: usize>(setup: &LaunchSetup, layout: Layout, to_rest: bool) -> Result<Answers, ModelError> {
    let mut march = March::<N>::released(setup, layout, Keep::Nothing)?;
    if to_rest { march.run() } else { march.run_to_separation() }?;
    Ok(answers(setup, &march.events, march.peak, march.arrest))
}

fn answers(setup: &LaunchSetup, events: &[Event], peak: Peak, arrest: Peak) -> Answers {
    let find = |kind: EventKind| events.iter().find(|event| event.kind == kind);
    let separation = find(EventKind::Separation).map(|event| Separation {
        t_s: event.t_s,
        x_m: event.x_m,
        launch_speed_mps: event.ground_v_mps,
        airspeed_mps: event.ground_v_mps + setup.head_wind_mps,
    });
    // The first standstill in the brake: a shuttle that rolls back from there rests elsewhere.
    let stopping = find(EventKind::BrakeContact).and_then(|contact| {
        let stands = |event: &&Event| matches!(event.kind, EventKind::Rest | EventKind::Reversal);
        events.iter().filter(|event| event.t_s >= contact.t_s).find(stands).map(|stop| (contact, stop))
    });
    Answers {
        separation,
        peak_kinematic_mps2: peak.acceleration_mps2,
        peak_specific_mps2: peak.acceleration_mps2 + setup.gravity_along_mps2(),
        peak_x_m: peak.x_m,
        arrest_mps2: -arrest.acceleration_mps2,
        stopping_distance_m: stopping.map(|(contact, rest)| rest.x_m - contact.x_m),
        at_end_stop: find(EventKind::EndStop).is_some(),
    }
}

impl LaunchRun {
    pub fn event(&self, kind: EventKind) -> Option<&Event> {
        self.events.iter().find(|event| event.kind == kind)
    }

    /// Time of the last event.
    pub fn end_s(&self) -> f64 {
        self.segments.last().map_or(0.0, |segment| segment.to_s)
    }

    /// The launch at a time from release; held at its ends beyond them.
    pub fn at_time(&self, t_s: f64) -> Option<Sample> {
        let t_s = t_s.clamp(0.0, self.end_s());
        let index =
            self.segments.partition_point(|segment| segment.to_s < t_s).min(self.segments.len().checked_sub(1)?);
        self.segments.get(index).map(|segment| self.sample(segment, t_s))
    }

    fn state(segment: &Segment<ROOM>, t_s: f64) -> [f64; ROOM] {
        let dense = &segment.dense;
        let s = match segment.along {
            Along::Time => t_s,
            Along::Component(i) => place_of_time(segment, i, t_s),
        };
        state_of(s, dense.at(s), segment.along).1
    }

    fn sample(&self, segment: &Segment<ROOM>, t_s: f64) -> Sample {
        let y = Self::state(segment, t_s);
        let system = System::new(&self.setup, segment.phase.clone(), self.layout);
        let forces = system.forces_at(&y);
        let motion = system.motion(&y);
        let a_mps2 = forces.ground_acceleration_mps2();
        Sample {
            t_s,
            x_m: motion.x_m,
            v_mps: motion.v_mps,
            ground_v_mps: motion.v_mps + motion.rail_v_mps,
            a_mps2,
            specific_force_mps2: a_mps2 + self.setup.gravity_along_mps2(),
            cord_pull_n: forces.cords_n - self.cord_inertia_n(&system, forces.acceleration_mps2),
            anchor_tension_n: self.anchor_tension_n(&system, motion.x_m, forces.acceleration_mps2, t_s),
            contact_n: if segment.phase.payload_on { system.contact_n(&y, a_mps2) } else { 0.0 },
        }
    }

    /// Part of the even cords' pull that moves the cords themselves.
    fn cord_inertia_n(&self, system: &System, a_mps2: f64) -> f64 {
        let even = self.setup.cords.iter().zip(system.phase.cords);
        let even = even.filter(|(_, phase)| matches!(phase, CordPhase::Even { .. }));
        even.map(|(set, _)| set.moving_mass_kg() * a_mps2).sum()
    }

    /// Tension at the anchors: of cords that were released, as the strain waves in them make it (`anchor.rs`); of cords
    /// without mass or tightened again, the elastic tension and a sixth of their inertia (the third at the shuttle taken
    /// from the half of their momentum).
    fn anchor_tension_n(&self, system: &System, x_m: f64, a_mps2: f64, t_s: f64) -> f64 {
        let mut sum_n = 0.0;
        for (s, set) in self.setup.cords.iter().enumerate() {
            let waves = self.anchors.get(s).filter(|table| table.last().is_some_and(|last| t_s <= last.0));
            sum_n += match (waves, system.phase.cords[s]) {
                (Some(table), _) => interpolated(table, t_s),
                (None, CordPhase::Even { branch, side }) => {
                    let inertia_n = set.count * set.mass_kg * set.travel_ratio * a_mps2 / 6.0;
                    set.pull_n(branch, set.elongation_on(side, x_m)) / set.travel_ratio + side.sign() * inertia_n
                }
                (None, CordPhase::Wave { .. } | CordPhase::Slack) => 0.0,
            };
        }
        sum_n
    }

    /// Computes the anchors' tensions from the shuttle's course.
    fn follow_anchors(&mut self) {
        let mut course = Vec::with_capacity((self.end_s() / PLACE_S) as usize + 2 * self.segments.len());
        for segment in &self.segments {
            let n = ((segment.to_s - segment.from_s) / PLACE_S).ceil().max(1.0) as u32;
            course.extend((0..=n).map(|i| {
                let t_s = segment.from_s + (segment.to_s - segment.from_s) * f64::from(i) / f64::from(n);
                let y = Self::state(segment, t_s);
                Place { t_s, x_m: y[0], v_mps: y[1] }
            }));
        }
        let held = |set: &CordSet| set.elongation(self.setup.start_x_m);
        let moves = |set: &CordSet| set.mass_kg > 0.0 && held(set) > 0.0;
        let anchor = |set| if moves(set) { anchor_course(set, held(set), &course) } else { Vec::new() };
        self.anchors = self.setup.cords.iter().map(anchor).collect();
    }

    /// The peak lies at a step's end or inside a step next to it: finds it there by golden section on the course.
    fn sharpen_peak(&mut self) {
        let separated_s = self.answers.separation.map_or(f64::INFINITY, |separation| separation.t_s);
        let mut best = self.answers.peak_kinematic_mps2;
        let mut best_x_m = self.answers.peak_x_m;
        for segment in self.segments.iter().filter(|segment| segment.to_s <= separated_s + 1e-12) {
            let a = |t_s: f64| self.sample(segment, t_s).a_mps2;
            let middle = 0.5 * (segment.from_s + segment.to_s);
            if a(middle) + 1e-12 * best.abs() < a(segment.from_s).max(a(segment.to_s)).min(best) {
                continue;
            }
            let t_s = greatest(a, segment.from_s, segment.to_s);
            let there = self.sample(segment, t_s);
            if there.a_mps2 > best {
                (best, best_x_m) = (there.a_mps2, there.x_m);
            }
        }
        self.answers.peak_kinematic_mps2 = best;
        self.answers.peak_specific_mps2 = best + self.setup.gravity_along_mps2();
        self.answers.peak_x_m = best_x_m;
    }

    fn fill_samples(&mut self) {
        let mut samples = Vec::with_capacity((self.end_s() / SAMPLE_S) as usize + 2 * self.segments.len());
        let mut next = 0_u32;
        for segment in &self.segments {
            samples.push(self.sample(segment, segment.from_s));
            while f64::from(next) * SAMPLE_S < segment.to_s {
                let t_s = f64::from(next) * SAMPLE_S;
                if t_s > segment.from_s {
                    samples.push(self.sample(segment, t_s));
                }
                next += 1;
            }
            samples.push(self.sample(segment, segment.to_s));
        }
        self.samples = samples;
    }
}

/// Straight between the entries of a table, held at its end.
fn interpolated(table: &[(f64, f64)], at: f64) -> f64 {
    let index = table.partition_point(|entry| entry.0 < at);
    match (table.get(index.wrapping_sub(1)), table.get(index)) {
        (Some(before), Some(after)) => before.1 + (after.1 - before.1) * (at - before.0) / (after.0 - before.0),
        (None, Some(only)) | (Some(only), None) => only.1,
        (None, None) => 0.0,
    }
}

/// Where a segment that runs in component `i` is at a time: Newton on its own polynomial, kept inside by bisection.
fn place_of_time(segment: &Segment<ROOM>, i: usize, t_s: f64) -> f64 {
    let dense = &segment.dense;
    let (mut a, mut b) = (dense.start, dense.end());
    if t_s >= segment.to_s {
        return b;
    }
    let mut s = a + (b - a) * (t_s - segment.from_s) / (segment.to_s - segment.from_s);
    for _ in 0..60 {
        let error_s = dense.at(s)[i] - t_s;
        if error_s > 0.0 {
            b = s
        } else {
            a = s
        };
        let nudge = 1e-6 * dense.size;
        let slope = (dense.at(s + nudge)[i] - dense.at(s - nudge)[i]) / (2.0 * nudge);
        let newton = s - error_s / slope;
        let inside = (newton - a) * (newton - b) < 0.0;
        let next = if inside { newton } else { 0.5 * (a + b) };
        if (next - s).abs() <= 1e-15 * dense.size.abs() {
            return next;
        }
        s = next;
    }
    s
}

/// Golden section (J. Kiefer, Proc. Amer. Math. Soc. 4 (1953) 502-506) for the place of the greatest value.
fn greatest(f: impl Fn(f64) -> f64, from: f64, to: f64) -> f64 {
    const PART: f64 = 0.618_033_988_749_894_9;
    let (mut a, mut b) = (from, to);
    let (mut c, mut d) = (b - PART * (b - a), a + PART * (b - a));
    let (mut fc, mut fd) = (f(c), f(d));
    while (b - a).abs() > 1e-9 * (to - from).abs() {
        if fc > fd {
            (b, d, fd) = (d, c, fc);
            c = b - PART * (b - a);
            fc = f(c);
        } else {
            (a, c, fc) = (c, d, fd);
            d = a + PART * (b - a);
            fd = f(d);
        }
    }
    0.5 * (a + b)
}
