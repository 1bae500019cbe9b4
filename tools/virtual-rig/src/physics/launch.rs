//! Carries the rig through everything fast, from the opening (or a slip) of the hook to rest: classical Runge-Kutta
//! steps of fixed size (Kutta 1901), with separation, sticking and breaking loose located inside a step by bisection.

use super::cord::Memory;
use super::course::{Course, Happening, Instant, Split};
use super::gas::GasState;
use super::stroke::{Energy, Forces, Grip, LineMode, Mode, System, at, gas_at};
use super::trajectory::Row;

/// Step of the integration that scenarios use, s.
pub const STEP_S: f64 = 40e-6;
/// Longest time followed.
const LONGEST_S: f64 = 4.0;
/// The run ends when the shuttle has stuck this long after it first moved.
const REST_S: f64 = 0.5;
const N_BISECTIONS: u32 = 40;

/// How the rig stands before anything fast happens, and after it.
#[derive(Debug, Clone)]
pub struct Held {
    pub t_s: f64,
    pub x_m: f64,
    pub v_mps: f64,
    pub line_n: f64,
    /// One per cord group.
    pub memories: Vec<Memory>,
    pub gas: GasState,
}

/// What sets the rig moving.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Start {
    HookOpens,
    /// The hook lets the line's end go forward by `slip_m`, then holds again.
    HookSlips {
        line_end_x_m: f64,
    },
}

/// Scratch of the Runge-Kutta step.
struct Scratch {
    slopes: [Vec<f64>; 4],
    stage: Vec<f64>,
}

struct Runner {
    system: System,
    scratch: Scratch,
    t_s: f64,
    y: Vec<f64>,
    next: Vec<f64>,
    mode: Mode,
    /// What went away with broken cords.
    gone: Energy,
    cord_breaks_x_m: Option<f64>,
    stuck_since_s: Option<f64>,
    rows: Vec<Row>,
    instants: Vec<Instant>,
    before: Energy,
    at_separation: Option<Split>,
}

/// Runs the rig from `held` to rest.
pub fn launch(system: System, held: &Held, start: Start) -> Course {
    let mut runner = Runner::new(system, held, start);
    let until_s = held.t_s + LONGEST_S;
    while runner.t_s < until_s && !runner.at_rest() {
        runner.step();
    }
    runner.finish()
}

impl Runner {
    fn new(system: System, held: &Held, start: Start) -> Self {
        let y = system.held(held.x_m, held.v_mps, &held.memories, &held.gas);
        let n = y.len();
        let zeros = || vec![0.0; n];
        let (line, what) = match start {
            Start::HookOpens => (LineMode::Opening { t_s: held.t_s, hold_n: held.line_n }, Happening::HookOpens),
            Start::HookSlips { line_end_x_m } => (LineMode::Holding { end_x_m: line_end_x_m }, Happening::HookSlips),
        };
        let grip = if held.v_mps == 0.0 { Grip::Stuck } else { Grip::Sliding(held.v_mps.signum()) };
        let mut runner = Self {
            before: system.energy(&y),
            mode: Mode { grip, joined: system.launcher.payload.is_some(), line },
            cord_breaks_x_m: system.launcher.cord_breaks_x_m,
            system,
            scratch: Scratch { slopes: [zeros(), zeros(), zeros(), zeros()], stage: zeros() },
            t_s: held.t_s,
            next: zeros(),
            y,
            gone: Energy::default(),
            stuck_since_s: None,
            rows: Vec::new(),
            instants: Vec::new(),
            at_separation: None,
        };
        let forces = runner.forces_here();
        runner.record(&forces);
        runner.note(what);
        runner
    }

    fn at_rest(&self) -> bool {
        self.stuck_since_s.is_some_and(|since_s| self.t_s - since_s > REST_S)
    }

    fn forces_here(&mut self) -> Forces {
        self.system.derivative(self.t_s, &self.y, &self.mode, &mut self.scratch.stage)
    }

    /// One step, cut short at the first event inside it.
    fn step(&mut self) {
        let step_s = self.system.step_s;
        self.advance(step_s);
        let mut forces = self.forces_next(step_s);
        if self.event_in_next(&forces) {
            let (mut early_s, mut late_s) = (0.0, step_s);
            for _ in 0..N_BISECTIONS {
                let middle_s = 0.5 * (early_s + late_s);
                self.advance(middle_s);
                let forces = self.forces_next(middle_s);
                if self.event_in_next(&forces) { late_s = middle_s } else { early_s = middle_s }
            }
            self.advance(late_s);
            self.accept(late_s);
            self.change_mode();
            forces = self.forces_here();
        } else {
            self.accept(step_s);
        }
        self.record(&forces);
        self.watch_marks(&forces);
    }

