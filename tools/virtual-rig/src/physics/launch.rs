//! Carries the rig from the opening of the hook to rest: classical Runge-Kutta steps of fixed size (Kutta 1901), with
//! separation, sticking and breaking loose located inside a step by bisection.

use super::cord::Memory;
use super::stroke::{Energy, Forces, Grip, Mode, System, at};
use super::trajectory::Row;

/// Step of the integration, s.
pub const STEP_S: f64 = 20e-6;
/// Longest time followed after the hook opens.
const LONGEST_S: f64 = 2.5;
/// The run ends when the shuttle has stuck this long after the stroke.
const REST_S: f64 = 0.5;
const N_BISECTIONS: u32 = 40;

/// How the rig stands when the hook begins to open.
#[derive(Debug, Clone)]
pub struct Held {
    pub t_s: f64,
    pub x_m: f64,
    pub line_n: f64,
    /// One per cord group.
    pub memories: Vec<Memory>,
}

/// Something that happened at one instant of the launch.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Instant {
    pub t_s: f64,
    pub what: Happening,
    /// Shuttle in the rail frame, payload in the ground frame.
    pub row: Row,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Happening {
    HookOpens,
    FirstMotion,
    Separation,
    CordsSlack,
    BrakeReached,
    StopReached,
    Rest,
}

/// A launch as it truly went.
#[derive(Debug, Clone)]
pub struct LaunchRun {
    pub rows: Vec<Row>,
    pub instants: Vec<Instant>,
    pub before: Energy,
    pub at_separation: Option<Split>,
    pub at_end: Split,
    /// `|change of energy − works| / elastic energy at release`, the largest seen at separation and end.
    pub energy_error: f64,
}

/// Where the energy is, and where it went, J.
#[derive(Debug, Clone, Copy)]
pub struct Split {
    pub energy: Energy,
    /// Given by the cords to everything that moves.
    pub cords_delivered_j: f64,
    pub line_j: f64,
    pub friction_j: f64,
    pub brake_j: f64,
    pub shuttle_drag_j: f64,
    pub payload_drag_j: f64,
    pub rail_damper_j: f64,
    pub cord_ground_j: f64,
}

impl Split {
    fn of(system: &System, y: &[f64]) -> Self {
        Self {
            energy: system.energy(y),
            cords_delivered_j: y[at::CORDS],
            line_j: y[at::LINE],
            friction_j: y[at::FRICTION],
            brake_j: y[at::BRAKE],
            shuttle_drag_j: y[at::SHUTTLE_DRAG],
            payload_drag_j: y[at::PAYLOAD_DRAG],
            rail_damper_j: y[at::RAIL_DAMPER],
            cord_ground_j: y[at::CORD_GROUND],
        }
    }

    fn error_j(&self, before: &Energy) -> f64 {
        let losses_j = self.line_j
            + self.friction_j
            + self.brake_j
            + self.shuttle_drag_j
            + self.payload_drag_j
            + self.rail_damper_j
            + self.cord_ground_j;
        (self.energy.mechanical_j() - before.mechanical_j() - self.cords_delivered_j + losses_j).abs()
    }
}

/// Scratch of the Runge-Kutta step.
struct Scratch {
    slopes: [Vec<f64>; 4],
    stage: Vec<f64>,
}

struct Runner<'a> {
    system: &'a System<'a>,
    scratch: Scratch,
    t_s: f64,
    y: Vec<f64>,
    next: Vec<f64>,
    mode: Mode,
    run: LaunchRun,
    stuck_since_s: Option<f64>,
}

/// Runs the launch from `held`.
pub fn launch(system: &System, held: &Held) -> LaunchRun {
    let mut runner = Runner::new(system, held);
    let until_s = held.t_s + LONGEST_S;
    while runner.t_s < until_s && !runner.at_rest() {
        runner.step();
    }
    runner.finish()
}

