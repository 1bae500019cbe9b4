//! One scenario worked out before it is played: the true motion and everything the truth log will say about it.

use crate::launcher::Launcher;
use crate::physics::launch::{self, Held, Instant, LaunchRun};
use crate::physics::stroke::System;
use crate::physics::trajectory::{Row, Trajectory};
use crate::physics::winch::{Leg, Winch};
use crate::scenario::{self, Scenario};

/// What to play, and what to change in it.
#[derive(Debug, Clone, PartialEq)]
pub struct Options {
    pub scenario: String,
    pub seed: u64,
    /// Share of the slow phases' nominal duration: 0.3 draws in 30 % of the time.
    pub pace: f64,
    pub payload_mass_kg: Option<f64>,
    /// Multiplies the force of every cord.
    pub cord_force_factor: Option<f64>,
    /// Added to the hidden zero error of both tension cells.
    pub cell_offset_n: Option<f64>,
}

impl Default for Options {
    fn default() -> Self {
        Self {
            scenario: "nominal".into(),
            seed: 1,
            pace: 1.0,
            payload_mass_kg: None,
            cord_force_factor: None,
            cell_offset_n: None,
        }
    }
}

#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum PrepareError {
    #[error("there is no scenario `{name}`; the rig knows: {known}")]
    NoSuchScenario { name: String, known: String },
    #[error("{what} is {found}, it must be more than {min} and at most {max}")]
    OutOfRange { what: &'static str, found: f64, min: f64, max: f64 },
}

/// A scenario's true course, from its own time zero on.
#[derive(Debug, Clone)]
pub struct Performance {
    pub options: Options,
    pub scenario: Scenario,
    pub trajectory: Trajectory,
    pub phases: Vec<Phase>,
    pub hold: Hold,
    pub launch: LaunchRun,
    /// When the timeline is over.
    pub end_s: f64,
}

/// Start of a slow phase.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Phase {
    pub name: &'static str,
    pub t_s: f64,
    pub x_m: f64,
}

/// The rig at the end of the hold.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Hold {
    pub line_n: f64,
    pub cords_n: f64,
    pub anchor_n: f64,
    pub x_m: f64,
    pub line_n_max: f64,
    pub winch_work_j: f64,
}

impl Performance {
    pub fn launcher(&self) -> &Launcher {
        &self.scenario.launcher
    }

    pub fn instants(&self) -> &[Instant] {
        &self.launch.instants
    }
}

/// Works the scenario out.
///
/// # Errors
/// When there is no such scenario, or an option is out of range.
pub fn prepare(options: &Options) -> Result<Performance, PrepareError> {
    let scenario = adapted(options)?;
    let launcher = &scenario.launcher;
    let mut winch = Winch::at_zero_mark(launcher, scenario.ripple);
    let mut phases = Vec::new();
    let mut leg = |winch: &mut Winch, name, duration_s, speed_mps, stop_x_m| {
        phases.push(Phase { name, t_s: winch.t_s, x_m: winch.x_m });
        winch.run(Leg { duration_s, speed_mps }, stop_x_m);
    };
    let stop_x_m = launcher.zero_mark_x_m - scenario.draw_m;
    let speed_mps = scenario.draw_speed_mps / options.pace;
    leg(&mut winch, "slack", scenario.slack_s * options.pace, 0.0, stop_x_m);
    leg(&mut winch, "winch-back", 3.0 * scenario.draw_m / speed_mps, speed_mps, stop_x_m);
    leg(&mut winch, "hold", scenario.hold_s * options.pace, 0.0, stop_x_m);

    let hold = hold_at_end(&winch);
    let system = System {
        launcher,
        groups: launcher.cords.clone(),
        with_payload: true,
        rail_rest_n: hold.line_n - hold.anchor_n,
    };
    let held = Held { t_s: winch.t_s, x_m: winch.x_m, line_n: hold.line_n, memories: winch.memories.clone() };
    let launch = launch::launch(&system, &held);
    let trajectory = joined(winch.rows, &launch);
    let end_s = trajectory.end_s() + scenario.rest_s * options.pace;
    Ok(Performance { options: options.clone(), trajectory, phases, hold, launch, end_s, scenario })
}

fn hold_at_end(winch: &Winch) -> Hold {
    let cords_n = winch.cords_n(winch.x_m);
    Hold {
        line_n: winch.line_n(),
        cords_n,
        anchor_n: cords_n,
        x_m: winch.x_m,
        line_n_max: winch.rows.iter().map(|row| row.line_n).fold(0.0, f64::max),
        winch_work_j: winch.line_work_j,
    }
}

/// Slow phases, launch, and the rig at rest after it.
fn joined(mut rows: Vec<Row>, launch: &LaunchRun) -> Trajectory {
    rows.pop();
    rows.extend_from_slice(&launch.rows);
    if let Some(last) = rows.last().copied() {
        rows.push(Row { t_s: last.t_s + 0.1, x_m: last.x_m, ..Row::default() });
    }
    Trajectory { rows }
}

fn adapted(options: &Options) -> Result<Scenario, PrepareError> {
    let mut scenario = scenario::by_name(&options.scenario).ok_or_else(|| PrepareError::NoSuchScenario {
        name: options.scenario.clone(),
        known: scenario::all().iter().map(|scenario| scenario.name).collect::<Vec<_>>().join(", "),
    })?;
    check("pace", options.pace, 0.0, 10.0)?;
    if let Some(mass_kg) = options.payload_mass_kg {
        check("payload mass in kg", mass_kg, 0.0, 100.0)?;
        scenario.launcher.payload.mass_kg = mass_kg;
    }
    if let Some(factor) = options.cord_force_factor {
        check("cord force factor", factor, 0.0, 5.0)?;
        scenario.launcher.scale_cords(factor);
    }
    if let Some(offset_n) = options.cell_offset_n {
        check("cell offset in N", offset_n, -1000.0, 1000.0)?;
    }
    Ok(scenario)
}

fn check(what: &'static str, found: f64, min: f64, max: f64) -> Result<(), PrepareError> {
    if found > min && found <= max { Ok(()) } else { Err(PrepareError::OutOfRange { what, found, min, max }) }
}
