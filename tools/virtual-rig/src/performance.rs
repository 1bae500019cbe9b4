//! One scenario worked out before it is played: the true motion and everything the truth log will say about it.

use crate::device::catalogue::{self, DeviceSpec, SensorSet};
use crate::draw::{Draw, Purpose};
use crate::edges::{self, Edge};
use crate::faults::Fault;
use crate::launcher::Launcher;
use crate::physics::course::{Course, Happening, Instant};
use crate::physics::launch::{self, STEP_S, Start};
use crate::physics::stroke::System;
use crate::physics::trajectory::{Row, Trajectory};
use crate::physics::winch::{Leg, Winch};
use crate::scenario::{self, Act, Scenario};

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
    /// Added to the hidden zero error of every tension cell.
    pub cell_offset_n: Option<f64>,
    /// Of the cords; 20 °C when not given.
    pub cord_temperature_c: Option<f64>,
    /// Trial number in a series; scenario `ageing` depends on it.
    pub cycle: u32,
    pub sensors: SensorSet,
    /// Draws masses, cord force, friction, drag, wind and draw about their nominal values, as no rig is quite what its
    /// file says.
    pub vary: bool,
    pub faults: Vec<Fault>,
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
            cord_temperature_c: None,
            cycle: 0,
            sensors: SensorSet::Basic,
            vary: false,
            faults: Vec::new(),
        }
    }
}

#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum PrepareError {
    #[error("there is no scenario `{name}`; the rig knows: {known}")]
    NoSuchScenario { name: String, known: String },
    #[error("a fault names device `{name}`, which is not there; the rig has {known}")]
    NoSuchDevice { name: String, known: String },
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
    /// Everything located in time, in its order.
    pub instants: Vec<Instant>,
    /// At the end of the first hold.
    pub hold: Hold,
    pub launch: Option<Course>,
    pub outcome: &'static str,
    pub devices: Vec<DeviceSpec>,
    pub edges: Vec<Edge>,
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

/// The rig when it was drawn.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
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

    /// The instant at which payload and shuttle parted, however it came.
    pub fn separation(&self) -> Option<&Instant> {
        let course = self.launch.as_ref()?;
        course.instant(Happening::Separation).or_else(|| course.instant(Happening::PayloadOff))
    }

    /// The release instant: the line's tension falls below half its value before the hook opened.
    pub fn release_s(&self) -> Option<f64> {
        let rows = &self.launch.as_ref()?.rows;
        let half_n = 0.5 * rows.first()?.line_n;
        let after = rows.iter().position(|row| row.line_n < half_n)?;
        let (before, after) = (rows.get(after.checked_sub(1)?)?, rows.get(after)?);
        let share = (before.line_n - half_n) / (before.line_n - after.line_n);
        Some(before.t_s + share * (after.t_s - before.t_s))
    }
}

/// Works the scenario out.
///
/// # Errors
/// When there is no such scenario, or an option is out of range.
pub fn prepare(options: &Options) -> Result<Performance, PrepareError> {
    prepare_changed(options, |_| {})
}

/// Works a scenario out that `change` has changed further, after what the options say: rigs that no scenario has.
///
/// # Errors
/// As [`prepare`].
pub fn prepare_changed(options: &Options, change: impl FnOnce(&mut Scenario)) -> Result<Performance, PrepareError> {
    let mut scenario = adapted(options)?;
    change(&mut scenario);
    let mut stage = Stage {
        winch: Winch::at(&scenario.launcher, scenario.start_x_m, scenario.ripple, options.pace),
        pace: options.pace,
        phases: Vec::new(),
        instants: Vec::new(),
        hold: None,
        launch: None,
    };
    for act in &scenario.acts {
        stage.play(*act);
    }
    let outcome = outcome(&scenario, &stage);
    let line_n_max = stage.winch.rows.iter().map(|row| row.line_n).fold(0.0, f64::max);
    let hold = Hold { line_n_max, ..stage.hold.unwrap_or_default() };
    let end_s = stage.winch.t_s;
    let mut performance = Performance {
        options: options.clone(),
        devices: catalogue::devices(options.sensors, scenario.launcher.gas.is_some()),
        edges: Vec::new(),
        trajectory: Trajectory { rows: stage.winch.rows },
        phases: stage.phases,
        instants: stage.instants,
        hold,
        launch: stage.launch,
        outcome,
        end_s,
        scenario,
    };
    performance.edges = edges::edges(&performance.trajectory, performance.release_s(), options.seed);
    check_faults(&performance)?;
    Ok(performance)
}

