//! The truth log: what really happened, and which blocks really left. Field by field in README.md, "Truth log".

use crate::cfc;
use crate::clock::DeviceClock;
use crate::device::{BLOCK_STREAM, BlockTruth, Device};
use crate::edges::{self, Edge, GATES};
use crate::launcher::STANDARD_GRAVITY_MPS2;
use crate::performance::{Performance, greatest};
use crate::physics::course::{Course, Happening, Split};
use crate::sensor::Errors;
use serde::Serialize;

const FORMAT: &str = "virtual-rig-truth";
const FORMAT_VERSION: u32 = 1;
/// Grid on which peaks and filters are worked out.
const PEAK_INTERVAL_S: f64 = 20e-6;
const CLASSES: [(f64, &str); 4] = [(60.0, "cfc60"), (180.0, "cfc180"), (600.0, "cfc600"), (1000.0, "cfc1000")];

#[derive(Debug, Clone, Serialize)]
pub struct Truth {
    pub format: &'static str,
    pub version: u32,
    pub scenario: &'static str,
    pub seed: u64,
    /// `CLOCK_MONOTONIC`, or `virtual` where time was made up.
    pub clock: &'static str,
    /// Host time of the scenario's time zero.
    pub scenario_zero_host_ns: i64,
    pub outcome: &'static str,
    pub events: Vec<Event>,
    pub launch: Option<Launch>,
    pub peaks: Vec<Peak>,
    pub tension: Tension,
    /// Of the launch.
    pub energy: Option<EnergyTruth>,
    pub rig: RigTruth,
    pub faults: Vec<String>,
    pub edges: Vec<EdgeTruth>,
    pub gates: Vec<GateTruth>,
    pub devices: Vec<DeviceTruth>,
}

#[derive(Debug, Clone, Serialize)]
pub struct Event {
    pub kind: &'static str,
    pub host_ns: i64,
    pub t_s: f64,
    /// Shuttle, rail frame.
    pub x_m: f64,
}

#[derive(Debug, Clone, Serialize)]
pub struct Launch {
    /// Payload along the rail at separation, ground frame.
    pub speed_ground_mps: f64,
    /// The same in the rail's frame.
    pub speed_rail_mps: f64,
    pub airspeed_mps: f64,
    pub separation_x_m: f64,
    pub separation_host_ns: i64,
    /// From the release instant.
    pub separation_after_release_s: f64,
    pub greatest_shuttle_speed_rail_mps: f64,
}

/// Greatest acceleration in the power stroke (release to separation), at the shuttle.
#[derive(Debug, Clone, Serialize)]
pub struct Peak {
    /// `unfiltered`, `cfc60`, …
    pub filter: &'static str,
    pub kinematic_g: f64,
    /// a + g sin θ.
    pub specific_g: f64,
    /// Of the specific peak.
    pub host_ns: i64,
    /// Of the specific peak.
    pub x_m: f64,
}

#[derive(Debug, Clone, Serialize)]
pub struct Tension {
    pub hold_line_n: f64,
    pub hold_cords_n: f64,
    pub hold_anchor_n: f64,
    pub hold_x_m: f64,
    pub line_n_max: f64,
}

/// J; see `physics::launch::Split`.
#[derive(Debug, Clone, Serialize)]
pub struct EnergyTruth {
    pub winch_work_j: f64,
    pub cord_elastic_at_release_j: f64,
    pub at_separation: Option<SplitTruth>,
    pub at_end: SplitTruth,
    /// Relative to the elastic energy at release.
    pub closure_error: f64,
}

#[derive(Debug, Clone, Serialize)]
pub struct SplitTruth {
    pub shuttle_kinetic_j: f64,
    pub payload_kinetic_j: f64,
    pub cord_kinetic_j: f64,
    pub cord_elastic_j: f64,
    pub gravity_gained_j: f64,
    pub rail_j: f64,
    pub cords_delivered_j: f64,
    pub cord_internal_loss_j: f64,
    pub gas_delivered_j: f64,
    /// Kinetic, height and elastic energy of a cord that broke.
    pub gone_with_cord_j: f64,
    pub line_j: f64,
    pub friction_j: f64,
    pub brake_j: f64,
    pub shuttle_drag_j: f64,
    pub payload_drag_j: f64,
    pub rail_damper_j: f64,
    pub cord_ground_j: f64,
}

