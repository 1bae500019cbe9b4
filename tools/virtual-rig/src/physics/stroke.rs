//! Equations of motion from release to rest: shuttle, payload, rail and every cord's chain of masses, in the ground frame.
//!
//! - Shuttle and payload move as one while the payload is pushed; they part when the contact force vanishes.
//! - Running friction opposes sliding on the rail; at rest the shuttle sticks until the net force beats static friction.
//! - Drag `½ρ C_d A (v + w)|v + w|` on both; the brake is a pad with run-in, a damper and an elastic stop.
//! - The rail is a mass on a spring and a damper that takes the cords' anchor, the line, friction and brake.
//!
//! The works of all forces are integrated beside the motion, so that energy must close (see [`Energy`]).

use super::cord::{CordGroup, Memory, N_RELAXATION};
use super::gas::GasState;
use crate::launcher::Launcher;

/// Indices into the state vector.
pub mod at {
    pub const SHUTTLE_X: usize = 0;
    pub const SHUTTLE_V: usize = 1;
    pub const PAYLOAD_X: usize = 2;
    pub const PAYLOAD_V: usize = 3;
    pub const RAIL_X: usize = 4;
    pub const RAIL_V: usize = 5;
    /// Works, J: given to line, friction, brake, drag of the shuttle, drag of the payload, rail damper, ground below
    /// slack cords; and taken from the cords' internal forces.
    pub const LINE: usize = 6;
    pub const FRICTION: usize = 7;
    pub const BRAKE: usize = 8;
    pub const SHUTTLE_DRAG: usize = 9;
    pub const PAYLOAD_DRAG: usize = 10;
    pub const RAIL_DAMPER: usize = 11;
    pub const CORD_GROUND: usize = 12;
    pub const CORDS: usize = 13;
    /// Given by the gas to the shuttle and the rail.
    pub const GAS: usize = 14;
    /// kg in reservoir and cylinder.
    pub const RESERVOIR: usize = 15;
    pub const CYLINDER: usize = 16;
    pub const FIRST_CORD: usize = 17;
}

const MEMORY_SIZE: usize = 1 + N_RELAXATION;
/// Damping of cord lying slack on the ground, 1/s.
const SLACK_DAMPING_PER_S: f64 = 4.0;

/// How shuttle and rail touch.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Grip {
    Stuck,
    /// Sliding with this sign of the relative velocity.
    Sliding(f64),
}

/// The state of contact and grip, fixed over one step.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Mode {
    pub grip: Grip,
    /// Payload pushed by the shuttle.
    pub joined: bool,
    pub line: LineMode,
}

/// What the release line does.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum LineMode {
    /// The hook began to open at `t_s`, the line carrying `hold_n` until then.
    Opening { t_s: f64, hold_n: f64 },
    /// The line holds, its unstretched end at rail coordinate `end_x_m`.
    Holding { end_x_m: f64 },
}

/// Forces and accelerations at one instant.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Forces {
    pub line_n: f64,
    pub cords_n: f64,
    pub gas_n: f64,
    pub anchor_n: f64,
    pub contact_n: f64,
    pub shuttle_a_mps2: f64,
    pub payload_a_mps2: f64,
    pub rail_a_mps2: f64,
    /// What friction would have to be for the shuttle to stay where it is on the rail.
    pub holding_n: f64,
}

/// Launcher with the constants that the equations need.
#[derive(Debug, Clone)]
pub struct System {
    pub launcher: Launcher,
    /// Force of the rail's spring at the hold is the zero of its motion.
    pub rail_rest_n: f64,
    /// Step of the integration.
    pub step_s: f64,
}

struct Drag {
    shuttle_n: f64,
    payload_n: f64,
}

impl System {
    pub fn n_states(&self) -> usize {
        at::FIRST_CORD + self.launcher.cords.iter().map(group_size).sum::<usize>()
    }

