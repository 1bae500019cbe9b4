//! Marches a launch from release to rest: chooses steps, lands them on targets, finds separation, changes phases.
//!
//! A step runs in time, or in x, strain or speed when it has to end at a given value of that quantity: the same equations
//! divided by its rate (M. Hénon, Physica D 5 (1982) 412-414), so that landing costs no search. Only the instant at which
//! the contact force ends is searched for, on the step's own polynomial, and then stepped to.

use super::along::{Along, divided, falling_root, rates_along, state_at_end, state_of, time_slope};
use super::cord::CordPhase;
use super::error::ModelError;
use super::event::{Cost, Event, EventKind, Peak, Segment};
use super::gas::GasSource;
use super::integrate::{Dense, Order, Step, Tolerance};
use super::phases::first_phase;
use super::setup::LaunchSetup;
use super::system::{Layout, System};
use super::targets::{Target, targets};

const MAX_STEPS: u32 = 20_000;
/// From this tolerance on the method of lower order is the cheaper one.
const COARSE: f64 = 1e-7;
/// Longest wait for a gas source to move the shuttle.
const MAX_HELD_S: f64 = 5.0;
const MAX_HELD_STEP_S: f64 = 0.01;
/// Longest event followed.
const MAX_TIME_S: f64 = 60.0;

#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) enum Goal {
    None,
    Place(usize),
    WaveOver(usize),
    Strain,
    Time,
    Rest,
}

/// What of a march is kept beside its answers.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Keep {
    Nothing,
    EventStates,
    /// States at the events and the solution itself.
    Course,
}

#[derive(Debug, Clone)]
pub struct March<'a, const N: usize> {
    pub system: System<'a>,
    pub t_s: f64,
    pub y: [f64; N],
    pub events: Vec<Event>,
    /// States at the events, for the energy split.
    pub event_states: Vec<[f64; N]>,
    pub segments: Option<Vec<Segment<N>>>,
    keep: Keep,
    pub cost: Cost,
    /// Greatest acceleration in the ground's frame while the payload is on.
    pub peak: Peak,
    /// Greatest deceleration of the shuttle after it.
    pub arrest: Peak,
    /// Time and acceleration at the last two ends of steps in this phase, the latest last.
    recent: [Option<(f64, f64)>; 2],
    pub(super) targets: Vec<Target>,
    /// Next target ahead.
    pub(super) cursor: isize,
    order: Order,
    tolerance: Tolerance<N>,
    time_tolerance: f64,
    pub(super) size_s: f64,
    pub(super) slope: Option<[f64; N]>,
    pub(super) ended: bool,
    pub(super) reversals: u32,
}

impl<'a, const N: usize> March<'a, N> {
    /// At the instant after release.
    pub fn released(setup: &'a LaunchSetup, layout: Layout, keep: Keep) -> Result<Self, ModelError> {
        let system = System::new(setup, first_phase(setup), layout);
        let mut y = [0.0; N];
        y[0] = setup.start_x_m;
        for (s, set) in setup.cords.iter().enumerate() {
            if let Some(i) = layout.wave[s] {
                y[i] = set.elongation(setup.start_x_m);
            }
        }
        for (g, source) in setup.gas.iter().enumerate() {
            if let Some(i) = layout.gas[g] {
                let state = source.at_release();
                (y[i], y[i + 1]) = (state.vessel_part, state.cylinder_pa);
            }
        }
        if let (Some(i), Some(recoil)) = (layout.recoil, setup.recoil) {
            let weight_n = system.carried_mass_kg() * setup.gravity_along_mps2();
            y[i] = if recoil.stiffness_n_per_m > 0.0 { -weight_n / recoil.stiffness_n_per_m } else { 0.0 };
        }
        let targets = targets(setup);
        let cursor = targets.iter().position(|target| target.x_m > setup.start_x_m).unwrap_or(targets.len());
        let nowhere = Peak { acceleration_mps2: f64::NEG_INFINITY, t_s: 0.0, x_m: setup.start_x_m };
        let mut march = Self {
            order: order(setup),
            tolerance: tolerance(&system),
            time_tolerance: setup.relative_tolerance * 1e-2,
            system,
            t_s: 0.0,
            y,
            events: Vec::with_capacity(12),
            event_states: Vec::new(),
            segments: (keep == Keep::Course).then(Vec::new),
            keep,
            cost: Cost::default(),
            peak: nowhere,
            arrest: Peak { acceleration_mps2: 0.0, ..nowhere },
            recent: [None; 2],
            targets,
            cursor: cursor as isize,
            size_s: 0.0,
            slope: None,
            ended: false,
            reversals: 0,
        };
        march.start()?;
        Ok(march)
    }