/// The rig as it really was.
#[derive(Debug, Clone, Serialize)]
pub struct RigTruth {
    pub payload_mass_kg: f64,
    pub shuttle_mass_kg: f64,
    pub cord_count: f64,
    pub cord_mass_total_kg: f64,
    pub cord_force_factor: f64,
    pub cell_offset_n: f64,
    pub cord_temperature_c: f64,
    pub cycle: u32,
    pub friction_running_n: f64,
    pub friction_static_n: f64,
    pub gravity_mps2: f64,
    pub incline_rad: f64,
    pub head_wind_mps: f64,
    pub payload_drag_area_m2: f64,
    pub shuttle_drag_area_m2: f64,
    /// Whether masses, cord force, friction, drag, wind and draw were drawn.
    pub varied: bool,
    pub pace: f64,
}

#[derive(Debug, Clone, Serialize)]
pub struct DeviceTruth {
    pub name: &'static str,
    pub device_id: u64,
    /// Of the first boot.
    pub boot_id: u32,
    /// Of the first boot.
    pub clock: DeviceClock,
    pub boots: Vec<BootTruth>,
    pub channels: Vec<ChannelTruth>,
    pub streams: Vec<StreamTruth>,
}

#[derive(Debug, Clone, Serialize)]
pub struct BootTruth {
    pub boot_id: u32,
    pub clock: DeviceClock,
    /// Place of this boot's first block in the stream's list.
    pub first_block: usize,
}

#[derive(Debug, Clone, Serialize)]
pub struct ChannelTruth {
    pub name: &'static str,
    pub scale: f64,
    pub zero_counts: f64,
    pub group_delay_s: f64,
    pub noise_rms: f64,
    pub errors: Errors,
}

#[derive(Debug, Clone, Serialize)]
pub struct StreamTruth {
    pub stream: u8,
    /// `[sequence, first index, number of samples, CRC-32C]` of every block that the port took whole.
    pub blocks: Vec<(u32, u64, u16, u32)>,
    /// Places in `blocks` of those whose bytes the line changed.
    pub touched: Vec<u32>,
    /// Host time when the port took the last byte of each of `blocks`; empty in virtual time.
    pub taken_host_ns: Vec<i64>,
}

/// A digital input's true change.
#[derive(Debug, Clone, Serialize)]
pub struct EdgeTruth {
    pub input: u8,
    pub rising: bool,
    pub host_ns: i64,
}

/// Where a beam gate is, and where the crew believes it is.
#[derive(Debug, Clone, Serialize)]
pub struct GateTruth {
    pub input: u8,
    pub x_m: f64,
    pub measured_x_m: f64,
}

/// A device, the blocks that left it, and which of them the line touched.
#[derive(Debug, Clone, Copy)]
pub struct Played<'a> {
    pub device: &'a Device,
    pub blocks: &'a [BlockTruth],
    pub touched: &'a [u32],
    /// One for each block; none in virtual time, where ports never wait.
    pub taken_ns: &'a [i64],
}

