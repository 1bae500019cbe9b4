//! The slow phases before release: slack, winch-back, hold, let-down. Quasi-static (no inertia), with an elastic line, a
//! shuttle that sticks and slips, and cords that relax. The line's force is what the winch needs, not what the cords give.

use super::cord::Memory;
use super::trajectory::Row;
use crate::launcher::Launcher;

const STEP_S: f64 = 1e-3;
/// Play in the line before it comes taut, m.
const LINE_PLAY_M: f64 = 0.02;
/// Slowest useful force balance, N.
const BALANCE_N: f64 = 1e-9;

/// One stretch of the winch's work.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Leg {
    pub duration_s: f64,
    /// Drum speed, positive drawing back.
    pub speed_mps: f64,
}

/// Ripple of the drum's speed, relative, and its frequency.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Ripple {
    pub relative: f64,
    pub frequency_hz: f64,
}

/// Shuttle, line and cords during the slow phases.
#[derive(Debug, Clone)]
pub struct Winch<'a> {
    launcher: &'a Launcher,
    ripple: Ripple,
    pub t_s: f64,
    pub x_m: f64,
    /// Where the line would end if it carried nothing.
    pub line_end_x_m: f64,
    pub memories: Vec<Memory>,
    pub rows: Vec<Row>,
    /// Work done by the line on the shuttle, J.
    pub line_work_j: f64,
}

impl<'a> Winch<'a> {
    /// Shuttle at the zero mark, cords slack.
    pub fn at_zero_mark(launcher: &'a Launcher, ripple: Ripple) -> Self {
        let x_m = launcher.zero_mark_x_m;
        let mut winch = Self {
            launcher,
            ripple,
            t_s: 0.0,
            x_m,
            line_end_x_m: x_m + LINE_PLAY_M,
            memories: vec![Memory::default(); launcher.cords.len()],
            rows: Vec::new(),
            line_work_j: 0.0,
        };
        winch.record();
        winch
    }

    /// Runs one leg. A leg that draws stops early at `stop_x_m`.
    pub fn run(&mut self, leg: Leg, stop_x_m: f64) {
        let until_s = self.t_s + leg.duration_s;
        while self.t_s < until_s && !(leg.speed_mps > 0.0 && self.x_m <= stop_x_m) {
            self.step((until_s - self.t_s).min(STEP_S), leg.speed_mps);
        }
    }

    fn step(&mut self, step_s: f64, speed_mps: f64) {
        let wave = (std::f64::consts::TAU * self.ripple.frequency_hz * self.t_s).sin();
        self.line_end_x_m -= speed_mps * (1.0 + self.ripple.relative * wave) * step_s;
        let (before_x_m, before_n) = (self.x_m, self.line_n());
        self.t_s += step_s;
        self.x_m = self.balanced_x_m();
        for (group, memory) in self.launcher.cords.iter().zip(&mut self.memories) {
            let stretch_before = self.launcher.stretch_at(&group.kind, before_x_m);
            let stretch = self.launcher.stretch_at(&group.kind, self.x_m);
            group.kind.remember(memory, stretch_before, stretch, step_s);
        }
        self.line_work_j -= 0.5 * (before_n + self.line_n()) * (self.x_m - before_x_m);
        self.record();
    }

    /// Line force in N.
    pub fn line_n(&self) -> f64 {
        self.line_at_n(self.x_m)
    }

    fn line_at_n(&self, x_m: f64) -> f64 {
        self.launcher.hook.line_stiffness_n_per_m * (x_m - self.line_end_x_m).max(0.0)
    }

    /// Force of all cords in N with the shuttle at `x_m` and the present memory.
    pub fn cords_n(&self, x_m: f64) -> f64 {
        let one_n = |group: &crate::physics::cord::CordGroup, memory| {
            group.kind.tension_n(self.launcher.stretch_at(&group.kind, x_m), 0.0, memory)
        };
        self.launcher.cords.iter().zip(&self.memories).map(|(group, memory)| group.count * one_n(group, memory)).sum()
    }

    /// What friction would have to hold at `x_m`, N, positive toward the exit.
    fn needed_n(&self, x_m: f64) -> f64 {
        self.line_at_n(x_m) + self.weight_along_n() - self.cords_n(x_m)
    }

    fn weight_along_n(&self) -> f64 {
        (self.launcher.shuttle.mass_kg + self.launcher.payload.mass_kg) * self.launcher.gravity_along_mps2()
    }

    /// Where the shuttle comes to stand: where it is while static friction holds it, else where running friction does.
    fn balanced_x_m(&self) -> f64 {
        let needed_n = self.needed_n(self.x_m);
        if needed_n.abs() <= self.launcher.shuttle.friction_static_n {
            return self.x_m;
        }
        let target_n = needed_n.signum() * self.launcher.shuttle.friction_running_n;
        self.x_where_needed_is(target_n)
    }

    /// Secant search; `needed_n` grows with x (line and cords both pull back to a middle).
    fn x_where_needed_is(&self, target_n: f64) -> f64 {
        let span_m = 2.0 * (self.needed_n(self.x_m) - target_n) / self.launcher.hook.line_stiffness_n_per_m;
        let (mut low_m, mut high_m) = (self.x_m - span_m.abs() - 1e-4, self.x_m + span_m.abs() + 1e-4);
        while self.needed_n(low_m) > target_n {
            low_m -= 0.01;
        }
        while self.needed_n(high_m) < target_n && high_m < self.x_m + 1.0 {
            high_m += 0.01;
        }
        for _ in 0..60 {
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
        let (line_n, previous) = (self.line_n(), self.rows.last().copied());
        let v_mps = previous.map_or(0.0, |row| (self.x_m - row.x_m) / (self.t_s - row.t_s).max(1e-9));
        self.rows.push(Row {
            t_s: self.t_s,
            x_m: self.x_m,
            v_mps,
            line_n,
            cords_n,
            anchor_n: cords_n,
            contact_n: self.launcher.payload.mass_kg * self.launcher.gravity_along_mps2(),
            ..Row::default()
        });
    }
}
