//! Trials in closed form for tests: linear cords without mass, constant friction, no drag; sensors with drawn errors.
//!
//! Simple harmonic motion (any mechanics text): with stretch s and ω² = k/m, s(t) = s_e + (s₀ − s_e)·cos ωt.

use std::f64::consts::TAU;

use crate::calibration::Signal;
use crate::rig::local_gravity_mps2;
use crate::rig::{self, Given, Rig, Role};

/// The rehearsal's rig without drag, so that the truth has a closed form.
pub(crate) fn rig() -> Rig {
    let mut rig = rig::testing::north_pier();
    rig.payload.drag_area_m2 = Given::exactly(0.0);
    rig.losses.shuttle_drag_area_m2 = Given::exactly(0.0);
    rig
}

/// Small deterministic generator (xorshift64*, Vigna 2016) with normal deviates by Box and Muller.
pub(crate) struct Noise(u64);

impl Noise {
    pub(crate) fn new(seed: u64) -> Self {
        let mut noise = Self(seed.wrapping_mul(0x9E37_79B9_7F4A_7C15) | 1);
        for _ in 0..8 {
            noise.uniform();
        }
        noise
    }

    pub(crate) fn uniform(&mut self) -> f64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        (self.0.wrapping_mul(0x2545_F491_4F6C_DD1D) >> 11) as f64 / (1_u64 << 53) as f64
    }

    pub(crate) fn normal(&mut self) -> f64 {
        (-2.0 * (1.0 - self.uniform()).ln()).sqrt() * (TAU * self.uniform()).cos()
    }
}

/// How a trial ends.
#[derive(Debug, Clone, Copy, PartialEq)]
pub(crate) enum Ending {
    Launch,
    LetDown,
    /// The record stops this long after the release would have been.
    CutAfter(f64),
    /// Released, but the shuttle sticks.
    HangFire,
}

/// A trial's physical truth.
#[derive(Debug, Clone)]
pub(crate) struct Trial {
    pub rig: Rig,
    pub seed: u64,
    pub stiffness_n_per_m: f64,
    pub payload_kg: f64,
    pub line_offset_n: f64,
    pub draw_m: f64,
    pub ending: Ending,
    pub rate_hz: f64,
}

impl Trial {
    pub(crate) fn nominal(seed: u64) -> Self {
        let rig = rig();
        let payload_kg = rig.payload.mass_kg.value;
        Self {
            rig,
            seed,
            stiffness_n_per_m: 175.0,
            payload_kg,
            line_offset_n: 0.0,
            draw_m: 4.0,
            ending: Ending::Launch,
            rate_hz: 1e4,
        }
    }
}

#[derive(Debug, Clone)]
pub(crate) struct Played {
    pub signals: Vec<Signal>,
    pub release_s: f64,
    pub separation_s: f64,
    pub launch_speed_mps: f64,
    pub hold_tension_n: f64,
    /// Specific force without noise on the accelerometer's own times.
    pub specific_force_mps2: Vec<f64>,
}

/// A stretch of motion under a linear restoring force or a constant one.
#[derive(Debug, Clone, Copy)]
struct Piece {
    from_s: f64,
    x_m: f64,
    v_mps: f64,
    /// Equilibrium x and ω of an oscillation; else a constant acceleration.
    oscillation: Option<(f64, f64)>,
    acceleration_mps2: f64,
}

impl Piece {
    fn at(&self, time_s: f64) -> [f64; 3] {
        let t = time_s - self.from_s;
        match self.oscillation {
            Some((centre_m, omega)) => {
                let (c, s) = ((omega * t).cos(), (omega * t).sin());
                let away = self.x_m - centre_m;
                let x = centre_m + away * c + self.v_mps / omega * s;
                [x, self.v_mps * c - away * omega * s, -omega * omega * (x - centre_m)]
            }
            None => [
                self.x_m + self.v_mps * t + 0.5 * self.acceleration_mps2 * t * t,
                self.v_mps + self.acceleration_mps2 * t,
                self.acceleration_mps2,
            ],
        }
    }