    fn start(&mut self) -> Result<(), ModelError> {
        self.note(EventKind::Release);
        if self.excess_resistance_n(&self.y) < 0.0 {
            self.set_off();
            return Ok(());
        }
        if self.system.layout.gas.iter().all(Option::is_none) {
            return Err(self.cannot_move());
        }
        self.system.phase.held = true;
        self.size_s = 1e-4;
        Ok(())
    }

    fn cannot_move(&self) -> ModelError {
        let forces = self.system.forces_at(&self.y);
        let pull_n = forces.cords_n + forces.tables_n + forces.gas_n;
        let resistance_n = pull_n + self.excess_resistance_n(&self.y);
        ModelError::CannotMove { x_m: self.y[0], pull_n, resistance_n }
    }

    /// What keeps the shuttle standing, less what drives it.
    fn excess_resistance_n(&self, y: &[f64; N]) -> f64 {
        let (drive_n, resistance_n) = self.drive_and_resistance(y);
        resistance_n - drive_n
    }

    pub(super) fn set_off(&mut self) {
        self.slope = None;
        let slope = self.slope();
        self.size_s = 0.02 / slope[1].max(1e-3).sqrt();
        self.watch_peak(self.ground_acceleration(&slope));
        self.separate_if_free();
    }

    /// Force along the rail without what opposes motion, and what opposes it at standstill.
    pub(super) fn drive_and_resistance(&self, y: &[f64; N]) -> (f64, f64) {
        let forces = self.system.forces_at(y);
        let moving_n = forces.friction_n + forces.load_friction_n + forces.along_x_n + forces.brake_n;
        let setup = self.system.setup;
        let drive_n = forces.cords_n + forces.tables_n + forces.gas_n + forces.thrust_n
            - forces.payload_drag_n
            - forces.shuttle_drag_n
            - self.system.carried_mass_kg() * setup.gravity_along_mps2();
        (drive_n, moving_n.max(setup.losses.breakaway_n))
    }

    /// Runs to rest or to the end stop.
    pub fn run(&mut self) -> Result<(), ModelError> {
        while !self.ended {
            self.step()?;
        }
        Ok(())
    }

    /// Runs until the payload has left, or the event is over.
    pub fn run_to_separation(&mut self) -> Result<(), ModelError> {
        while !self.ended && self.system.phase.payload_on {
            self.step()?;
        }
        Ok(())
    }

    /// Runs until the shuttle has reached a place, or the event is over.
    pub fn run_to_place(&mut self, x_m: f64) -> Result<(), ModelError> {
        while !self.ended && self.y[0] < x_m {
            self.step()?;
        }
        Ok(())
    }

    fn step(&mut self) -> Result<(), ModelError> {
        if self.cost.steps + self.cost.rejected > MAX_STEPS || self.size_s < 1e-12 {
            return Err(ModelError::StepTooSmall { t_s: self.t_s, x_m: self.y[0] });
        }
        if self.system.phase.held && self.t_s > MAX_HELD_S {
            return Err(self.cannot_move());
        }
        if self.t_s > MAX_TIME_S {
            self.ended = true;
            return Ok(());
        }
        let (along, size, goal) = self.next_step();
        let step = self.attempt(along, size);
        let dt_s = self.time_at_end(&step, along) - self.t_s;
        if step.error > 1.0 || dt_s <= 0.0 || !dt_s.is_finite() {
            self.cost.rejected += 1;
            let spent_s = if dt_s > 0.0 && dt_s.is_finite() { dt_s } else { self.size_s };
            self.size_s = spent_s.min(self.size_s) * self.order.next_size(step.error).min(0.7);
            return Ok(());
        }
        if self.crosses(&step, along, goal) {
            self.cost.rejected += 1;
            self.size_s = 0.5 * dt_s.min(self.size_s);
            return Ok(());
        }
        self.accept(step, along, dt_s, goal);
        Ok(())
    }