    /// State of the rig with the shuttle at rail coordinate `x_m`, moving at `v_mps`, and evenly stretched cords.
    pub fn held(&self, x_m: f64, v_mps: f64, memories: &[Memory], gas: &GasState) -> Vec<f64> {
        let mut y = vec![0.0; self.n_states()];
        y[at::SHUTTLE_X] = x_m;
        y[at::PAYLOAD_X] = x_m;
        y[at::SHUTTLE_V] = v_mps;
        y[at::PAYLOAD_V] = v_mps;
        y[at::RESERVOIR] = gas.reservoir_kg;
        y[at::CYLINDER] = gas.cylinder_kg;
        let mut start = at::FIRST_CORD;
        for (group, memory) in self.launcher.cords.iter().zip(memories) {
            let kind = &group.kind;
            let n = kind.n_masses;
            let span_m = self.launcher.anchor_x_m - x_m;
            for idx in 0..n {
                let share = (idx as f64 + 0.5) / n as f64;
                y[start + idx] = x_m + span_m * share;
                y[start + n + idx] = v_mps * (1.0 - share);
            }
            for spring in 0..=n {
                let place = start + 2 * n + MEMORY_SIZE * spring;
                y[place] = memory.unloading;
                y[place + 1..place + MEMORY_SIZE].copy_from_slice(&memory.delayed_n);
            }
            start += group_size(group);
        }
        y
    }

    /// Derivative of the state into `dy`; returns the forces behind it.
    pub fn derivative(&self, t_s: f64, y: &[f64], mode: &Mode, dy: &mut [f64]) -> Forces {
        let mut forces = Forces { line_n: self.line_force_n(t_s, y, mode), ..Forces::default() };
        dy.fill(0.0);
        let mut start = at::FIRST_CORD;
        for group in &self.launcher.cords {
            let (at_shuttle_n, at_anchor_n) = self.cord_derivative(group, start, y, dy);
            forces.cords_n += at_shuttle_n;
            forces.anchor_n += at_anchor_n;
            start += group_size(group);
        }
        self.gas_derivative(y, &mut forces, dy);
        self.bodies(y, mode, &mut forces, dy);
        forces
    }

    fn line_force_n(&self, t_s: f64, y: &[f64], mode: &Mode) -> f64 {
        let hook = &self.launcher.hook;
        match mode.line {
            LineMode::Opening { t_s: opening_t_s, hold_n } => {
                let opened = ((t_s - opening_t_s) / hook.opening_s).clamp(0.0, 1.0);
                hold_n * 0.5 * (1.0 + (std::f64::consts::PI * opened).cos())
            }
            LineMode::Holding { end_x_m } => {
                let (x_m, v_mps) = (y[at::SHUTTLE_X] - y[at::RAIL_X], y[at::SHUTTLE_V] - y[at::RAIL_V]);
                let stretch_m = x_m - end_x_m;
                let damped_n = hook.line_damping_n_s_per_m * v_mps;
                if stretch_m > 0.0 { (hook.line_stiffness_n_per_m * stretch_m + damped_n).max(0.0) } else { 0.0 }
            }
        }
    }

    fn gas_derivative(&self, y: &[f64], forces: &mut Forces, dy: &mut [f64]) {
        let Some(gas) = &self.launcher.gas else { return };
        let state = gas_at(y);
        let (x_m, v_mps) = (y[at::SHUTTLE_X] - y[at::RAIL_X], y[at::SHUTTLE_V] - y[at::RAIL_V]);
        let flow_kg_per_s = gas.flow_kg_per_s(&state, x_m, 1.0);
        dy[at::RESERVOIR] = -flow_kg_per_s;
        dy[at::CYLINDER] = flow_kg_per_s;
        forces.gas_n = gas.force_n(&state, x_m, v_mps);
        dy[at::GAS] = forces.gas_n * v_mps;
    }