    /// First time at which x is reached, by bisection between two instants.
    fn reaches(&self, x_m: f64, horizon_s: f64) -> f64 {
        let (mut low, mut high) = (self.from_s, self.from_s + horizon_s);
        for _ in 0..80 {
            let middle = 0.5 * (low + high);
            if self.at(middle)[0] < x_m { low = middle } else { high = middle }
        }
        0.5 * (low + high)
    }
}

const WINCH_START_S: f64 = 2.0;
const WINCH_SPEED_MPS: f64 = 0.5;
const HOLD_S: f64 = 3.0;
const REST_S: f64 = 1.5;

/// Plays a trial and measures it with sensors whose errors are drawn from the rig file's uncertainties.
pub(crate) fn play(trial: &Trial) -> Played {
    let mut noise = Noise::new(trial.seed);
    let hold_start_s = WINCH_START_S + trial.draw_m / WINCH_SPEED_MPS;
    let release_s = hold_start_s + HOLD_S + 1e-3 * noise.uniform();
    let motion = Motion::new(trial, release_s);
    let end_s = match trial.ending {
        Ending::CutAfter(after_s) => release_s + after_s,
        Ending::LetDown => release_s + trial.draw_m / WINCH_SPEED_MPS + REST_S,
        Ending::Launch | Ending::HangFire => motion.rest_s + REST_S,
    };
    let clock_s = 2e-5 * noise.normal();
    let times = |offset_s: f64| {
        let n = ((end_s - offset_s) * trial.rate_hz) as usize;
        (0..n).map(|k| offset_s + k as f64 / trial.rate_hz).collect::<Vec<f64>>()
    };
    let winch_times = times(3.1e-5);
    let shuttle_times = times(7.7e-5);
    let tension: Vec<f64> = winch_times.iter().map(|&t| motion.line_n(t)).collect();
    let x: Vec<f64> = shuttle_times.iter().map(|&t| motion.at(t)[0]).collect();
    let specific_force_mps2: Vec<f64> =
        shuttle_times.iter().map(|&t| motion.at(t)[2] + motion.gravity_along_mps2).collect();
    let line = Sensor { role: Role::ReleaseLineTension, noise: 0.3, step: 2.4e-4, clock_s };
    let encoder = Sensor { role: Role::ShuttlePosition, noise: 0.0, step: 1e-4, clock_s: 0.0 };
    let accelerometer = Sensor { role: Role::ShuttleSpecificForce, noise: 0.3, step: 9.80665 / 800.0, clock_s: 0.0 };
    let signals = vec![
        line.measure(trial, &winch_times, &tension, &mut noise),
        encoder.measure(trial, &shuttle_times, &x, &mut noise),
        accelerometer.measure(trial, &shuttle_times, &specific_force_mps2, &mut noise),
    ];
    Played {
        signals,
        release_s,
        separation_s: motion.separation_s,
        launch_speed_mps: motion.at(motion.separation_s)[1],
        hold_tension_n: motion.line_n(release_s - 0.1),
        specific_force_mps2,
    }
}

struct Sensor {
    role: Role,
    noise: f64,
    step: f64,
    clock_s: f64,
}

impl Sensor {
    fn measure(&self, trial: &Trial, times_s: &[f64], truth: &[f64], noise: &mut Noise) -> Signal {
        let channel = trial.rig.channel_with_role(self.role).unwrap();
        let calibration = &channel.calibration;
        let scale = 1.0 + calibration.scale_relative_uncertainty * noise.normal();
        let mut offset = calibration.zero_uncertainty * noise.normal();
        if self.role == Role::ReleaseLineTension {
            offset += trial.line_offset_n;
        }
        let mut indicated =
            |v: &f64| ((v * scale + offset + self.noise * noise.normal()) / self.step).round() * self.step;
        Signal {
            name: channel.name.clone(),
            role: self.role,
            time_s: times_s.iter().map(|t| t + self.clock_s).collect(),
            value: truth.iter().map(&mut indicated).collect(),
            zero_uncertainty: calibration.zero_uncertainty,
            scale_relative_uncertainty: calibration.scale_relative_uncertainty,
            time_uncertainty_s: 2e-5,
            nominal_rate_hz: trial.rate_hz,
            bandwidth_hz: Some(3_000.0),
            resolution: self.step,
            range: None,
        }
    }
}

