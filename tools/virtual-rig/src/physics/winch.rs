//! The slow parts of a trial: slack, winch-back, hold, let-down, charging. Shuttle and payload are one mass on an elastic,
//! damped line; the shuttle sticks and slips; evenly stretched cords relax and have no inertia; the rail stands still.
//! The line's force is what the winch needs, not what the cords give.
//!
//! Semi-implicit Euler steps of 0.1 ms (the line's own period with the payload is some 75 ms).

use super::cord::{CordGroup, Memory};
use super::course::Course;
use super::gas::GasState;
use super::launch::Held;
use super::trajectory::Row;
use crate::launcher::Launcher;

const STEP_S: f64 = 1e-3;
/// Motion, and gas through an open valve, go in shorter steps.
const N_PARTS: usize = 10;
const N_FLOW_STEPS: usize = 50;
/// How fast the drum speeds up and slows down at pace 1; it goes with one over the pace.
const DRUM_MPS2: f64 = 0.2;
/// The drum takes up a loose line at this speed, whatever the pace.
const TAKE_UP_MPS: f64 = 0.02;
/// A drum that slows for its stop keeps this much, as share of its speed.
const CREEP_SHARE: f64 = 0.01;
/// Stiffness and damping of the return line, shares of the release line's.
const RETURN_SHARE: f64 = 0.1;
/// Play in the line before it comes taut, m.
const LINE_PLAY_M: f64 = 0.003;
/// Holds whatever the cords can pull.
const JAM_N: f64 = 5000.0;

/// Ripple of the drum's speed, relative, and its frequency.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Ripple {
    pub relative: f64,
    pub frequency_hz: f64,
}

/// What the line does over one leg.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Leg {
    Wait {
        duration_s: f64,
    },
    /// Draws back until the shuttle is at `stop_x_m`, where the drum slows down or not.
    Draw {
        speed_mps: f64,
        stop_x_m: f64,
        slows: bool,
    },
    /// Takes the line in until it carries `tension_n`.
    Tighten {
        speed_mps: f64,
        tension_n: f64,
    },
    /// Pays out; where the cords no longer beat friction, the winch's return line (which has no cell) draws the shuttle on
    /// to the zero mark.
    LetDown {
        speed_mps: f64,
    },
    /// Fills the gas reservoir.
    Charge {
        duration_s: f64,
    },
}

/// Longest time for a leg that ends at a place or a tension.
const LONGEST_LEG_S: f64 = 120.0;

/// Shuttle, line and cords during the slow parts.
#[derive(Debug, Clone)]
pub struct Winch {
    pub launcher: Launcher,
    ripple: Ripple,
    pub t_s: f64,
    pub x_m: f64,
    pub v_mps: f64,
    /// Positive drawing back.
    drum_mps: f64,
    pace: f64,
    /// Where the line would end if it carried nothing.
    pub line_end_x_m: f64,
    pub memories: Vec<Memory>,
    pub gas: GasState,
    pub rows: Vec<Row>,
    /// Work done by the line on the shuttle, J.
    pub line_work_j: f64,
    hooked: bool,
    jammed: bool,
    /// The return line is hooked on, behind the play of the line.
    returning: bool,
    valve_open_s: Option<f64>,
    /// Rail, payload as the last launch left them.
    still: Row,
}

impl Winch {
    /// Shuttle at `x_m`; the line loose with cords, just taut with gas. The drum's acceleration goes with the pace.
    pub fn at(launcher: &Launcher, x_m: f64, ripple: Ripple, pace: f64) -> Self {
        let gas = launcher.gas.map_or_else(GasState::default, |drive| drive.charged_to(drive.ambient_pa));
        let mut winch = Self {
            launcher: launcher.clone(),
            ripple,
            t_s: 0.0,
            x_m,
            v_mps: 0.0,
            drum_mps: 0.0,
            pace,
            line_end_x_m: x_m + if launcher.gas.is_some() { 0.0 } else { LINE_PLAY_M },
            memories: vec![Memory::default(); launcher.cords.len()],
            gas,
            rows: Vec::new(),
            line_work_j: 0.0,
            hooked: true,
            jammed: false,
            returning: false,
            valve_open_s: None,
            still: Row::default(),
        };
        winch.record(0.0);
        winch
    }

    /// Runs one leg.
    pub fn run(&mut self, leg: Leg) {
        let until_s = self.t_s
            + match leg {
                Leg::Wait { duration_s } | Leg::Charge { duration_s } => duration_s,
                _ => LONGEST_LEG_S,
            };
        let start_s = self.t_s;
        while self.t_s < until_s && !self.done(leg) {
            let step_s = (until_s - self.t_s).min(STEP_S);
            let speed_mps = self.wanted_mps(leg);
            if let (Leg::Charge { duration_s }, Some(drive)) = (leg, &self.launcher.gas) {
                let share = ((self.t_s + step_s - start_s) / duration_s).clamp(0.0, 1.0);
                self.gas = drive.charged_to(drive.ambient_pa + share * (drive.charge_pa - drive.ambient_pa));
            }
            self.returning = matches!(leg, Leg::LetDown { .. });
            self.step(step_s, speed_mps);
        }
        self.returning = false;
    }