    /// What the next step runs in, how far, and what it is to reach.
    fn next_step(&mut self) -> (Along, f64, Goal) {
        let slope = self.slope();
        let (v, a, direction) = (self.y[1], slope[1], self.system.phase.direction);
        let mut nearest = (self.size_s, Along::Time, self.size_s, Goal::None);
        let mut propose = |tau_s: f64, along: Along, size: f64, goal: Goal, steady: bool| {
            if tau_s <= nearest.0 * 1.1 {
                nearest = if steady {
                    (tau_s, along, size, goal)
                } else {
                    (0.6 * tau_s, Along::Time, 0.6 * tau_s, Goal::None)
                };
            }
        };
        if let (Some((index, target)), false) = (self.target_ahead(), self.system.phase.held) {
            let (distance, speed) = ((target.x_m - self.y[0]) * direction, v * direction);
            let arrival = speed * speed + 2.0 * a * direction * distance;
            if arrival > 0.0 {
                let tau_s = 2.0 * distance / (speed + arrival.sqrt());
                let steady = speed * speed > 0.2 * arrival && arrival > 0.1 * speed * speed;
                propose(tau_s, Along::Component(0), target.x_m - self.y[0], Goal::Place(index), steady);
            }
        }
        for (s, set) in self.system.setup.cords.iter().enumerate() {
            if let (CordPhase::Wave { until_s, .. }, Some(i)) = (self.system.phase.cords[s], self.system.layout.wave[s])
            {
                let (tau_s, rate) = (until_s - self.t_s, slope[i]);
                propose(tau_s, Along::Time, tau_s, Goal::WaveOver(s), true);
                let below = set.unloading.knots().iter().rev().find(|knot| **knot < self.y[i] - 1e-12);
                if let (Some(knot), true) = (below, rate < 0.0) {
                    let change = knot - self.y[i];
                    propose(change / rate, Along::Component(i), change, Goal::Strain, true);
                }
            }
        }
        for source in &self.system.setup.gas {
            let tau_s = source.opening_s() - self.t_s;
            if tau_s > 1e-12 {
                propose(tau_s, Along::Time, tau_s, Goal::Time, true);
            }
        }
        if a * direction < 0.0 && v * direction > 0.0 {
            propose(-v / a, Along::Component(1), -v, Goal::Rest, true);
        }
        let (tau_s, along, size, goal) = nearest;
        if goal == Goal::None || tau_s <= self.size_s * 1.1 {
            (along, size, goal)
        } else {
            (Along::Time, 0.5 * tau_s, Goal::None)
        }
    }

    pub(super) fn slope(&mut self) -> [f64; N] {
        match self.slope {
            Some(slope) => slope,
            None => {
                self.cost.evaluations += 1;
                let slope = self.system.rates(self.t_s, &self.y);
                self.slope = Some(slope);
                slope
            }
        }
    }

    fn target_ahead(&self) -> Option<(usize, Target)> {
        let step = if self.system.phase.direction > 0.0 { 1 } else { -1 };
        let mut index = self.cursor;
        while let Some(target) = usize::try_from(index).ok().and_then(|i| self.targets.get(i)) {
            if target.mark.matters(&self.system.phase) {
                return Some((index as usize, *target));
            }
            index += step;
        }
        None
    }

    fn attempt(&mut self, along: Along, size: f64) -> Step<N> {
        let slope = self.slope();
        self.cost.evaluations += self.order.evaluations(self.tolerance.n_felt);
        let system = &self.system;
        match along {
            Along::Time => {
                Step::attempt(self.order, (self.t_s, self.y), slope, size, &self.tolerance, &mut |t_s, y: &[f64; N]| {
                    system.rates(t_s, y)
                })
            }
            Along::Component(i) => {
                let mut tolerance = self.tolerance;
                tolerance.absolute[i] = self.time_tolerance;
                let mut y = self.y;
                y[i] = self.t_s;
                let mut rates = |s: f64, y: &[f64; N]| rates_along(system, i, s, y);
                Step::attempt(self.order, (self.y[i], y), divided(slope, i), size, &tolerance, &mut rates)
            }
        }
    }

    fn time_at_end(&self, step: &Step<N>, along: Along) -> f64 {
        match along {
            Along::Time => step.end(),
            Along::Component(i) => step.to[i],
        }
    }