    fn accept(&mut self, step_s: f64) {
        self.t_s += step_s;
        std::mem::swap(&mut self.y, &mut self.next);
    }

    /// Runge-Kutta step of `step_s` from `y` into `next`.
    fn advance(&mut self, step_s: f64) {
        let Scratch { slopes, stage } = &mut self.scratch;
        for (idx, part) in [0.0, 0.5, 0.5, 1.0].into_iter().enumerate() {
            let (done, rest) = slopes.split_at_mut(idx);
            match done.last() {
                None => stage.copy_from_slice(&self.y),
                Some(slope) => {
                    for ((value, start), slope) in stage.iter_mut().zip(&self.y).zip(slope) {
                        *value = start + part * step_s * slope;
                    }
                }
            }
            if let Some(slope) = rest.first_mut() {
                self.system.derivative(self.t_s + part * step_s, stage, &self.mode, slope);
            }
        }
        let [k1, k2, k3, k4] = slopes;
        for (idx, value) in self.next.iter_mut().enumerate() {
            *value = self.y[idx] + step_s / 6.0 * (k1[idx] + 2.0 * (k2[idx] + k3[idx]) + k4[idx]);
        }
    }

    fn forces_next(&mut self, step_s: f64) -> Forces {
        self.system.derivative(self.t_s + step_s, &self.next, &self.mode, &mut self.scratch.stage)
    }

    fn event_in_next(&self, forces: &Forces) -> bool {
        self.grip_ends(&self.next, forces) || self.parting(&self.next, forces).is_some() || self.cord_breaks(&self.next)
    }

    fn grip_ends(&self, y: &[f64], forces: &Forces) -> bool {
        match self.mode.grip {
            Grip::Sliding(direction) => direction * (y[at::SHUTTLE_V] - y[at::RAIL_V]) < 0.0,
            Grip::Stuck => forces.holding_n.abs() > self.static_friction_n(y),
        }
    }

    /// How the payload parts from the shuttle at `y`, if it does.
    fn parting(&self, y: &[f64], forces: &Forces) -> Option<Happening> {
        let payload = self.system.launcher.payload.filter(|_| self.mode.joined)?;
        let x_m = y[at::SHUTTLE_X] - y[at::RAIL_X];
        if payload.comes_off_x_m.is_some_and(|off_x_m| x_m >= off_x_m) {
            return Some(Happening::PayloadOff);
        }
        (x_m > payload.latch_opens_x_m && forces.contact_n < 0.0).then_some(Happening::Separation)
    }

    fn cord_breaks(&self, y: &[f64]) -> bool {
        self.cord_breaks_x_m.is_some_and(|breaks_x_m| y[at::SHUTTLE_X] - y[at::RAIL_X] >= breaks_x_m)
    }

    fn static_friction_n(&self, y: &[f64]) -> f64 {
        let launcher = &self.system.launcher;
        launcher.shuttle.friction_static_n + launcher.brake.pad_force_n(y[at::SHUTTLE_X] - y[at::RAIL_X])
    }

    /// Applies the event that the accepted state has just passed.
    fn change_mode(&mut self) {
        let forces = self.forces_here();
        if self.cord_breaks(&self.y) {
            self.break_cord();
        } else if let Some(what) = self.parting(&self.y, &forces) {
            self.mode.joined = false;
            self.at_separation = Some(Split::of(&self.system, &self.y, &self.gone));
            self.note(what);
        } else if let Grip::Sliding(_) = self.mode.grip {
            self.halt();
        } else {
            self.mode.grip = Grip::Sliding(-forces.holding_n.signum());
            self.note_once(Happening::FirstMotion);
        }
    }

    /// One cord of the first group goes, with all its energy.
    fn break_cord(&mut self) {
        self.cord_breaks_x_m = None;
        let whole = self.system.energy(&self.y);
        if let Some(group) = self.system.launcher.cords.first_mut() {
            group.count -= 1.0;
        }
        let rest = self.system.energy(&self.y);
        self.gone.cord_kinetic_j += whole.cord_kinetic_j - rest.cord_kinetic_j;
        self.gone.cord_elastic_j += whole.cord_elastic_j - rest.cord_elastic_j;
        self.gone.gravity_j += whole.gravity_j - rest.gravity_j;
        self.note(Happening::CordBreaks);
    }