    fn done(&self, leg: Leg) -> bool {
        match leg {
            Leg::Wait { .. } | Leg::Charge { .. } => false,
            Leg::Draw { stop_x_m, .. } => self.x_m <= stop_x_m,
            Leg::Tighten { tension_n, .. } => self.line_n() >= tension_n,
            Leg::LetDown { .. } => self.x_m >= self.launcher.zero_mark_x_m,
        }
    }

    /// Drum speed that the leg wants now, positive drawing back.
    fn wanted_mps(&self, leg: Leg) -> f64 {
        let slowing_mps = |speed_mps: f64, left_m: f64| {
            let fast_mps = (2.0 * self.drum_mps2() * left_m.max(0.0)).sqrt();
            speed_mps.min(fast_mps + CREEP_SHARE * speed_mps)
        };
        match leg {
            Leg::Draw { .. } if self.line_end_x_m >= self.x_m => TAKE_UP_MPS,
            Leg::Draw { speed_mps, stop_x_m, slows: true } => slowing_mps(speed_mps, self.x_m - stop_x_m),
            Leg::Draw { speed_mps, .. } | Leg::Tighten { speed_mps, .. } => speed_mps,
            Leg::LetDown { speed_mps } => -slowing_mps(speed_mps, self.launcher.zero_mark_x_m - self.x_m),
            Leg::Wait { .. } | Leg::Charge { .. } => 0.0,
        }
    }

    fn drum_mps2(&self) -> f64 {
        DRUM_MPS2 / self.pace
    }

    fn step(&mut self, step_s: f64, wanted_mps: f64) {
        let (before_x_m, before_v_mps, before_n) = (self.x_m, self.v_mps, self.line_n());
        for _ in 0..N_PARTS {
            self.move_on(step_s / N_PARTS as f64, wanted_mps);
        }
        self.t_s += step_s;
        self.flow(step_s);
        for (group, memory) in self.launcher.cords.iter().zip(&mut self.memories) {
            let stretch_before = self.launcher.stretch_at(&group.kind, before_x_m);
            let stretch = self.launcher.stretch_at(&group.kind, self.x_m);
            group.kind.remember(memory, stretch_before, stretch, step_s);
        }
        self.line_work_j -= 0.5 * (before_n + self.line_n()) * (self.x_m - before_x_m);
        self.record((self.v_mps - before_v_mps) / step_s);
    }

    /// Drum and shuttle over `part_s`.
    fn move_on(&mut self, part_s: f64, wanted_mps: f64) {
        let most_mps = self.drum_mps2() * part_s;
        self.drum_mps += (wanted_mps - self.drum_mps).clamp(-most_mps, most_mps);
        let wave = (std::f64::consts::TAU * self.ripple.frequency_hz * self.t_s).sin();
        self.line_end_x_m -= self.drum_mps * (1.0 + self.ripple.relative * wave) * part_s;

        let launcher = &self.launcher;
        let push_n = self.push_n();
        let pad_n = launcher.brake.pad_force_n(self.x_m);
        let static_n = pad_n + if self.jammed { JAM_N } else { launcher.shuttle.friction_static_n };
        if self.v_mps == 0.0 && push_n.abs() <= static_n {
            return;
        }
        let direction = if self.v_mps == 0.0 { push_n.signum() } else { self.v_mps.signum() };
        let friction_n = -direction * (launcher.shuttle.friction_running_n + pad_n);
        let mass_kg = launcher.shuttle.mass_kg + launcher.payload_mass_kg();
        let v_mps = self.v_mps + (push_n + friction_n) / mass_kg * part_s;
        self.v_mps = if v_mps * direction <= 0.0 { 0.0 } else { v_mps };
        self.x_m += self.v_mps * part_s;
    }

    /// All forces on the shuttle but friction, N, positive toward the exit.
    fn push_n(&self) -> f64 {
        let hook = &self.launcher.hook;
        let back_m = if self.returning { self.line_end_x_m - LINE_PLAY_M - self.x_m } else { 0.0 };
        let back_n = if back_m > 0.0 {
            let damping_n = hook.line_damping_n_s_per_m * (-self.drum_mps - self.v_mps);
            RETURN_SHARE * (hook.line_stiffness_n_per_m * back_m + damping_n)
        } else {
            0.0
        };
        self.cords_n(self.x_m) + self.gas_n(self.x_m) + back_n - self.launcher.weight_along_n() - self.line_n()
    }

