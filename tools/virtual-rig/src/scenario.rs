//! Named scenarios: which launcher, what the crew does with it, what goes wrong. Numbers invented, plausible.

use crate::draw::{Draw, Purpose};
use crate::launcher::{Launcher, north_pier};
use crate::physics::gas::GasDrive;
use crate::physics::winch::Ripple;

/// One thing done to the rig, or that happens to it. Times and speeds are at pace 1.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Act {
    /// Nothing moves; the phase's name in the truth log.
    Wait {
        phase: &'static str,
        duration_s: f64,
    },
    /// The drum slows down for the end of the draw, or does not.
    Draw {
        draw_m: f64,
        speed_mps: f64,
        slows: bool,
    },
    LetDown {
        speed_mps: f64,
    },
    /// The hook opens.
    Fire,
    /// The hook lets the line go forward by this much and holds again.
    HookSlips {
        slip_m: f64,
    },
    CordBreaks,
    /// The hook opens and the shuttle does not move.
    OpenHookOnJam,
    /// The line is hooked on again and tightened; the jam is freed.
    TakeUpLoad {
        tension_n: f64,
    },
    Charge {
        duration_s: f64,
    },
    OpenValve,
}

/// A rig and what is done with it.
#[derive(Debug, Clone)]
pub struct Scenario {
    pub name: &'static str,
    pub about: &'static str,
    pub launcher: Launcher,
    pub acts: Vec<Act>,
    pub ripple: Ripple,
    /// Where the shuttle stands at time zero.
    pub start_x_m: f64,
    /// The hook opens by itself, or earlier than planned.
    pub uncommanded: bool,
    /// Range of the shuttle's accelerometer, g.
    pub accelerometer_range_g: f64,
}

const DRAW_MPS: f64 = 0.35;
const LET_DOWN_MPS: f64 = 0.35;
const DRAW_M: f64 = 4.0;

const fn wait(phase: &'static str, duration_s: f64) -> Act {
    Act::Wait { phase, duration_s }
}

const fn draw(draw_m: f64) -> Act {
    Act::Draw { draw_m, speed_mps: DRAW_MPS, slows: true }
}

const LET_DOWN: Act = Act::LetDown { speed_mps: LET_DOWN_MPS };
const SLACK: Act = wait("slack", 3.0);
const HOLD: Act = wait("hold", 5.0);
const REST: Act = wait("rest", 6.0);

fn scenario(name: &'static str, about: &'static str, acts: &[Act]) -> Scenario {
    let launcher = north_pier();
    Scenario {
        name,
        about,
        start_x_m: launcher.zero_mark_x_m,
        launcher,
        acts: acts.to_vec(),
        ripple: Ripple { relative: 0.01, frequency_hz: 3.0 },
        uncommanded: false,
        accelerometer_range_g: 40.0,
    }
}

fn launch_drawn(name: &'static str, about: &'static str, draw_m: f64, change: impl FnOnce(&mut Scenario)) -> Scenario {
    let mut made = scenario(name, about, &[SLACK, draw(draw_m), HOLD, Act::Fire, REST]);
    change(&mut made);
    made
}

fn launch(name: &'static str, about: &'static str, change: impl FnOnce(&mut Launcher)) -> Scenario {
    launch_drawn(name, about, DRAW_M, |made| change(&mut made.launcher))
}

fn set_count(launcher: &mut Launcher, count: f64) {
    for group in &mut launcher.cords {
        group.count = count;
    }
}

/// A mass of iron in the payload's place.
fn set_dummy(launcher: &mut Launcher, mass_kg: f64) {
    if let Some(payload) = &mut launcher.payload {
        (payload.mass_kg, payload.drag_area_m2) = (mass_kg, 0.012);
    }
}

