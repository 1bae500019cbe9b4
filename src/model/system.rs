//! Equations of motion along the rail.
//!
//! With x the shuttle on the rail, X the rail on the ground, m shuttle and payload, μ the cords' share, M the rail:
//!
//! ```text
//! kinetic energy   m (x' + X')²/2 + μ x'²/2 + M X'²/2
//! (m + μ) x'' + m X''  =  P − s R − m g sin θ − D + T
//! m x'' + (m + M) X''  =  −m g sin θ − D + T − k X − c X'
//! ```
//!
//! P is the pull of cords, gas and tables between rail and shuttle, R the losses between them (s = ±1 opposing motion), D
//! drag and T thrust from outside. μ is constant between events, so no term of its rate arises; where a set's μ begins or
//! ends (wave over, slack) velocities stay and the energy step is named in the energy split.

use super::cord::CordPhase;
use super::gas::GasState;
use super::setup::LaunchSetup;

/// Cord sets one launch may have.
pub const MAX_CORD_SETS: usize = 12;
/// Force tables one launch may have.
pub const MAX_TABLES: usize = 4;
/// Gas sources one launch may have.
pub const MAX_GAS: usize = 2;

/// What changes only at events.
#[derive(Debug, Clone)]
pub struct Phase {
    /// Standing at the start until a gas source has built up enough pressure.
    pub held: bool,
    pub payload_on: bool,
    /// +1 toward the exit, −1 back.
    pub direction: f64,
    pub braking: bool,
    pub cords: [CordPhase; MAX_CORD_SETS],
    /// Between its first and last point.
    pub tables: [bool; MAX_TABLES],
    /// Within the piston's stroke.
    pub gas: [bool; MAX_GAS],
}

/// Where each state stands in the state vector; 0 is x, 1 is x'.
#[derive(Debug, Clone, Copy)]
pub struct Layout {
    /// X and X', where the rail recoils.
    pub recoil: Option<usize>,
    /// Strain at the shuttle of each set that has mass.
    pub wave: [Option<usize>; MAX_CORD_SETS],
    /// Vessel and cylinder of each gas source with a valve.
    pub gas: [Option<usize>; MAX_GAS],
    /// First of the work accounts, where they are kept.
    pub accounts: Option<usize>,
    pub n_used: usize,
}

/// Work accounts, in the order of the state vector; the cord sets' own work follows them.
pub const N_ACCOUNTS: usize = 10;

/// Forces at one state, N, and the accelerations they give.
#[derive(Debug, Clone, Copy, Default)]
pub struct Forces {
    pub cords_n: f64,
    pub tables_n: f64,
    pub gas_n: f64,
    pub friction_n: f64,
    pub load_friction_n: f64,
    pub viscous_n: f64,
    pub along_x_n: f64,
    pub brake_n: f64,
    pub payload_drag_n: f64,
    pub shuttle_drag_n: f64,
    pub thrust_n: f64,
    /// x'', in the rail's frame.
    pub acceleration_mps2: f64,
    /// X''.
    pub rail_acceleration_mps2: f64,
}

impl Forces {
    pub fn ground_acceleration_mps2(&self) -> f64 {
        self.acceleration_mps2 + self.rail_acceleration_mps2
    }
}

/// A setup with the phase it is in.
#[derive(Debug, Clone)]
pub struct System<'a> {
    pub setup: &'a LaunchSetup,
    pub phase: Phase,
    pub layout: Layout,
    /// Gravity along and across the rail, m/s².
    along_mps2: f64,
    across_mps2: f64,
}

/// A state, named.
#[derive(Debug, Clone, Copy)]
pub struct Motion {
    pub x_m: f64,
    pub v_mps: f64,
    pub rail_x_m: f64,
    pub rail_v_mps: f64,
}

impl Layout {
    /// Places for what the setup has; `with_accounts` keeps the energy split.
    pub fn of(setup: &LaunchSetup, with_accounts: bool) -> Self {
        let mut n_used = 2;
        let mut take = |n: usize| {
            n_used += n;
            n_used - n
        };
        let recoil = setup.recoil.map(|_| take(2));
        let mut wave = [None; MAX_CORD_SETS];
        for (slot, set) in wave.iter_mut().zip(&setup.cords) {
            if set.mass_kg > 0.0 {
                *slot = Some(take(1));
            }
        }
        let mut gas = [None; MAX_GAS];
        for (slot, source) in gas.iter_mut().zip(&setup.gas) {
            if source.has_valve() {
                *slot = Some(take(2));
            }
        }
        let accounts = with_accounts.then(|| take(N_ACCOUNTS + setup.cords.len()));
        Self { recoil, wave, gas, accounts, n_used }
    }
}

impl<'a> System<'a> {
    pub fn new(setup: &'a LaunchSetup, phase: Phase, layout: Layout) -> Self {
        let across_mps2 = setup.gravity_mps2 * setup.incline_rad.cos();
        Self { setup, phase, layout, along_mps2: setup.gravity_along_mps2(), across_mps2 }
    }