    /// Chain of one group, one cord integrated: returns the group's forces at shuttle and anchor.
    fn cord_derivative(&self, group: &CordGroup, start: usize, y: &[f64], dy: &mut [f64]) -> (f64, f64) {
        let kind = &group.kind;
        let n = kind.n_masses;
        let mass_kg = kind.mass_kg / n as f64;
        let along_mps2 = self.launcher.gravity_along_mps2();
        let anchor = (self.launcher.anchor_x_m + y[at::RAIL_X], y[at::RAIL_V]);
        let mut near = (y[at::SHUTTLE_X], y[at::SHUTTLE_V]);
        let (mut pull_before_n, mut slack_before, mut at_shuttle_n) = (0.0, 0.0, 0.0);
        for spring in 0..=n {
            let far = if spring == n { anchor } else { (y[start + spring], y[start + n + spring]) };
            let length_m = kind.spring_length_m(spring);
            let gap_m = far.0 - near.0;
            let side = if gap_m < 0.0 { -1.0 } else { 1.0 };
            let (stretch, rate_per_s) = (gap_m.abs() / length_m, side * (far.1 - near.1) / length_m);
            let place = start + 2 * n + MEMORY_SIZE * spring;
            let memory = memory_at(&y[place..place + MEMORY_SIZE]);
            let (tension_n, elastic_n) = kind.tension_and_elastic_n(stretch, rate_per_s, &memory);
            let change = kind.memory_rate(elastic_n, if stretch > 1.0 { rate_per_s } else { 0.0 }, &memory);
            dy[place] = change.unloading;
            dy[place + 1..place + MEMORY_SIZE].copy_from_slice(&change.delayed_n);
            dy[at::CORDS] -= group.count * tension_n * rate_per_s * length_m;
            let pull_n = side * tension_n;
            let slack = ((1.02 - stretch) / 0.02).clamp(0.0, 1.0);
            if spring == 0 {
                at_shuttle_n = group.count * pull_n;
            } else {
                let v_mps = near.1;
                let ground_mps2 = SLACK_DAMPING_PER_S * slack * slack_before * v_mps;
                dy[start + spring - 1] = v_mps;
                dy[start + n + spring - 1] = (pull_n - pull_before_n) / mass_kg - along_mps2 - ground_mps2;
                dy[at::CORD_GROUND] += group.count * mass_kg * ground_mps2 * v_mps;
            }
            (near, pull_before_n, slack_before) = (far, pull_n, slack);
        }
        (at_shuttle_n, group.count * pull_before_n)
    }