    fn flow(&mut self, step_s: f64) {
        let Some(drive) = &self.launcher.gas else { return };
        self.gas.reservoir_kg *= 1.0 - drive.leak_per_s * step_s;
        let Some(open_since_s) = self.valve_open_s else { return };
        let open = ((self.t_s - open_since_s) / drive.valve_opening_s).clamp(0.0, 1.0);
        let part_s = step_s / N_FLOW_STEPS as f64;
        for _ in 0..N_FLOW_STEPS {
            let moved_kg = drive.flow_kg_per_s(&self.gas, self.x_m, open) * part_s;
            self.gas.reservoir_kg -= moved_kg;
            self.gas.cylinder_kg += moved_kg;
        }
    }

    pub fn open_valve(&mut self) {
        self.valve_open_s = Some(self.t_s);
    }

    /// One cord of the first group breaks.
    pub fn break_cord(&mut self) {
        if let Some(group) = self.launcher.cords.first_mut() {
            group.count -= 1.0;
        }
    }

    /// The hook opens but the shuttle is jammed where it stands.
    pub fn open_hook_on_jam(&mut self) {
        self.jammed = true;
        self.hooked = false;
    }

    /// The line is hooked on again, loose.
    pub fn hook_again(&mut self) {
        self.hooked = true;
        self.line_end_x_m = self.x_m + LINE_PLAY_M;
    }

    pub fn free_jam(&mut self) {
        self.jammed = false;
    }

    /// How the rig stands.
    pub fn held(&self) -> Held {
        Held {
            t_s: self.t_s,
            x_m: self.x_m,
            v_mps: self.v_mps,
            line_n: self.line_n(),
            memories: self.memories.clone(),
            gas: self.gas,
        }
    }

    /// Carries on after a launch or a slip; `line_end_x_m` is where the line now ends, `None` when it was let go.
    pub fn resume(&mut self, course: &Course, line_end_x_m: Option<f64>) {
        self.rows.pop();
        self.rows.extend_from_slice(&course.rows);
        let after = &course.after;
        (self.t_s, self.x_m, self.v_mps, self.gas) = (after.t_s, after.x_m, after.v_mps, after.gas);
        self.drum_mps = 0.0;
        self.memories.clone_from(&after.memories);
        self.hooked = line_end_x_m.is_some();
        self.line_end_x_m = line_end_x_m.unwrap_or(after.x_m);
        if line_end_x_m.is_none() {
            let last = course.rows.last().copied().unwrap_or_default();
            self.still = Row { payload_x_m: last.payload_x_m, ..Row::default() };
        }
    }

    /// Line force in N.
    pub fn line_n(&self) -> f64 {
        let (hook, stretch_m) = (&self.launcher.hook, self.x_m - self.line_end_x_m);
        if !self.hooked || stretch_m <= 0.0 {
            return 0.0;
        }
        let damped_n = hook.line_damping_n_s_per_m * (self.v_mps + self.drum_mps);
        (hook.line_stiffness_n_per_m * stretch_m + damped_n).max(0.0)
    }

    /// Force of all cords in N with the shuttle at `x_m` and the present memory.
    pub fn cords_n(&self, x_m: f64) -> f64 {
        let one_n =
            |group: &CordGroup, memory| group.kind.tension_n(self.launcher.stretch_at(&group.kind, x_m), 0.0, memory);
        self.launcher.cords.iter().zip(&self.memories).map(|(group, memory)| group.count * one_n(group, memory)).sum()
    }

    fn gas_n(&self, x_m: f64) -> f64 {
        self.launcher.gas.map_or(0.0, |drive| drive.force_n(&self.gas, x_m, 0.0))
    }

    fn record(&mut self, a_mps2: f64) {
        let cords_n = self.cords_n(self.x_m);
        let along_mps2 = self.launcher.gravity_along_mps2();
        self.rows.push(Row {
            t_s: self.t_s,
            x_m: self.x_m,
            v_mps: self.v_mps,
            shuttle_a_ground_mps2: a_mps2,
            payload_a_ground_mps2: if self.hooked { a_mps2 } else { 0.0 },
            line_n: self.line_n(),
            cords_n,
            anchor_n: cords_n,
            contact_n: self.launcher.payload_mass_kg() * (a_mps2 + along_mps2),
            payload_x_m: if self.hooked { self.x_m } else { self.still.payload_x_m },
            reservoir_pa: self.launcher.gas.map_or(0.0, |drive| drive.reservoir_pa(&self.gas)),
            cylinder_pa: self.launcher.gas.map_or(0.0, |drive| drive.cylinder_pa(&self.gas, self.x_m)),
            ..Row::default()
        });
    }
}
