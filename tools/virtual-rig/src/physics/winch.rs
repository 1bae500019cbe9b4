//! The slow parts of a trial: slack, winch-back, hold, let-down, charging. Quasi-static (no inertia), with an elastic
//! line, a shuttle that sticks and slips, and cords that relax. The line's force is what the winch needs, not what the
//! cords give.

use super::cord::{CordGroup, Memory};
use super::course::Course;
use super::gas::GasState;
use super::launch::Held;
use super::trajectory::Row;
use crate::launcher::Launcher;

const STEP_S: f64 = 1e-3;
/// Gas flows through an open valve in shorter steps.
const N_FLOW_STEPS: usize = 50;
/// Play in the line before it comes taut, m.
const LINE_PLAY_M: f64 = 0.02;
/// Fine enough for a balance of forces, N.
const BALANCE_N: f64 = 1e-9;
const N_BISECTIONS: u32 = 60;
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
    /// Draws back until the shuttle is at `stop_x_m`.
    Draw {
        speed_mps: f64,
        stop_x_m: f64,
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
    /// Shuttle at `x_m`; the line loose with cords, just taut with gas.
    pub fn at(launcher: &Launcher, x_m: f64, ripple: Ripple) -> Self {
        let gas = launcher.gas.map_or_else(GasState::default, |drive| drive.charged_to(drive.ambient_pa));
        let mut winch = Self {
            launcher: launcher.clone(),
            ripple,
            t_s: 0.0,
            x_m,
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
        winch.record();
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
            let speed_mps = match leg {
                Leg::Draw { speed_mps, .. } | Leg::Tighten { speed_mps, .. } => speed_mps,
                Leg::LetDown { speed_mps } => -speed_mps,
                Leg::Wait { .. } | Leg::Charge { .. } => 0.0,
            };
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

    fn step(&mut self, step_s: f64, speed_mps: f64) {
        let wave = (std::f64::consts::TAU * self.ripple.frequency_hz * self.t_s).sin();
        self.line_end_x_m -= speed_mps * (1.0 + self.ripple.relative * wave) * step_s;
        let (before_x_m, before_n) = (self.x_m, self.line_n());
        self.t_s += step_s;
        self.flow(step_s);
        self.x_m = self.balanced_x_m();
        if self.returning {
            self.x_m = self.x_m.max(self.line_end_x_m - LINE_PLAY_M);
        }
        for (group, memory) in self.launcher.cords.iter().zip(&mut self.memories) {
            let stretch_before = self.launcher.stretch_at(&group.kind, before_x_m);
            let stretch = self.launcher.stretch_at(&group.kind, self.x_m);
            group.kind.remember(memory, stretch_before, stretch, step_s);
        }
        self.line_work_j -= 0.5 * (before_n + self.line_n()) * (self.x_m - before_x_m);
        self.record();
    }

    fn flow(&mut self, step_s: f64) {
        let Some(drive) = &self.launcher.gas else { return };
        let Some(open_since_s) = self.valve_open_s else {
            self.gas.reservoir_kg *= 1.0 - drive.leak_per_s * step_s;
            return;
        };
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
        Held { t_s: self.t_s, x_m: self.x_m, line_n: self.line_n(), memories: self.memories.clone(), gas: self.gas }
    }

    /// Carries on after a launch or a slip; `line_end_x_m` is where the line now ends, `None` when it was let go.
    pub fn resume(&mut self, course: &Course, line_end_x_m: Option<f64>) {
        self.rows.pop();
        self.rows.extend_from_slice(&course.rows);
        let after = &course.after;
        (self.t_s, self.x_m, self.gas) = (after.t_s, after.x_m, after.gas);
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
        self.line_at_n(self.x_m)
    }

    fn line_at_n(&self, x_m: f64) -> f64 {
        let taut = self.launcher.hook.line_stiffness_n_per_m * (x_m - self.line_end_x_m).max(0.0);
        if self.hooked { taut } else { 0.0 }
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

    /// What friction would have to hold at `x_m`, N, positive toward the exit.
    fn needed_n(&self, x_m: f64) -> f64 {
        self.line_at_n(x_m) + self.launcher.weight_along_n() - self.cords_n(x_m) - self.gas_n(x_m)
    }

    /// Where the shuttle comes to stand: where it is while static friction holds it, else where running friction does.
    fn balanced_x_m(&self) -> f64 {
        let needed_n = self.needed_n(self.x_m);
        let static_n = if self.jammed { JAM_N } else { self.launcher.shuttle.friction_static_n };
        if needed_n.abs() <= static_n + self.launcher.brake.pad_force_n(self.x_m) {
            return self.x_m;
        }
        self.x_where_needed_is(needed_n.signum() * self.launcher.shuttle.friction_running_n)
    }

    /// Bisection; `needed_n` grows with x (line and cords both pull back to a middle).
    fn x_where_needed_is(&self, target_n: f64) -> f64 {
        let reach_m = 2.0 * (self.needed_n(self.x_m) - target_n).abs() / self.launcher.hook.line_stiffness_n_per_m;
        let (mut low_m, mut high_m) = (self.x_m - reach_m - 1e-4, self.x_m + reach_m + 1e-4);
        while self.needed_n(low_m) > target_n && low_m > self.x_m - 1.0 {
            low_m -= 0.01;
        }
        while self.needed_n(high_m) < target_n && high_m < self.x_m + 1.0 {
            high_m += 0.01;
        }
        for _ in 0..N_BISECTIONS {
            let middle_m = 0.5 * (low_m + high_m);
            let excess_n = self.needed_n(middle_m) - target_n;
            if excess_n.abs() < BALANCE_N {
                return middle_m;
            }
            if excess_n > 0.0 { high_m = middle_m } else { low_m = middle_m }
        }
        0.5 * (low_m + high_m)
    }

    fn record(&mut self) {
        let cords_n = self.cords_n(self.x_m);
        let v_mps = self.rows.last().map_or(0.0, |row| (self.x_m - row.x_m) / (self.t_s - row.t_s).max(1e-9));
        self.rows.push(Row {
            t_s: self.t_s,
            x_m: self.x_m,
            v_mps,
            line_n: self.line_n(),
            cords_n,
            anchor_n: cords_n,
            contact_n: self.launcher.payload_mass_kg() * self.launcher.gravity_along_mps2(),
            payload_x_m: if self.hooked { self.x_m } else { self.still.payload_x_m },
            reservoir_pa: self.launcher.gas.map_or(0.0, |drive| drive.reservoir_pa(&self.gas)),
            cylinder_pa: self.launcher.gas.map_or(0.0, |drive| drive.cylinder_pa(&self.gas, self.x_m)),
            ..Row::default()
        });
    }
}