fn check_faults(performance: &Performance) -> Result<(), PrepareError> {
    let known = |name: &str| performance.devices.iter().any(|device| device.name == name);
    let named = performance.options.faults.iter().filter_map(|fault| fault.device.as_deref());
    match named.into_iter().find(|name| !known(name)) {
        None => Ok(()),
        Some(name) => {
            let known = performance.devices.iter().map(|device| device.name).collect::<Vec<_>>().join(", ");
            Err(PrepareError::NoSuchDevice { name: name.into(), known })
        }
    }
}

/// A scenario being worked out.
struct Stage {
    winch: Winch,
    pace: f64,
    phases: Vec<Phase>,
    instants: Vec<Instant>,
    hold: Option<Hold>,
    launch: Option<Course>,
}

impl Stage {
    fn play(&mut self, act: Act) {
        let pace = self.pace;
        match act {
            Act::Wait { phase, duration_s } => {
                self.begin(phase);
                self.winch.run(Leg::Wait { duration_s: duration_s * pace });
            }
            Act::Draw { draw_m, speed_mps, slows } => {
                self.begin("winch-back");
                let stop_x_m = self.winch.launcher.zero_mark_x_m - draw_m;
                self.winch.run(Leg::Draw { speed_mps: speed_mps / pace, stop_x_m, slows });
            }
            Act::LetDown { speed_mps } => {
                self.note_hold();
                self.begin("let-down");
                self.winch.run(Leg::LetDown { speed_mps: speed_mps / pace });
            }
            Act::Charge { duration_s } => {
                self.begin("charging");
                self.winch.run(Leg::Charge { duration_s: duration_s * pace });
            }
            Act::OpenValve => self.winch.open_valve(),
            Act::TakeUpLoad { tension_n } => {
                self.begin("take-up");
                self.winch.hook_again();
                self.winch.run(Leg::Tighten { speed_mps: 0.01 / pace, tension_n });
                self.winch.free_jam();
            }
            Act::CordBreaks => {
                self.note_hold();
                self.winch.break_cord();
                self.note(Happening::CordBreaks);
            }
            Act::OpenHookOnJam => {
                self.note_hold();
                self.winch.open_hook_on_jam();
                self.note(Happening::HookOpens);
            }
            Act::HookSlips { slip_m } => self.slip(slip_m),
            Act::Fire => self.fire(),
        }
    }

    fn begin(&mut self, name: &'static str) {
        self.phases.push(Phase { name, t_s: self.winch.t_s, x_m: self.winch.x_m });
    }

    fn note(&mut self, what: Happening) {
        let row = self.winch.rows.last().copied().unwrap_or_default();
        self.instants.push(Instant { t_s: self.winch.t_s, what, row });
    }

    fn note_hold(&mut self) {
        let winch = &self.winch;
        let cords_n = winch.cords_n(winch.x_m);
        self.hold.get_or_insert(Hold {
            line_n: winch.line_n(),
            cords_n,
            anchor_n: cords_n,
            x_m: winch.x_m,
            line_n_max: 0.0,
            winch_work_j: winch.line_work_j,
        });
    }

    /// The rig as it stands, ready for anything fast. The rail's rest takes the forces that balance in the hold.
    fn system(&self) -> System {
        let winch = &self.winch;
        let gas_n = winch.launcher.gas.map_or(0.0, |drive| drive.force_n(&winch.gas, winch.x_m, 0.0));
        let rail_rest_n = winch.line_n() - winch.cords_n(winch.x_m) - gas_n;
        System { launcher: winch.launcher.clone(), rail_rest_n, step_s: STEP_S }
    }

    fn slip(&mut self, slip_m: f64) {
        self.note_hold();
        let line_end_x_m = self.winch.line_end_x_m + slip_m;
        let course = launch::launch(self.system(), &self.winch.held(), Start::HookSlips { line_end_x_m });
        self.winch.resume(&course, Some(line_end_x_m));
        self.instants.extend(course.instants.iter().filter(|instant| instant.what == Happening::HookSlips));
    }

    fn fire(&mut self) {
        self.note_hold();
        let course = launch::launch(self.system(), &self.winch.held(), Start::HookOpens);
        self.winch.resume(&course, None);
        self.instants.extend_from_slice(&course.instants);
        self.launch = Some(course);
    }
}