    /// Accelerations of shuttle, payload and rail under the forces found so far, and the works of all forces.
    fn bodies(&self, y: &[f64], mode: &Mode, forces: &mut Forces, dy: &mut [f64]) {
        let (launcher, rail) = (&self.launcher, &self.launcher.rail);
        let (x_m, v_mps) = (y[at::SHUTTLE_X] - y[at::RAIL_X], y[at::SHUTTLE_V] - y[at::RAIL_V]);
        let (drag, damper_n) = (self.drag(y), self.damper_n(x_m, v_mps));
        let along_mps2 = launcher.gravity_along_mps2();
        let payload_kg = launcher.payload_mass_kg();
        let (pushed_kg, pushed_drag_n) = if mode.joined { (payload_kg, drag.payload_n) } else { (0.0, 0.0) };
        let moved_kg = launcher.shuttle.mass_kg + pushed_kg;
        let held_back_n = forces.line_n + drag.shuttle_n + pushed_drag_n + damper_n + moved_kg * along_mps2;
        let push_n = forces.cords_n + forces.gas_n - held_back_n;
        let rail_spring_n = rail.stiffness_n_per_m * y[at::RAIL_X] + rail.damping_n_s_per_m * y[at::RAIL_V];
        let rail_push_n = forces.line_n - forces.anchor_n - forces.gas_n + damper_n - rail_spring_n - self.rail_rest_n;

        let pad_n = launcher.brake.pad_force_n(x_m);
        let running_n = launcher.shuttle.friction_running_n;
        let friction_n = match mode.grip {
            Grip::Sliding(direction) => -direction * (running_n + pad_n),
            Grip::Stuck => moved_kg * (push_n + rail_push_n) / (moved_kg + rail.mass_kg) - push_n,
        };
        forces.rail_a_mps2 = (rail_push_n - friction_n) / rail.mass_kg;
        forces.shuttle_a_mps2 = (push_n + friction_n) / moved_kg;
        forces.holding_n = moved_kg * forces.rail_a_mps2 - push_n;
        let free_mps2 = if payload_kg > 0.0 { -along_mps2 - drag.payload_n / payload_kg } else { 0.0 };
        forces.payload_a_mps2 = if mode.joined { forces.shuttle_a_mps2 } else { free_mps2 };
        forces.contact_n = if mode.joined { payload_kg * (forces.shuttle_a_mps2 - free_mps2) } else { 0.0 };

        let running_share = running_n / (running_n + pad_n).max(f64::MIN_POSITIVE);
        dy[at::LINE] = forces.line_n * v_mps;
        dy[at::FRICTION] = -friction_n * v_mps * running_share;
        dy[at::BRAKE] = -friction_n * v_mps * (1.0 - running_share) + damper_n * v_mps;
        dy[at::SHUTTLE_DRAG] = drag.shuttle_n * y[at::SHUTTLE_V];
        dy[at::PAYLOAD_DRAG] = drag.payload_n * y[at::PAYLOAD_V];
        dy[at::RAIL_DAMPER] = rail.damping_n_s_per_m * y[at::RAIL_V] * y[at::RAIL_V];
        motion(y, forces, dy);
    }

    fn drag(&self, y: &[f64]) -> Drag {
        let launcher = &self.launcher;
        let on = |area_m2: f64, v_mps: f64| {
            let air_mps = v_mps + launcher.head_wind_mps;
            0.5 * launcher.air_density_kg_per_m3 * area_m2 * air_mps * air_mps.abs()
        };
        Drag {
            shuttle_n: on(launcher.shuttle.drag_area_m2, y[at::SHUTTLE_V]),
            payload_n: launcher.payload.map_or(0.0, |payload| on(payload.drag_area_m2, y[at::PAYLOAD_V])),
        }
    }

    /// Damper and elastic stop of the brake; the stop only pushes back.
    fn damper_n(&self, x_m: f64, v_mps: f64) -> f64 {
        let brake = &self.launcher.brake;
        let into_stop_m = x_m - brake.stop_x_m;
        let stop_n = if into_stop_m > 0.0 {
            (brake.stop_stiffness_n_per_m * into_stop_m + brake.stop_damping_n_s_per_m * v_mps).max(0.0)
        } else {
            0.0
        };
        brake.engaged(x_m) * brake.damper_n_s_per_m * v_mps + stop_n
    }

    /// The energy of every part at state `y`.
    pub fn energy(&self, y: &[f64]) -> Energy {
        let launcher = &self.launcher;
        let along_mps2 = launcher.gravity_along_mps2();
        let (shuttle_kg, payload_kg) = (launcher.shuttle.mass_kg, launcher.payload_mass_kg());
        let mut energy = Energy {
            shuttle_j: 0.5 * shuttle_kg * y[at::SHUTTLE_V].powi(2),
            payload_j: 0.5 * payload_kg * y[at::PAYLOAD_V].powi(2),
            gravity_j: along_mps2 * (shuttle_kg * y[at::SHUTTLE_X] + payload_kg * y[at::PAYLOAD_X]),
            rail_j: 0.5 * launcher.rail.mass_kg * y[at::RAIL_V].powi(2)
                + 0.5 * launcher.rail.stiffness_n_per_m * y[at::RAIL_X].powi(2)
                + self.rail_rest_n * y[at::RAIL_X],
            ..Energy::default()
        };
        let mut start = at::FIRST_CORD;
        for group in &self.launcher.cords {
            self.add_cord_energy(group, start, y, &mut energy);
            start += group_size(group);
        }
        energy
    }

