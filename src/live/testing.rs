//! The invented rig `north-pier` for this room's tests, and a source of captured data for it. Invented data.

use crate::capture::{
    Block, Captured, ChannelDescription, Counts, DeviceDescription, Encoding, StreamDescription, TimeBase,
};
use crate::rig::*;

pub fn north_pier() -> Rig {
    let point = |elongation, tension_n| CordPoint { elongation, tension_n };
    let one_to_one = |coefficients: [f64; 2]| Coefficients {
        zero_counts: 0.0,
        coefficients: coefficients.to_vec(),
        zero_uncertainty: 0.0,
        scale_relative_uncertainty: 0.001,
    };
    let channel = |name: &str, device: &str, role, per_count: f64| Channel {
        name: name.into(),
        device: device.into(),
        device_channel: name.into(),
        role,
        calibration: one_to_one([0.0, per_count]),
        record: None,
    };
    let device = |name: &str| Device {
        name: name.into(),
        port: format!("ports/{name}"),
        baud: 3_000_000,
        serial: SerialSettings::default(),
        protocol: Protocol::Frames,
    };
    Rig {
        name: "north-pier".into(),
        site: Site { latitude_rad: 0.951, altitude_m: 6.0, air_density_kg_per_m3: 1.225, head_wind_mps: 0.0 },
        rail: Rail {
            length_m: 7.0,
            incline_rad: 6.0_f64.to_radians(),
            zero_mark_x_m: 4.0,
            brake_x_m: 5.0,
            brake_force_n: 700.0,
        },
        shuttle: Shuttle { mass_kg: Given::exactly(2.4) },
        payload: Payload { name: "survey-8".into(), mass_kg: Given::exactly(6.2), drag_area_m2: Given::exactly(0.05) },
        cords: Cords {
            count: 6,
            free_length_m: 2.7,
            mass_kg: 0.3,
            travel_ratio: 1.0,
            curve: vec![point(0.0, 0.0), point(0.2, 36.0), point(0.7, 68.0), point(1.48, 118.0), point(1.6, 127.0)],
            force_relative_uncertainty: 0.02,
        },
        losses: Losses { friction_n: Given::exactly(12.0), shuttle_drag_area_m2: Given::exactly(0.02) },
        details: Details::default(),
        limits: Limits { tension_n: 900.0, peak_g: 10.0 },
        plan: crate::rig::Plan {
            draw_m: 4.0,
            launch_speed_min_mps: 15.0,
            launch_speed_max_mps: 19.0,
            slack_tension_n: 15.0,
            tension_band_relative: 0.1,
        },
        devices: vec![device("winch-node"), device("shuttle-node")],
        channels: vec![
            channel("line", "winch-node", Role::ReleaseLineTension, 0.001),
            channel("anchor", "winch-node", Role::CordAnchorTension, 0.001),
            channel("encoder", "shuttle-node", Role::ShuttlePosition, 0.0001),
            channel("accel", "shuttle-node", Role::ShuttleSpecificForce, STANDARD_G_PER_COUNT),
        ],
        invented: true,
        uncalibrated: Vec::new(),
        attached: Vec::new(),
        text: String::new(),
    }
}

const STANDARD_G_PER_COUNT: f64 = 9.806_65 / 800.0;

const RATE_HZ: f64 = 2_000.0;
const TICKS_PER_SAMPLE: u32 = 500;
const BLOCK_N: usize = 20;
/// Host time of the scene's second zero.
pub const ZERO_NS: i64 = 1_000 * 1_000_000_000;

/// What the rig does at one instant of a scene.
#[derive(Debug, Clone, Copy)]
pub struct Instant {
    pub line_n: f64,
    pub anchor_n: f64,
    pub x_m: f64,
    pub specific_force_mps2: f64,
}

/// What becomes of the drawn cords at the end of the hold.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum End {
    Launch,
    LetDown,
    /// The line lets go but the shuttle stays where it is.
    HangFire,
}