impl Truth {
    /// The log of `performance`, played from `scenario_zero_host_ns` on.
    pub fn of(
        performance: &Performance,
        clock: &'static str,
        scenario_zero_host_ns: i64,
        played: &[Played<'_>],
    ) -> Self {
        let times = Times { zero_ns: scenario_zero_host_ns };
        Self {
            format: FORMAT,
            version: FORMAT_VERSION,
            scenario: performance.scenario.name,
            seed: performance.options.seed,
            clock,
            scenario_zero_host_ns,
            outcome: performance.outcome,
            events: events(performance, times),
            launch: launch(performance, times),
            peaks: peaks(performance, times),
            tension: Tension {
                hold_line_n: performance.hold.line_n,
                hold_cords_n: performance.hold.cords_n,
                hold_anchor_n: performance.hold.anchor_n,
                hold_x_m: performance.hold.x_m,
                line_n_max: performance.hold.line_n_max,
            },
            energy: performance.launch.as_ref().map(|course| energy(performance, course)),
            rig: rig(performance),
            faults: performance.options.faults.iter().map(ToString::to_string).collect(),
            edges: performance.edges.iter().map(|edge| edge_truth(edge, times)).collect(),
            gates: gates(performance.options.seed),
            devices: played.iter().map(device).collect(),
        }
    }
}

#[derive(Clone, Copy)]
struct Times {
    zero_ns: i64,
}

impl Times {
    fn host_ns(self, t_s: f64) -> i64 {
        self.zero_ns + (t_s * 1e9).round() as i64
    }
}

fn events(performance: &Performance, times: Times) -> Vec<Event> {
    let mut events: Vec<Event> = performance
        .phases
        .iter()
        .map(|phase| Event { kind: phase.name, host_ns: times.host_ns(phase.t_s), t_s: phase.t_s, x_m: phase.x_m })
        .collect();
    events.extend(performance.instants.iter().map(|instant| Event {
        kind: instant.what.word(),
        host_ns: times.host_ns(instant.t_s),
        t_s: instant.t_s,
        x_m: instant.row.x_m,
    }));
    if let Some(t_s) = performance.release_s() {
        let x_m = performance.trajectory.at(t_s).x_m;
        events.push(Event { kind: "release", host_ns: times.host_ns(t_s), t_s, x_m });
    }
    events.sort_by(|a, b| a.t_s.total_cmp(&b.t_s));
    events
}

fn edge_truth(edge: &Edge, times: Times) -> EdgeTruth {
    EdgeTruth { input: edge.input, rising: edge.rising, host_ns: times.host_ns(edge.t_s) }
}

fn gates(seed: u64) -> Vec<GateTruth> {
    let places = edges::gate_places(seed);
    GATES.iter().zip(places).map(|(&(input, measured_x_m), x_m)| GateTruth { input, x_m, measured_x_m }).collect()
}

fn launch(performance: &Performance, times: Times) -> Option<Launch> {
    let row = performance.separation()?.row;
    let release_s = performance.release_s()?;
    let rows = &performance.launch.as_ref()?.rows;
    Some(Launch {
        speed_ground_mps: row.payload_v_ground_mps,
        speed_rail_mps: row.payload_v_ground_mps - row.rail_v_mps,
        airspeed_mps: row.payload_v_ground_mps + performance.launcher().head_wind_mps,
        separation_x_m: row.x_m,
        separation_host_ns: times.host_ns(row.t_s),
        separation_after_release_s: row.t_s - release_s,
        greatest_shuttle_speed_rail_mps: greatest(rows, |row| row.v_mps),
    })
}

fn peaks(performance: &Performance, times: Times) -> Vec<Peak> {
    let Some(from_s) = performance.release_s() else { return Vec::new() };
    let to_s = stroke_end_s(performance);
    let trajectory = &performance.trajectory;
    let start_s = from_s - 0.5;
    let kinematic = trajectory.sampled(start_s, to_s + 0.5, PEAK_INTERVAL_S, |row| row.shuttle_a_ground_mps2);
    let window = (0.5 / PEAK_INTERVAL_S) as usize..((to_s - start_s) / PEAK_INTERVAL_S) as usize;
    let along_g = performance.launcher().gravity_along_mps2() / STANDARD_GRAVITY_MPS2;
    let peak = |values: &[f64], filter| {
        let (idx, peak_mps2) = values[window.clone()]
            .iter()
            .enumerate()
            .fold((0, f64::MIN), |best, (idx, value)| if *value > best.1 { (idx, *value) } else { best });
        let t_s = from_s + idx as f64 * PEAK_INTERVAL_S;
        let kinematic_g = peak_mps2 / STANDARD_GRAVITY_MPS2;
        let (specific_g, x_m) = (kinematic_g + along_g, trajectory.at(t_s).x_m);
        Peak { filter, kinematic_g, specific_g, host_ns: times.host_ns(t_s), x_m }
    };
    let mut peaks = vec![peak(&kinematic, "unfiltered")];
    for (class, name) in CLASSES {
        peaks.push(peak(&cfc::filtered(&kinematic, class, 1.0 / PEAK_INTERVAL_S), name));
    }
    peaks
}

/// Separation where there was one, else where the drive ended, else the end of the launch.
fn stroke_end_s(performance: &Performance) -> f64 {
    let course = performance.launch.as_ref();
    let slack_s = course.and_then(|course| course.instant(Happening::CordsSlack)).map(|instant| instant.t_s);
    let separation_s = performance.separation().map(|instant| instant.t_s);
    separation_s.or(slack_s).unwrap_or(performance.end_s)
}

fn energy(performance: &Performance, run: &Course) -> EnergyTruth {
    let split = |split: &Split| SplitTruth {
        shuttle_kinetic_j: split.energy.shuttle_j,
        payload_kinetic_j: split.energy.payload_j,
        cord_kinetic_j: split.energy.cord_kinetic_j,
        cord_elastic_j: split.energy.cord_elastic_j,
        gravity_gained_j: split.energy.gravity_j - run.before.gravity_j,
        rail_j: split.energy.rail_j,
        cords_delivered_j: split.cords_delivered_j,
        cord_internal_loss_j: run.before.cord_elastic_j
            - split.energy.cord_elastic_j
            - split.elastic_gone_j
            - split.cords_delivered_j,
        gas_delivered_j: split.gas_delivered_j,
        gone_with_cord_j: split.gone_with_cord_j + split.elastic_gone_j,
        line_j: split.line_j,
        friction_j: split.friction_j,
        brake_j: split.brake_j,
        shuttle_drag_j: split.shuttle_drag_j,
        payload_drag_j: split.payload_drag_j,
        rail_damper_j: split.rail_damper_j,
        cord_ground_j: split.cord_ground_j,
    };
    EnergyTruth {
        winch_work_j: performance.hold.winch_work_j,
        cord_elastic_at_release_j: run.before.cord_elastic_j,
        at_separation: run.at_separation.as_ref().map(split),
        at_end: split(&run.at_end),
        closure_error: run.energy_error,
    }
}

fn rig(performance: &Performance) -> RigTruth {
    let (launcher, options) = (performance.launcher(), &performance.options);
    RigTruth {
        payload_mass_kg: launcher.payload_mass_kg(),
        shuttle_mass_kg: launcher.shuttle.mass_kg,
        cord_count: launcher.cord_count(),
        cord_mass_total_kg: launcher.cord_mass_kg(),
        cord_force_factor: launcher.cord_force_factor,
        cord_temperature_c: options.cord_temperature_c.unwrap_or(20.0),
        cycle: options.cycle,
        cell_offset_n: options.cell_offset_n.unwrap_or(0.0),
        friction_running_n: launcher.shuttle.friction_running_n,
        friction_static_n: launcher.shuttle.friction_static_n,
        gravity_mps2: launcher.gravity_mps2,
        incline_rad: launcher.incline_rad,
        head_wind_mps: launcher.head_wind_mps,
        payload_drag_area_m2: launcher.payload.map_or(0.0, |payload| payload.drag_area_m2),
        shuttle_drag_area_m2: launcher.shuttle.drag_area_m2,
        varied: options.vary,
        pace: options.pace,
    }
}

fn device(played: &Played<'_>) -> DeviceTruth {
    let device = played.device;
    let boots = device.boots.iter().map(|boot| BootTruth {
        boot_id: boot.boot_id,
        clock: boot.clock,
        first_block: played
            .blocks
            .iter()
            .position(|block| block.boot_id == boot.boot_id)
            .unwrap_or(played.blocks.len()),
    });
    let row = |block: &BlockTruth| (block.sequence, block.first_index, block.n_samples, block.crc);
    let channels = device.sensors.iter().map(|sensor| ChannelTruth {
        name: sensor.spec.name,
        scale: sensor.spec.scale,
        zero_counts: sensor.spec.zero_counts,
        group_delay_s: sensor.spec.group_delay_s(),
        noise_rms: sensor.spec.noise_rms,
        errors: sensor.errors,
    });
    DeviceTruth {
        name: device.spec.name,
        device_id: device.device_id,
        boot_id: device.boots[0].boot_id,
        clock: device.boots[0].clock,
        boots: boots.collect(),
        channels: channels.collect(),
        streams: vec![StreamTruth {
            stream: BLOCK_STREAM,
            blocks: played.blocks.iter().map(row).collect(),
            touched: played.touched.to_vec(),
            taken_host_ns: played.taken_ns.to_vec(),
        }],
    }
}