fn outcome(scenario: &Scenario, stage: &Stage) -> &'static str {
    let seen = |what| stage.instants.iter().any(|instant: &Instant| instant.what == what);
    let Some(course) = &stage.launch else {
        return match () {
            () if seen(Happening::CordBreaks) => "cord failure before release",
            () if seen(Happening::HookOpens) => "hang-fire",
            () if seen(Happening::HookSlips) => "hook slip",
            () => "let-down",
        };
    };
    match () {
        () if scenario.uncommanded => "early release",
        () if seen(Happening::CordBreaks) => "cord failure in the stroke",
        () if seen(Happening::PayloadOff) => "payload left early",
        () if scenario.launcher.payload.is_none() => "shuttle alone",
        () if course.at_separation.is_none() => "payload not separated",
        () if seen(Happening::StopReached) => "arrest overrun",
        () => "launched",
    }
}

fn adapted(options: &Options) -> Result<Scenario, PrepareError> {
    let known = || scenario::all(0, 0).iter().map(|scenario| scenario.name).collect::<Vec<_>>().join(", ");
    let mut scenario = scenario::by_name(&options.scenario, options.cycle, options.seed)
        .ok_or_else(|| PrepareError::NoSuchScenario { name: options.scenario.clone(), known: known() })?;
    let launcher = &mut scenario.launcher;
    check("pace", options.pace, 0.0, 10.0)?;
    if options.vary {
        vary(launcher, &mut scenario.acts, options.seed);
    }
    if let Some(mass_kg) = options.payload_mass_kg {
        check("payload mass in kg", mass_kg, 0.0, 100.0)?;
        launcher.payload.iter_mut().for_each(|payload| payload.mass_kg = mass_kg);
    }
    if let Some(factor) = options.cord_force_factor {
        check("cord force factor", factor, 0.0, 5.0)?;
        launcher.scale_cords(factor);
    }
    if let Some(temperature_c) = options.cord_temperature_c {
        check("cord temperature in °C", temperature_c, -40.0, 80.0)?;
        launcher.set_cord_temperature(temperature_c + 273.15);
    }
    if let Some(offset_n) = options.cell_offset_n {
        check("cell offset in N", offset_n, -1000.0, 1000.0)?;
    }
    Ok(scenario)
}

/// Standard deviations of what [`Options::vary`] draws.
const VARY_PAYLOAD_KG: f64 = 0.010;
const VARY_SHUTTLE_KG: f64 = 0.005;
const VARY_CORD_FORCE: f64 = 0.005;
const VARY_FRICTION_N: f64 = 0.8;
const VARY_DRAG: f64 = 0.05;
const VARY_WIND_MPS: f64 = 0.3;
const VARY_DRAW_M: f64 = 0.005;

fn vary(launcher: &mut Launcher, acts: &mut [Act], seed: u64) {
    let mut draw = Draw::new(seed, Purpose::Rig);
    launcher.shuttle.mass_kg += draw.normal(VARY_SHUTTLE_KG);
    let friction_n = draw.normal_within(VARY_FRICTION_N, 4.0);
    launcher.shuttle.friction_running_n += friction_n;
    launcher.shuttle.friction_static_n += friction_n;
    launcher.shuttle.drag_area_m2 *= 1.0 + draw.normal(VARY_DRAG);
    launcher.head_wind_mps += draw.normal(VARY_WIND_MPS);
    launcher.scale_cords(1.0 + draw.normal(VARY_CORD_FORCE));
    let (payload_kg, payload_drag) = (draw.normal(VARY_PAYLOAD_KG), 1.0 + draw.normal(VARY_DRAG));
    if let Some(payload) = &mut launcher.payload {
        payload.mass_kg += payload_kg;
        payload.drag_area_m2 *= payload_drag;
    }
    for act in acts {
        if let Act::Draw { draw_m, .. } = act {
            *draw_m += draw.normal(VARY_DRAW_M);
        }
    }
}

fn check(what: &'static str, found: f64, min: f64, max: f64) -> Result<(), PrepareError> {
    if found > min && found <= max { Ok(()) } else { Err(PrepareError::OutOfRange { what, found, min, max }) }
}

/// Largest value of `quantity` over the rows of a launch.
pub fn greatest(rows: &[Row], quantity: impl Fn(&Row) -> f64) -> f64 {
    rows.iter().map(quantity).fold(f64::MIN, f64::max)
}