/// Every scenario, in the order of the document. Ageing depends on `cycle` and `seed`.
pub fn all(cycle: u32, seed: u64) -> Vec<Scenario> {
    let mut all = vec![
        launch("nominal", "six cords, survey-8, drawn 4.0 m, held 5 s, released", |_| {}),
        launch("incline-head-wind", "rail at 12°, head wind 6 m/s", |launcher| {
            (launcher.incline_rad, launcher.head_wind_mps) = (12.0_f64.to_radians(), 6.0);
        }),
    ];
    all.extend(staged());
    all.extend(not_launched());
    all.extend(going_wrong());
    all.extend(other_rigs());
    all.push(ageing(cycle, seed));
    all.extend(loss_trials());
    all
}

pub fn by_name(name: &str, cycle: u32, seed: u64) -> Option<Scenario> {
    all(cycle, seed).into_iter().find(|scenario| scenario.name == name)
}

fn staged() -> [Scenario; 3] {
    [
        launch("stage-1", "three cords, dummy mass 4.0 kg", |launcher| {
            set_count(launcher, 3.0);
            set_dummy(launcher, 4.0);
        }),
        launch("stage-2", "five cords, dummy mass 6.2 kg", |launcher| {
            set_count(launcher, 5.0);
            set_dummy(launcher, 6.2);
        }),
        launch("stage-3", "seven cords, survey-8", |launcher| set_count(launcher, 7.0)),
    ]
}

fn not_launched() -> [Scenario; 4] {
    [
        scenario(
            "let-down",
            "drawn with a stop at 2 m, held, let down",
            &[SLACK, draw(2.0), wait("winch-stop", 2.0), draw(DRAW_M), HOLD, LET_DOWN, REST],
        ),
        scenario(
            "hang-fire",
            "the hook opens, the jammed shuttle stays; load taken up again and let down",
            &[
                SLACK,
                draw(DRAW_M),
                HOLD,
                Act::OpenHookOnJam,
                wait("hang-fire", 6.0),
                Act::TakeUpLoad { tension_n: 620.0 },
                LET_DOWN,
                REST,
            ],
        ),
        scenario(
            "hook-slip",
            "in the hold the hook slips 8 mm and holds again; let down",
            &[SLACK, draw(DRAW_M), HOLD, Act::HookSlips { slip_m: 0.008 }, HOLD, LET_DOWN, REST],
        ),
        scenario(
            "cord-failure-in-hold",
            "one of six cords breaks in the hold; let down",
            &[SLACK, draw(DRAW_M), HOLD, Act::CordBreaks, HOLD, LET_DOWN, REST],
        ),
    ]
}

fn going_wrong() -> [Scenario; 6] {
    let mut early = scenario(
        "early-release",
        "the hook opens by itself at 2.6 m of draw, the winch running",
        &[SLACK, Act::Draw { draw_m: 2.6, speed_mps: DRAW_MPS, slows: false }, Act::Fire, REST],
    );
    early.uncommanded = true;
    let payload = |change: fn(&mut crate::launcher::Payload)| {
        move |launcher: &mut Launcher| launcher.payload.iter_mut().for_each(change)
    };
    let mut clipped = launch("clipped-accelerometer", "an accelerometer of ±6 g on the shuttle", |_| {});
    clipped.accelerometer_range_g = 6.0;
    [
        early,
        launch("cord-failure-in-stroke", "one of six cords breaks at x = 1.2 m", |launcher| {
            launcher.cord_breaks_x_m = Some(1.2);
        }),
        launch(
            "payload-left-early",
            "the payload comes off its seat at x = 2.0 m",
            payload(|payload| payload.comes_off_x_m = Some(2.0)),
        ),
        launch(
            "payload-not-separated",
            "the latch never opens, the payload goes into the arrest",
            payload(|payload| payload.latch_opens_x_m = f64::MAX),
        ),
        launch(
            "arrest-overrun",
            "brake pad glazed to 60 N and its damper dry, the shuttle meets the stop",
            |launcher| {
                (launcher.brake.pad_n, launcher.brake.damper_n_s_per_m) = (60.0, 1.0);
            },
        ),
        clipped,
    ]
}