/// Every half millisecond of a scene: 2 s slack, winch-back to 4 m until 12 s, hold until 15 s, the end, and rest.
pub fn scene(end: End, force_scale: f64) -> Vec<Instant> {
    let rig = north_pier();
    let plan = super::plan::Plan::new(&rig).unwrap();
    let weight_n = rig.moving_mass_kg() * 9.806_65 * rig.rail.incline_rad.sin();
    let (mut x_m, mut v_mps) = (4.0, 0.0);
    let n = (27.0 * RATE_HZ) as usize;
    (0..n)
        .map(|k| {
            let t_s = k as f64 / RATE_HZ;
            let pull_n = force_scale * plan.pull_n(rig.draw_m(x_m));
            let free = t_s >= 15.0 && end == End::Launch;
            let a_mps2 = if free { free_acceleration(&rig, x_m, v_mps, pull_n, weight_n) } else { 0.0 };
            v_mps = match t_s {
                t if (2.0..12.0).contains(&t) => -0.4,
                _ if free => (v_mps + a_mps2 / RATE_HZ).max(0.0),
                t if t >= 15.0 && end == End::LetDown && x_m < 4.0 => 0.4,
                _ => 0.0,
            };
            x_m += v_mps / RATE_HZ;
            let held = t_s < 15.0 || end == End::LetDown;
            let line_n = if held && x_m < 4.0 { (pull_n - weight_n).max(0.0) } else { 0.0 };
            Instant { line_n, anchor_n: pull_n, x_m, specific_force_mps2: a_mps2 + 1.025 }
        })
        .collect()
}

fn free_acceleration(rig: &Rig, x_m: f64, v_mps: f64, pull_n: f64, weight_n: f64) -> f64 {
    if x_m < 4.0 {
        (pull_n - weight_n - 12.0) / rig.moving_mass_kg()
    } else if v_mps <= 0.0 {
        0.0
    } else {
        let brake_n = if x_m > rig.rail.brake_x_m { 700.0 } else { 12.0 };
        -brake_n / rig.shuttle.mass_kg.value
    }
}

/// Noise of ±1, the same at every run.
fn noise(k: usize, channel: u64) -> f64 {
    let mut state = (k as u64).wrapping_mul(0x9E37_79B9_7F4A_7C15) ^ channel.wrapping_mul(0xD1B5_4A32_D192_ED03);
    state = (state ^ (state >> 29)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
    ((state >> 11) as f64 / (1_u64 << 52) as f64) - 1.0
}

pub fn description(device: &str, channels: [&str; 2]) -> Captured {
    let channel = |name: &str| ChannelDescription {
        name: name.into(),
        quantity: String::new(),
        encoding: Encoding::I32,
        nominal_min: 0.0,
        nominal_max: 0.0,
        group_delay_s: 0.0,
        bandwidth_hz: None,
    };
    Captured::Description(DeviceDescription {
        device_id: 1,
        name: device.into(),
        firmware: String::new(),
        tick_rate_hz: 1e6,
        tick_tolerance_ppm: 50.0,
        boot_id: 1,
        description_id: 1,
        streams: vec![StreamDescription {
            stream: 1,
            ticks_per_sample: TICKS_PER_SAMPLE,
            channels: channels.map(channel).to_vec(),
        }],
        time_base: TimeBase::Ticks,
    })
}

/// The scene's blocks, in order of arrival: (device index, block); noise of ±2 N and ±1 m/s².
pub fn blocks(scene: &[Instant]) -> impl Iterator<Item = (usize, Block)> + '_ {
    scene.chunks(BLOCK_N).enumerate().flat_map(|(b, chunk)| {
        let first = b * BLOCK_N;
        let column = |per_unit: f64, of: &dyn Fn(usize, &Instant) -> f64| {
            let counts = chunk.iter().enumerate().map(|(k, now)| (of(first + k, now) * per_unit) as i32);
            Counts::Integer(counts.collect())
        };
        let winch = vec![
            column(1e3, &|k, now| now.line_n + 2.0 * noise(k, 1)),
            column(1e3, &|k, now| now.anchor_n + 2.0 * noise(k, 2)),
        ];
        let shuttle = vec![
            column(1e4, &|_, now| now.x_m),
            column(1.0 / STANDARD_G_PER_COUNT, &|k, now| now.specific_force_mps2 + noise(k, 3)),
        ];
        [(0, block(first, winch)), (1, block(first, shuttle))]
    })
}

fn block(first: usize, counts: Vec<Counts>) -> Block {
    let first_tick = first as u64 * u64::from(TICKS_PER_SAMPLE);
    let sent_tick = first_tick + (BLOCK_N as u64) * u64::from(TICKS_PER_SAMPLE);
    Block {
        host_ns: ZERO_NS + sent_tick as i64 * 1_000 + 200_000,
        boot_id: 1,
        description_id: 1,
        stream: 1,
        sequence: (first / BLOCK_N) as u32,
        first_index: first as u64,
        first_tick,
        sent_tick,
        n_samples: BLOCK_N as u32,
        overruns: 0,
        crc: 0,
        counts,
    }
}