    /// What an evenly stretched cord of each group would remember: the mean over its springs.
    pub fn mean_memories(&self, y: &[f64]) -> Vec<Memory> {
        let mut start = at::FIRST_CORD;
        let mut memories = Vec::new();
        for group in &self.launcher.cords {
            let kind = &group.kind;
            let mut mean = Memory::default();
            for spring in 0..=kind.n_masses {
                let place = start + 2 * kind.n_masses + MEMORY_SIZE * spring;
                let memory = memory_at(&y[place..place + MEMORY_SIZE]);
                let share = kind.spring_length_m(spring) / kind.free_length_m;
                mean.unloading += share * memory.unloading;
                for (sum_n, delayed_n) in mean.delayed_n.iter_mut().zip(memory.delayed_n) {
                    *sum_n += share * delayed_n;
                }
            }
            memories.push(mean);
            start += group_size(group);
        }
        memories
    }

    fn add_cord_energy(&self, group: &CordGroup, start: usize, y: &[f64], energy: &mut Energy) {
        let kind = &group.kind;
        let n = kind.n_masses;
        let mass_kg = kind.mass_kg / n as f64;
        let anchor_x_m = self.launcher.anchor_x_m + y[at::RAIL_X];
        let mut near_x_m = y[at::SHUTTLE_X];
        for spring in 0..=n {
            let far_x_m = if spring == n { anchor_x_m } else { y[start + spring] };
            let length_m = kind.spring_length_m(spring);
            energy.cord_elastic_j +=
                group.count * length_m * kind.law.energy_j_per_m((far_x_m - near_x_m).abs() / length_m);
            near_x_m = far_x_m;
        }
        for idx in 0..n {
            energy.cord_kinetic_j += 0.5 * group.count * mass_kg * y[start + n + idx].powi(2);
            energy.gravity_j += group.count * mass_kg * self.launcher.gravity_along_mps2() * y[start + idx];
        }
    }
}

/// Positions follow speeds, speeds follow accelerations.
fn motion(y: &[f64], forces: &Forces, dy: &mut [f64]) {
    dy[at::SHUTTLE_X] = y[at::SHUTTLE_V];
    dy[at::SHUTTLE_V] = forces.shuttle_a_mps2;
    dy[at::PAYLOAD_X] = y[at::PAYLOAD_V];
    dy[at::PAYLOAD_V] = forces.payload_a_mps2;
    dy[at::RAIL_X] = y[at::RAIL_V];
    dy[at::RAIL_V] = forces.rail_a_mps2;
}

fn group_size(group: &CordGroup) -> usize {
    2 * group.kind.n_masses + MEMORY_SIZE * (group.kind.n_masses + 1)
}

/// Gas in the state vector.
pub fn gas_at(y: &[f64]) -> GasState {
    GasState { reservoir_kg: y[at::RESERVOIR], cylinder_kg: y[at::CYLINDER] }
}

fn memory_at(values: &[f64]) -> Memory {
    let mut delayed_n = [0.0; N_RELAXATION];
    delayed_n.copy_from_slice(&values[1..]);
    Memory { unloading: values[0], delayed_n }
}

/// Energies in J.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Energy {
    pub shuttle_j: f64,
    pub payload_j: f64,
    pub cord_kinetic_j: f64,
    /// Of the elastic law alone; hysteresis, relaxation and damping are losses against it.
    pub cord_elastic_j: f64,
    pub gravity_j: f64,
    pub rail_j: f64,
}

impl Energy {
    /// All but the cords' elastic energy, whose work is integrated.
    pub fn mechanical_j(&self) -> f64 {
        self.shuttle_j + self.payload_j + self.cord_kinetic_j + self.gravity_j + self.rail_j
    }
}