fn other_rigs() -> [Scenario; 5] {
    [
        gas_launcher(),
        launch("soft-rail", "the rail recoils on soft ground", |launcher| {
            (launcher.rail.mass_kg, launcher.rail.stiffness_n_per_m, launcher.rail.damping_n_s_per_m) =
                (140.0, 3.0e4, 500.0);
        }),
        launch("misrigged-count", "five cords where the rig file says six", |launcher| set_count(launcher, 5.0)),
        launch("misrigged-length", "free length 2.5 m where the rig file says 2.7 m", |launcher| {
            for group in &mut launcher.cords {
                group.kind.mass_kg *= 2.5 / group.kind.free_length_m;
                group.kind.free_length_m = 2.5;
            }
        }),
        launch("misrigged-mass", "payload of 7.1 kg where the rig file says 6.2 kg", |launcher| {
            if let Some(payload) = &mut launcher.payload {
                payload.mass_kg = 7.1;
            }
        }),
    ]
}

/// A cylinder of 40 mm bore and 2.8 m stroke on a bottle of 12 l.
fn gas_launcher() -> Scenario {
    let mut made = scenario(
        "gas-launcher",
        "bottle charged to 5.6 bar absolute, valve opened on the hook, released",
        &[
            wait("slack", 3.0),
            Act::Charge { duration_s: 10.0 },
            wait("charged", 3.0),
            Act::OpenValve,
            wait("hold", 4.0),
            Act::Fire,
            REST,
        ],
    );
    made.start_x_m = 0.0;
    made.launcher.cords.clear();
    made.launcher.gas = Some(GasDrive {
        reservoir_m3: 0.012,
        charge_pa: 5.6e5,
        ambient_pa: 101_325.0,
        temperature_k: 293.15,
        polytropic_exponent: 1.25,
        piston_area_m2: 1.2566e-3,
        dead_volume_m3: 2.0e-4,
        stroke_m: 2.8,
        venting_m: 0.05,
        valve_area_m2: 2.0e-4,
        valve_opening_s: 0.6,
        leak_per_s: 4e-4,
        back_pressure_pa_s2_per_m2: 30.0,
    });
    made
}

/// Force lost per cycle, scatter from trial to trial, and the cord that is damaged from a certain trial on.
const AGEING_PER_CYCLE: f64 = 0.004;
const AGEING_SCATTER: f64 = 0.0015;
const DAMAGED_FROM_CYCLE: u32 = 23;
const DAMAGED_FACTOR: f64 = 0.6;

fn ageing(cycle: u32, seed: u64) -> Scenario {
    launch(
        "ageing",
        "trial number --cycle of a series: −0.4 % force a cycle, one cord damaged from 23 on",
        |launcher| {
            let scatter = Draw::new(seed, Purpose::Cycle { cycle }).normal(AGEING_SCATTER);
            launcher.scale_cords((1.0 - AGEING_PER_CYCLE).powi(cycle as i32) * (1.0 + scatter));
            if cycle >= DAMAGED_FROM_CYCLE
                && let Some(group) = launcher.cords.first_mut()
            {
                group.count -= 1.0;
                let mut damaged = group.clone();
                damaged.count = 1.0;
                damaged.kind.law = damaged.kind.law.scaled(DAMAGED_FACTOR);
                launcher.cords.push(damaged);
            }
        },
    )
}

/// The shuttle alone, to measure losses.
fn loss_trials() -> [Scenario; 2] {
    let alone = |made: &mut Scenario| made.launcher.payload = None;
    [
        launch_drawn("free-pull", "the shuttle alone, drawn 2.0 m", 2.0, alone),
        launch_drawn(
            "coast-down",
            "the shuttle alone, drawn 0.45 m, brake withdrawn, runs out by itself",
            0.45,
            |made| {
                alone(made);
                (made.launcher.brake.pad_n, made.launcher.brake.damper_n_s_per_m) = (0.0, 0.0);
            },
        ),
    ]
}