    #[inline(always)]
    pub fn motion(&self, y: &[f64]) -> Motion {
        let (rail_x_m, rail_v_mps) = self.layout.recoil.map_or((0.0, 0.0), |i| (y[i], y[i + 1]));
        Motion { x_m: y[0], v_mps: y[1], rail_x_m, rail_v_mps }
    }

    pub fn carried_mass_kg(&self) -> f64 {
        self.setup.shuttle_mass_kg + if self.phase.payload_on { self.setup.payload_mass_kg } else { 0.0 }
    }

    /// Rates of every state at a time and state.
    #[inline(always)]
    pub fn rates<const N: usize>(&self, t_s: f64, y: &[f64; N]) -> [f64; N] {
        let mut rates = [0.0; N];
        let motion = self.motion(y);
        self.gas_rates(t_s, y, motion, &mut rates);
        if self.phase.held {
            return rates;
        }
        let mut wave_speeds_mps = [1.0; MAX_CORD_SETS];
        let forces = self.forces(y, motion, &mut wave_speeds_mps);
        rates[0] = motion.v_mps;
        rates[1] = forces.acceleration_mps2;
        if let Some(i) = self.layout.recoil {
            rates[i] = motion.rail_v_mps;
            rates[i + 1] = forces.rail_acceleration_mps2;
        }
        for (s, set) in self.setup.cords.iter().enumerate() {
            if let (Some(i), CordPhase::Wave { .. }) = (self.layout.wave[s], self.phase.cords[s]) {
                rates[i] = -set.travel_ratio * forces.acceleration_mps2 / wave_speeds_mps[s];
            }
        }
        if let Some(first) = self.layout.accounts {
            self.work_rates(y, motion, &forces, &mut rates[first..]);
        }
        rates
    }

    #[inline(always)]
    fn gas_rates(&self, t_s: f64, y: &[f64], motion: Motion, rates: &mut [f64]) {
        for (g, source) in self.setup.gas.iter().enumerate() {
            if let (Some(i), true) = (self.layout.gas[g], self.phase.gas[g]) {
                let state = GasState { vessel_part: y[i], cylinder_pa: y[i + 1] };
                let rate = source.rates(t_s, motion.x_m - self.setup.start_x_m, motion.v_mps, state);
                (rates[i], rates[i + 1]) = (rate.vessel_part, rate.cylinder_pa);
            }
        }
    }

    #[inline(always)]
    fn gas_pull_n(&self, y: &[f64], x_m: f64) -> f64 {
        let mut sum_n = 0.0;
        for (g, source) in self.setup.gas.iter().enumerate() {
            if self.phase.gas[g] {
                let travelled_m = x_m - self.setup.start_x_m;
                let pressure_pa =
                    self.layout.gas[g].map_or_else(|| source.straight_pressure_pa(travelled_m), |i| y[i + 1]);
                sum_n += source.pull_n(pressure_pa);
            }
        }
        sum_n
    }

    fn work_rates(&self, y: &[f64], motion: Motion, forces: &Forces, rates: &mut [f64]) {
        let v = motion.v_mps;
        let ground = v + motion.rail_v_mps;
        let damping = self.setup.recoil.map_or(0.0, |recoil| recoil.damping_n_per_mps);
        let along = v.abs();
        let works = [
            forces.friction_n * along,
            forces.load_friction_n * along,
            forces.viscous_n * along,
            forces.along_x_n * along,
            forces.brake_n * along,
            forces.payload_drag_n * ground,
            forces.shuttle_drag_n * ground,
            damping * motion.rail_v_mps * motion.rail_v_mps,
            forces.thrust_n * ground,
            forces.gas_n * v,
        ];
        rates[..N_ACCOUNTS].copy_from_slice(&works);
        for s in 0..self.setup.cords.len() {
            rates[N_ACCOUNTS + s] = self.pull_n(s, y, motion.x_m) * v;
        }
    }

    /// Forces and accelerations at a state.
    pub fn forces_at(&self, y: &[f64]) -> Forces {
        self.forces(y, self.motion(y), &mut [1.0; MAX_CORD_SETS])
    }

    /// Pull of one cord set at a state.
    #[inline(always)]
    fn pull_n(&self, s: usize, y: &[f64], x_m: f64) -> f64 {
        let set = &self.setup.cords[s];
        match (self.phase.cords[s], self.layout.wave[s]) {
            (CordPhase::Wave { branch, .. }, Some(i)) => set.pull_n(branch, y[i]),
            (CordPhase::Even { branch, side }, _) => side.sign() * set.pull_n(branch, set.elongation_on(side, x_m)),
            (CordPhase::Wave { .. }, None) | (CordPhase::Slack, _) => 0.0,
        }
    }