    /// Whether a step went over something it should have stopped at.
    fn crosses(&self, step: &Step<N>, along: Along, goal: Goal) -> bool {
        const SLIP: f64 = 1e-13;
        let (t_s, y) = state_at_end(step, along);
        let direction = self.system.phase.direction;
        let past_place = self.target_ahead().is_some_and(|(index, target)| {
            goal != Goal::Place(index) && (y[0] - target.x_m) * direction > SLIP * target.x_m.abs().max(1.0)
        });
        let turned = goal != Goal::Rest && y[1] * direction < 0.0;
        let past_wave = self.system.setup.cords.iter().enumerate().any(|(s, set)| {
            let (CordPhase::Wave { until_s, .. }, Some(i)) = (self.system.phase.cords[s], self.system.layout.wave[s])
            else {
                return false;
            };
            let late = goal != Goal::WaveOver(s) && t_s > until_s + SLIP;
            let before = self.y[i] - 1e-12;
            late || set.unloading.knots().iter().any(|knot| *knot < before && y[i] < *knot - 1e-12)
        });
        past_place || turned || past_wave
    }

    fn accept(&mut self, step: Step<N>, along: Along, dt_s: f64, goal: Goal) {
        let grown_s = dt_s * self.order.next_size(step.error);
        let (t_s, y) = state_at_end(&step, along);
        let end_slope = time_slope(step.slope_at_end(), along);
        if self.system.phase.held {
            self.size_s = grown_s.min(MAX_HELD_STEP_S);
            if self.excess_resistance_n(&y) < 0.0 {
                self.step_to_fall(&step, along, |march, _, y| march.excess_resistance_n(y));
                self.begin_motion();
            } else {
                self.take(step, along, t_s, y, end_slope);
            }
            return;
        }
        if self.contact_n(&y, &end_slope) < 0.0 {
            self.step_to_fall(&step, along, |march, t_s, y| march.contact_n(y, &march.system.rates(t_s, y)));
            self.separate();
            return;
        }
        // A step cut short by its goal says little about the size that the next one may have.
        self.size_s = if goal == Goal::None { grown_s } else { grown_s.max(self.size_s) };
        self.take(step, along, t_s, y, end_slope);
        self.reach(goal);
    }

    fn take(&mut self, step: Step<N>, along: Along, t_s: f64, y: [f64; N], slope: [f64; N]) {
        self.cost.steps += 1;
        if self.segments.is_some() {
            let dense = self.dense(&step, along);
            let segment = Segment { along, dense, from_s: self.t_s, to_s: t_s, phase: self.system.phase.clone() };
            self.segments.get_or_insert_default().push(segment);
        }
        self.t_s = t_s;
        self.y = y;
        self.slope = Some(slope);
        self.watch_peak(self.ground_acceleration(&slope));
    }

    pub(super) fn ground_acceleration(&self, slope: &[f64; N]) -> f64 {
        slope[1] + self.system.layout.recoil.map_or(0.0, |i| slope[i + 1])
    }

    pub(super) fn watch_peak(&mut self, acceleration_mps2: f64) {
        let here = Peak { acceleration_mps2, t_s: self.t_s, x_m: self.y[0] };
        let between_mps2 = self.peak_between((self.t_s, acceleration_mps2));
        let pushed = self.system.phase.payload_on || self.system.setup.payload_mass_kg == 0.0;
        if pushed && acceleration_mps2 > self.peak.acceleration_mps2 {
            self.peak = here;
        }
        if let Some(between_mps2) = between_mps2.filter(|peak| pushed && *peak > self.peak.acceleration_mps2) {
            self.peak = Peak { acceleration_mps2: between_mps2, ..self.peak };
        }
        if !self.system.phase.payload_on && acceleration_mps2 < self.arrest.acceleration_mps2 {
            self.arrest = here;
        }
    }