struct Motion {
    trial: Trial,
    pieces: Vec<Piece>,
    release_s: f64,
    separation_s: f64,
    rest_s: f64,
    gravity_along_mps2: f64,
}

impl Motion {
    fn new(trial: &Trial, release_s: f64) -> Self {
        let rig = &trial.rig;
        let gravity_along_mps2 =
            local_gravity_mps2(rig.site.latitude_rad, rig.site.altitude_m) * rig.rail.incline_rad.sin();
        let (shuttle_kg, k, friction_n) =
            (rig.shuttle.mass_kg.value, trial.stiffness_n_per_m, rig.losses.friction_n.value);
        let mark_m = rig.rail.zero_mark_x_m;
        let oscillation = |mass_kg: f64| {
            let slack_m = (friction_n + mass_kg * gravity_along_mps2) / k;
            Some((mark_m - slack_m, (k / mass_kg).sqrt()))
        };
        let next = |piece: &Piece, at_s: f64, oscillation: Option<(f64, f64)>, acceleration_mps2: f64| {
            let [x_m, v_mps, _] = piece.at(at_s);
            Piece { from_s: at_s, x_m, v_mps, oscillation, acceleration_mps2 }
        };
        let still = Piece {
            from_s: release_s,
            x_m: mark_m - trial.draw_m,
            v_mps: 0.0,
            oscillation: None,
            acceleration_mps2: 0.0,
        };
        let pushed = next(&still, release_s, oscillation(shuttle_kg + trial.payload_kg), 0.0);
        // Contact force zero: a = −g sin θ, so cord force = friction.
        let separation_s = pushed.reaches(mark_m - friction_n / k, 1.0);
        let alone = next(&pushed, separation_s, oscillation(shuttle_kg), 0.0);
        let slack_s = alone.reaches(mark_m, 0.05);
        let coasting = next(&alone, slack_s, None, -friction_n / shuttle_kg - gravity_along_mps2);
        let brake_s = coasting.reaches(rig.rail.brake_x_m, 0.5);
        let braking =
            next(&coasting, brake_s, None, -(friction_n + rig.rail.brake_force_n) / shuttle_kg - gravity_along_mps2);
        let rest_s = brake_s - braking.v_mps / braking.acceleration_mps2;
        let resting =
            Piece { from_s: rest_s, x_m: braking.at(rest_s)[0], v_mps: 0.0, oscillation: None, acceleration_mps2: 0.0 };
        let moving = vec![pushed, alone, coasting, braking, resting];
        let pieces =
            if trial.ending == Ending::HangFire || trial.ending == Ending::LetDown { Vec::new() } else { moving };
        Self { trial: trial.clone(), pieces, release_s, separation_s, rest_s, gravity_along_mps2 }
    }

    fn at(&self, time_s: f64) -> [f64; 3] {
        if let Some(piece) = self.pieces.iter().rev().find(|piece| time_s >= piece.from_s) {
            return piece.at(time_s);
        }
        let mark_m = self.trial.rig.rail.zero_mark_x_m;
        let back_m = self.trial.draw_m.min(((time_s - WINCH_START_S) * WINCH_SPEED_MPS).max(0.0));
        let forward_m = if self.trial.ending == Ending::LetDown {
            (time_s - self.release_s).max(0.0) * WINCH_SPEED_MPS
        } else {
            0.0
        };
        [mark_m - (back_m - forward_m).max(0.0), 0.0, 0.0]
    }

    fn line_n(&self, time_s: f64) -> f64 {
        if time_s >= self.release_s && self.trial.ending != Ending::LetDown {
            return 0.0;
        }
        let mass_kg = self.trial.rig.shuttle.mass_kg.value + self.trial.payload_kg;
        let draw_m = self.trial.rig.rail.zero_mark_x_m - self.at(time_s)[0];
        (self.trial.stiffness_n_per_m * draw_m - mass_kg * self.gravity_along_mps2).max(0.0)
    }
}