    /// Pull of all cords, and the mass of those that move evenly with the shuttle; speeds of waves on the way.
    #[inline(always)]
    fn pulls(&self, y: &[f64], x_m: f64, wave_speeds_mps: &mut [f64; MAX_CORD_SETS]) -> (f64, f64) {
        let (mut sum_n, mut cord_mass_kg) = (0.0, 0.0);
        for (s, set) in self.setup.cords.iter().enumerate() {
            match (self.phase.cords[s], self.layout.wave[s]) {
                (CordPhase::Wave { branch, .. }, Some(i)) => {
                    let (pull_n, wave_speed_mps) = set.pull_and_wave_speed(branch, y[i]);
                    sum_n += pull_n;
                    wave_speeds_mps[s] = wave_speed_mps;
                }
                (CordPhase::Even { branch, side }, _) => {
                    sum_n += side.sign() * set.pull_n(branch, set.elongation_on(side, x_m));
                    cord_mass_kg += set.moving_mass_kg();
                }
                (CordPhase::Wave { .. }, None) | (CordPhase::Slack, _) => {}
            }
        }
        (sum_n, cord_mass_kg)
    }

    #[inline(always)]
    fn forces(&self, y: &[f64], motion: Motion, wave_speeds_mps: &mut [f64; MAX_CORD_SETS]) -> Forces {
        let setup = self.setup;
        let Motion { x_m, v_mps, rail_x_m, rail_v_mps } = motion;
        let (cords_n, cord_mass_kg) = self.pulls(y, x_m, wave_speeds_mps);
        let mut tables_n = 0.0;
        for (table, on) in setup.tables.iter().zip(self.phase.tables) {
            tables_n += if on { table.force_n.value(x_m) } else { 0.0 };
        }
        let gas_n = self.gas_pull_n(y, x_m);
        let airspeed_mps = v_mps + rail_v_mps + setup.head_wind_mps;
        let dynamic_pa = 0.5 * setup.air_density_kg_per_m3 * airspeed_mps * airspeed_mps.abs();
        let on = if self.phase.payload_on { 1.0 } else { 0.0 };
        let mass_kg = setup.shuttle_mass_kg + on * setup.payload_mass_kg;
        let payload_drag_n = on * dynamic_pa * setup.payload_drag_area_m2;
        let shuttle_drag_n = dynamic_pa * setup.shuttle_drag_area_m2;
        let thrust_n = match &setup.thrust {
            Some(thrust) if self.phase.payload_on => thrust.value(airspeed_mps),
            _ => 0.0,
        };
        let losses = &setup.losses;
        let across_n = mass_kg * self.across_mps2 - on * dynamic_pa * setup.lift_area_m2;
        let load_friction_n = losses.load_coefficient * across_n.max(0.0) + losses.pull_coefficient * cords_n.abs();
        let viscous_n = losses.viscous_n_per_mps * v_mps.abs();
        let along_x_n = losses.along_x_n.as_ref().map_or(0.0, |curve| curve.value(x_m));
        let brake_n = if self.phase.braking { setup.brake.force_n(x_m, v_mps) } else { 0.0 };
        let opposing_n = losses.friction_n + load_friction_n + viscous_n + along_x_n + brake_n;
        let outside_n = thrust_n - payload_drag_n - shuttle_drag_n - mass_kg * self.along_mps2;
        let along_n = cords_n + tables_n + gas_n - self.phase.direction * opposing_n + outside_n;
        let (acceleration_mps2, rail_acceleration_mps2) = match setup.recoil {
            None => (along_n / (mass_kg + cord_mass_kg), 0.0),
            Some(recoil) => {
                let support_n = outside_n - recoil.stiffness_n_per_m * rail_x_m - recoil.damping_n_per_mps * rail_v_mps;
                let (a, b, d) = (mass_kg + cord_mass_kg, mass_kg, mass_kg + recoil.mass_kg);
                let determinant = a * d - b * b;
                ((along_n * d - b * support_n) / determinant, (a * support_n - b * along_n) / determinant)
            }
        };
        Forces {
            cords_n,
            tables_n,
            gas_n,
            friction_n: losses.friction_n,
            load_friction_n,
            viscous_n,
            along_x_n,
            brake_n,
            payload_drag_n,
            shuttle_drag_n,
            thrust_n,
            acceleration_mps2,
            rail_acceleration_mps2,
        }
    }

    /// Force with which the shuttle pushes the payload, N, at an acceleration in the ground's frame.
    pub fn contact_n(&self, y: &[f64], ground_acceleration_mps2: f64) -> f64 {
        let motion = self.motion(y);
        let airspeed_mps = motion.v_mps + motion.rail_v_mps + self.setup.head_wind_mps;
        let dynamic_pa = 0.5 * self.setup.air_density_kg_per_m3 * airspeed_mps * airspeed_mps.abs();
        let felt_mps2 = ground_acceleration_mps2 + self.along_mps2;
        let thrust_n = self.setup.thrust.as_ref().map_or(0.0, |thrust| thrust.value(airspeed_mps));
        self.setup.payload_mass_kg * felt_mps2 + dynamic_pa * self.setup.payload_drag_area_m2 - thrust_n
    }
}

impl super::setup::Brake {
    #[inline(always)]
    pub fn force_n(&self, x_m: f64, v_mps: f64) -> f64 {
        self.constant_n
            + self.per_metre_n_per_m * (x_m - self.from_x_m).max(0.0)
            + self.per_speed_n_per_mps * v_mps.abs()
    }
}