    /// Top of the parabola through the last three ends of steps, where the middle one is the greatest: coarse steps go over
    /// a peak without landing on it. Fine ones are searched afterwards, on their own polynomial.
    fn peak_between(&mut self, (t_s, a): (f64, f64)) -> Option<f64> {
        let recent = self.recent;
        if recent[1].is_none_or(|last| last.0 < t_s) {
            self.recent = [recent[1], Some((t_s, a))];
        }
        let ((first_s, first), (middle_s, middle)) = (recent[0]?, recent[1]?);
        if self.order == Order::Eighth || first > middle || a > middle || t_s <= middle_s {
            return None;
        }
        let (rise, fall) = ((middle - first) / (middle_s - first_s), (a - middle) / (t_s - middle_s));
        let curvature = (fall - rise) / (t_s - first_s);
        let slope = (rise * (t_s - middle_s) + fall * (middle_s - first_s)) / (t_s - first_s);
        (curvature < 0.0).then(|| middle - slope * slope / (4.0 * curvature))
    }

    /// Contact force at a state, or infinity where the payload does not leave by losing contact.
    pub(super) fn contact_n(&self, y: &[f64; N], slope: &[f64; N]) -> f64 {
        if !self.system.phase.payload_on || self.system.setup.uncouple_x_m.is_some() {
            return f64::INFINITY;
        }
        self.system.contact_n(y, self.ground_acceleration(slope))
    }

    /// Finds where in a step a quantity falls below zero, and steps there.
    fn step_to_fall(&mut self, step: &Step<N>, along: Along, quantity: impl Fn(&Self, f64, &[f64; N]) -> f64) {
        self.cost.evaluations += 3;
        let dense = self.dense(step, along);
        let part = falling_root(|part| {
            let s = dense.start + part * dense.size;
            let (t_s, y) = state_of(s, dense.at(s), along);
            quantity(self, t_s, &y)
        });
        if part > 1e-12 {
            let short = self.attempt(along, part * step.size);
            let (t_s, y) = state_at_end(&short, along);
            let slope = time_slope(short.slope_at_end(), along);
            self.take(short, along, t_s, y, slope);
        }
    }

    fn dense(&self, step: &Step<N>, along: Along) -> Dense<N> {
        let system = &self.system;
        match along {
            Along::Time => step.dense(&mut |t_s, y: &[f64; N]| system.rates(t_s, y)),
            Along::Component(i) => step.dense(&mut |s, y: &[f64; N]| rates_along(system, i, s, y)),
        }
    }

    pub(super) fn note(&mut self, kind: EventKind) {
        self.recent = [None; 2];
        let motion = self.system.motion(&self.y);
        let ground_v_mps = motion.v_mps + motion.rail_v_mps;
        self.events.push(Event { kind, t_s: self.t_s, x_m: motion.x_m, v_mps: motion.v_mps, ground_v_mps });
        if self.keep != Keep::Nothing {
            self.event_states.push(self.y);
        }
    }
}

/// Behind a wide valve the pressures are equal within milliseconds or less: an explicit method then takes steps as short.
fn order(setup: &LaunchSetup) -> Order {
    if setup.relative_tolerance < COARSE {
        Order::Eighth
    } else if setup.gas.iter().any(GasSource::has_valve) {
        Order::Stiff
    } else {
        Order::Fifth
    }
}

/// Absolute tolerances: relative tolerance times what is small for each quantity.
fn tolerance<const N: usize>(system: &System) -> Tolerance<N> {
    const SMALL_X_M: f64 = 0.1;
    const SMALL_V_MPS: f64 = 1.0;
    const SMALL_PRESSURE_PA: f64 = 1e4;
    let relative = system.setup.relative_tolerance;
    let mut absolute = [relative * SMALL_V_MPS; N];
    absolute[0] = relative * SMALL_X_M;
    for i in system.layout.wave.iter().flatten() {
        absolute[*i] = relative * SMALL_X_M;
    }
    if let Some(i) = system.layout.recoil {
        absolute[i] = relative * 0.01 * SMALL_X_M;
        absolute[i + 1] = relative * 0.1 * SMALL_V_MPS;
    }
    for i in system.layout.gas.iter().flatten() {
        absolute[i + 1] = relative * SMALL_PRESSURE_PA;
    }
    if let Some(first) = system.layout.accounts {
        let energy_j: f64 = super::energy::available_j(system.setup);
        absolute[first..].fill(relative * energy_j.max(1.0));
    }
    let n_used = system.layout.n_used;
    Tolerance { relative, absolute, n_used, n_felt: system.layout.accounts.unwrap_or(n_used) }
}