    /// The shuttle has come to a stop on the rail: it sticks, or turns where static friction cannot hold it.
    fn halt(&mut self) {
        self.y[at::SHUTTLE_V] = self.y[at::RAIL_V];
        if self.mode.joined {
            self.y[at::PAYLOAD_V] = self.y[at::SHUTTLE_V];
        }
        self.mode.grip = Grip::Stuck;
        let holding_n = self.forces_here().holding_n;
        if holding_n.abs() > self.static_friction_n(&self.y) {
            self.mode.grip = Grip::Sliding(-holding_n.signum());
            self.note_once(Happening::FirstMotion);
        }
    }

    fn row(&self, forces: &Forces) -> Row {
        let y = &self.y;
        let gas = gas_at(y);
        let x_m = y[at::SHUTTLE_X] - y[at::RAIL_X];
        Row {
            t_s: self.t_s,
            x_m,
            v_mps: y[at::SHUTTLE_V] - y[at::RAIL_V],
            shuttle_a_ground_mps2: forces.shuttle_a_mps2,
            line_n: forces.line_n,
            cords_n: forces.cords_n,
            anchor_n: forces.anchor_n,
            contact_n: forces.contact_n,
            payload_x_m: y[at::PAYLOAD_X] - y[at::RAIL_X],
            payload_v_ground_mps: y[at::PAYLOAD_V],
            payload_a_ground_mps2: forces.payload_a_mps2,
            rail_x_m: y[at::RAIL_X],
            rail_v_mps: y[at::RAIL_V],
            reservoir_pa: self.system.launcher.gas.map_or(0.0, |drive| drive.reservoir_pa(&gas)),
            cylinder_pa: self.system.launcher.gas.map_or(0.0, |drive| drive.cylinder_pa(&gas, x_m)),
        }
    }

    fn record(&mut self, forces: &Forces) {
        let row = self.row(forces);
        self.rows.push(row);
    }

    fn note(&mut self, what: Happening) {
        let forces = self.forces_here();
        self.instants.push(Instant { t_s: self.t_s, what, row: self.row(&forces) });
    }

    fn seen(&self, what: Happening) -> bool {
        self.instants.iter().any(|instant| instant.what == what)
    }

    fn note_once(&mut self, what: Happening) {
        if !self.seen(what) {
            self.note(what);
        }
    }

    fn watch_marks(&mut self, forces: &Forces) {
        let x_m = self.y[at::SHUTTLE_X] - self.y[at::RAIL_X];
        let launcher = &self.system.launcher;
        let (brake_x_m, stop_x_m) = (launcher.brake.x_m, launcher.brake.stop_x_m);
        let has_cords = !launcher.cords.is_empty();
        if has_cords && forces.cords_n <= 0.0 && x_m > 0.5 * launcher.zero_mark_x_m {
            self.note_once(Happening::CordsSlack);
        }
        if x_m >= brake_x_m {
            self.note_once(Happening::BrakeReached);
        }
        if x_m >= stop_x_m {
            self.note_once(Happening::StopReached);
        }
        let moved = self.seen(Happening::FirstMotion);
        match (moved && self.mode.grip == Grip::Stuck, self.stuck_since_s) {
            (true, None) => self.stuck_since_s = Some(self.t_s),
            (false, Some(_)) => self.stuck_since_s = None,
            _ => {}
        }
    }

    fn finish(mut self) -> Course {
        if let Some(rest_t_s) = self.stuck_since_s {
            let row = self.rows.iter().find(|row| row.t_s >= rest_t_s).copied().unwrap_or_default();
            self.instants.push(Instant { t_s: rest_t_s, what: Happening::Rest, row });
        }
        let forces = self.forces_here();
        let last = self.row(&forces);
        let at_end = Split::of(&self.system, &self.y, &self.gone);
        let stored_j = self.before.cord_elastic_j.max(self.y[at::GAS]).max(f64::MIN_POSITIVE);
        let checks = [self.at_separation, Some(at_end)];
        let energy_error =
            checks.iter().flatten().map(|split| split.error_j(&self.before) / stored_j).fold(0.0, f64::max);
        let gas = gas_at(&self.y);
        Course {
            after: Held {
                t_s: self.t_s,
                x_m: last.x_m,
                v_mps: if self.stuck_since_s.is_some() { 0.0 } else { last.v_mps },
                line_n: last.line_n,
                memories: self.system.mean_memories(&self.y),
                gas,
            },
            rows: self.rows,
            instants: self.instants,
            before: self.before,
            at_separation: self.at_separation,
            at_end,
            energy_error,
        }
    }
}