impl<'a> Runner<'a> {
    fn new(system: &'a System<'a>, held: &Held) -> Self {
        let y = system.held(held.x_m, &held.memories);
        let n = y.len();
        let zeros = || vec![0.0; n];
        let before = Split::of(system, &y);
        let mode =
            Mode { grip: Grip::Stuck, joined: system.with_payload, opening_t_s: held.t_s, hold_line_n: held.line_n };
        let mut runner = Self {
            system,
            scratch: Scratch { slopes: [zeros(), zeros(), zeros(), zeros()], stage: zeros() },
            t_s: held.t_s,
            next: zeros(),
            y,
            mode,
            run: LaunchRun {
                rows: Vec::new(),
                instants: Vec::new(),
                before: before.energy,
                at_separation: None,
                at_end: before,
                energy_error: 0.0,
            },
            stuck_since_s: None,
        };
        let forces = runner.forces_here();
        runner.record(&forces);
        runner.note(Happening::HookOpens);
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
        self.advance(STEP_S);
        if self.event_in_next(STEP_S) {
            let (mut early_s, mut late_s) = (0.0, STEP_S);
            for _ in 0..N_BISECTIONS {
                let middle_s = 0.5 * (early_s + late_s);
                self.advance(middle_s);
                if self.event_in_next(middle_s) { late_s = middle_s } else { early_s = middle_s }
            }
            self.advance(late_s);
            self.accept(late_s);
            self.change_mode();
        } else {
            self.accept(STEP_S);
        }
        let forces = self.forces_here();
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

    fn event_in_next(&mut self, step_s: f64) -> bool {
        let y = &self.next;
        let v_mps = y[at::SHUTTLE_V] - y[at::RAIL_V];
        let forces = self.system.derivative(self.t_s + step_s, y, &self.mode, &mut self.scratch.stage);
        let grip_changes = match self.mode.grip {
            Grip::Sliding(direction) => direction * v_mps < 0.0,
            Grip::Stuck => forces.holding_n.abs() > self.static_friction_n(y),
        };
        grip_changes || (self.mode.joined && v_mps > 0.0 && forces.contact_n < 0.0)
    }

    fn static_friction_n(&self, y: &[f64]) -> f64 {
        let launcher = self.system.launcher;
        launcher.shuttle.friction_static_n + launcher.brake.pad_force_n(y[at::SHUTTLE_X] - y[at::RAIL_X])
    }

    /// Applies the event that the accepted state has just passed.
    fn change_mode(&mut self) {
        let forces = self.forces_here();
        let v_mps = self.y[at::SHUTTLE_V] - self.y[at::RAIL_V];
        if self.mode.joined && v_mps > 0.0 && forces.contact_n < 0.0 {
            self.mode.joined = false;
            self.run.at_separation = Some(Split::of(self.system, &self.y));
            self.note(Happening::Separation);
            return;
        }
        match self.mode.grip {
            Grip::Stuck => {
                self.mode.grip = Grip::Sliding(-forces.holding_n.signum());
                if !self.seen(Happening::FirstMotion) {
                    self.note(Happening::FirstMotion);
                }
            }
            Grip::Sliding(_) => self.halt(),
        }
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
        }
    }

    fn record(&mut self, forces: &Forces) {
        let y = &self.y;
        self.run.rows.push(Row {
            t_s: self.t_s,
            x_m: y[at::SHUTTLE_X] - y[at::RAIL_X],
            v_mps: y[at::SHUTTLE_V] - y[at::RAIL_V],
            shuttle_a_ground_mps2: forces.shuttle_a_mps2,
            line_n: forces.line_n,
            cords_n: forces.cords_n,
            anchor_n: forces.anchor_n,
            contact_n: forces.contact_n,
            payload_v_ground_mps: y[at::PAYLOAD_V],
            rail_x_m: y[at::RAIL_X],
            rail_v_mps: y[at::RAIL_V],
        });
    }

    fn seen(&self, what: Happening) -> bool {
        self.run.instants.iter().any(|instant| instant.what == what)
    }

    fn note(&mut self, what: Happening) {
        let forces = self.forces_here();
        self.record(&forces);
        if let Some(row) = self.run.rows.pop() {
            self.run.instants.push(Instant { t_s: self.t_s, what, row });
        }
    }

    fn watch_marks(&mut self, forces: &Forces) {
        let x_m = self.y[at::SHUTTLE_X] - self.y[at::RAIL_X];
        let brake = &self.system.launcher.brake;
        if forces.cords_n <= 0.0 && x_m > 0.5 * self.system.launcher.zero_mark_x_m && !self.seen(Happening::CordsSlack)
        {
            self.note(Happening::CordsSlack);
        }
        if x_m >= brake.x_m && !self.seen(Happening::BrakeReached) {
            self.note(Happening::BrakeReached);
        }
        if x_m >= brake.stop_x_m && !self.seen(Happening::StopReached) {
            self.note(Happening::StopReached);
        }
        let moved = self.seen(Happening::FirstMotion);
        match (moved && self.mode.grip == Grip::Stuck, self.stuck_since_s) {
            (true, None) => self.stuck_since_s = Some(self.t_s),
            (false, Some(_)) => self.stuck_since_s = None,
            _ => {}
        }
    }

    fn finish(mut self) -> LaunchRun {
        if let Some(rest_t_s) = self.stuck_since_s {
            let row = self.run.rows.iter().find(|row| row.t_s >= rest_t_s).copied().unwrap_or_default();
            self.run.instants.push(Instant { t_s: rest_t_s, what: Happening::Rest, row });
        }
        self.run.at_end = Split::of(self.system, &self.y);
        let stored_j = self.run.before.cord_elastic_j.max(f64::MIN_POSITIVE);
        let checks = [self.run.at_separation, Some(self.run.at_end)];
        self.run.energy_error =
            checks.iter().flatten().map(|split| split.error_j(&self.run.before) / stored_j).fold(0.0, f64::max);
        self.run
    }
}
