//! Where a launch's energy goes, every term named, and how well the terms close.

use super::cord::{Branch, CordPhase, Side};
use super::event::{Event, EventKind};
use super::setup::LaunchSetup;
use super::system::{Layout, MAX_CORD_SETS, Motion, N_ACCOUNTS};

/// Energy from release to one instant, in joules. Sources: `stored_j`, `tables_j`, `gas_j`, `thrust_j`; all others are uses.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct EnergySplit {
    /// In the cords at release, as far as they give it back.
    pub stored_j: f64,
    pub tables_j: f64,
    /// Work of the pistons on the shuttle.
    pub gas_j: f64,
    pub thrust_j: f64,
    /// Payload, at this instant or when it left.
    pub payload_kinetic_j: f64,
    pub shuttle_kinetic_j: f64,
    /// Cords that still pull, at this instant.
    pub cords_kinetic_j: f64,
    /// Flew on with cords that came slack.
    pub cords_left_j: f64,
    /// Of the strain wave, not carried over to the evenly strained picture.
    pub wave_left_j: f64,
    pub still_stored_j: f64,
    /// Lost between loading and unloading of cords that extended again after release.
    pub hysteresis_j: f64,
    /// Gained against gravity.
    pub potential_j: f64,
    pub friction_j: f64,
    pub load_friction_j: f64,
    pub viscous_j: f64,
    pub along_x_j: f64,
    pub brake_j: f64,
    pub payload_drag_j: f64,
    pub shuttle_drag_j: f64,
    pub recoil_damping_j: f64,
    /// Motion and strain of the rail on its support.
    pub recoil_j: f64,
    /// Sources less uses: what the integration missed.
    pub closure_j: f64,
}

const N_SOURCES: usize = 4;
const N_USES: usize = 17;

impl EnergySplit {
    pub(super) const N_TERMS: usize = N_SOURCES + N_USES;

    /// Every source, then every use, with its name.
    pub(super) fn terms(&self) -> impl Iterator<Item = (&'static str, f64)> + use<> {
        self.sources().into_iter().chain(self.uses())
    }

    /// Every use with its name.
    pub fn uses(&self) -> [(&'static str, f64); N_USES] {
        [
            ("payload kinetic", self.payload_kinetic_j),
            ("shuttle kinetic", self.shuttle_kinetic_j),
            ("cords kinetic", self.cords_kinetic_j),
            ("left with slack cords", self.cords_left_j),
            ("left in the strain wave", self.wave_left_j),
            ("still stored", self.still_stored_j),
            ("hysteresis", self.hysteresis_j),
            ("height", self.potential_j),
            ("friction", self.friction_j),
            ("load friction", self.load_friction_j),
            ("viscous loss", self.viscous_j),
            ("loss along x", self.along_x_j),
            ("brake", self.brake_j),
            ("payload drag", self.payload_drag_j),
            ("shuttle drag", self.shuttle_drag_j),
            ("recoil damping", self.recoil_damping_j),
            ("recoil", self.recoil_j),
        ]
    }

    /// Every source with its name.
    pub fn sources(&self) -> [(&'static str, f64); N_SOURCES] {
        [
            ("from cords", self.stored_j),
            ("from gas", self.gas_j),
            ("from tables", self.tables_j),
            ("from thrust", self.thrust_j),
        ]
    }

    pub fn sources_j(&self) -> f64 {
        self.stored_j + self.tables_j + self.gas_j + self.thrust_j
    }
}

/// What the cords and tables can give from the start, J: the scale of the energy tolerances.
pub fn available_j(setup: &LaunchSetup) -> f64 {
    let tables_j: f64 = setup.tables.iter().map(|table| table.force_n.integral(table.force_n.last()).abs()).sum();
    let gas_j: f64 =
        setup.gas.iter().map(|source| source.pull_n(source.release_pressure_pa()) * source.travel_m()).sum();
    stored_j(setup) + tables_j + gas_j.abs()
}

/// Energy in the cords at the start, J.
pub fn stored_j(setup: &LaunchSetup) -> f64 {
    setup.cords.iter().map(|set| set.stored_j(set.elongation(setup.start_x_m))).sum()
}

fn motion(layout: &Layout, y: &[f64]) -> Motion {
    let (rail_x_m, rail_v_mps) = layout.recoil.map_or((0.0, 0.0), |i| (y[i], y[i + 1]));
    Motion { x_m: y[0], v_mps: y[1], rail_x_m, rail_v_mps }
}

/// Split at the last of `events`, whose states are `states`.
pub fn split<const N: usize>(
    setup: &LaunchSetup,
    layout: &Layout,
    events: &[Event],
    states: &[[f64; N]],
    first_cords: &[CordPhase; MAX_CORD_SETS],
) -> EnergySplit {
    let (Some(first), Some(last), Some(accounts)) = (states.first(), states.last(), layout.accounts) else {
        return EnergySplit::default();
    };
    let mut split = EnergySplit { stored_j: stored_j(setup), ..EnergySplit::default() };
    let cords = follow_cords(setup, accounts, events, states, first_cords, &mut split);
    let (start, end) = (motion(layout, first), motion(layout, last));
    let payload_end = events
        .iter()
        .position(|event| event.kind == EventKind::Separation)
        .map_or(end, |index| motion(layout, &states[index]));
    bodies(setup, start, end, payload_end, &mut split);
    standing_cords(setup, accounts, &cords, last, &mut split);
    let work = &last[accounts..accounts + N_ACCOUNTS];
    [
        split.friction_j,
        split.load_friction_j,
        split.viscous_j,
        split.along_x_j,
        split.brake_j,
        split.payload_drag_j,
        split.shuttle_drag_j,
        split.recoil_damping_j,
        split.thrust_j,
        split.gas_j,
    ] = [work[0], work[1], work[2], work[3], work[4], work[5], work[6], work[7], work[8], work[9]];
    for table in &setup.tables {
        let inside = |x_m: f64| x_m.clamp(table.force_n.first(), table.force_n.last());
        split.tables_j += table.force_n.integral(inside(end.x_m)) - table.force_n.integral(inside(start.x_m));
    }
    split.closure_j = split.sources_j() - split.uses().iter().map(|(_, energy_j)| energy_j).sum::<f64>();
    split
}

/// Goes through the events and books what cords keep when their picture changes; returns the phases at the end.
fn follow_cords<const N: usize>(
    setup: &LaunchSetup,
    accounts: usize,
    events: &[Event],
    states: &[[f64; N]],
    first_cords: &[CordPhase; MAX_CORD_SETS],
    split: &mut EnergySplit,
) -> [CordPhase; MAX_CORD_SETS] {
    let mut cords = *first_cords;
    for (event, y) in events.iter().zip(states) {
        match event.kind {
            EventKind::WaveOver { set } => {
                let even = released_phase(setup, set);
                split.wave_left_j += wave_energy_j(setup, accounts, set, y) - even_energy_j(setup, set, even, y);
                cords[set] = even;
            }
            EventKind::CordsSlack { set } => {
                match cords[set] {
                    CordPhase::Wave { .. } => split.wave_left_j += wave_energy_j(setup, accounts, set, y),
                    _ => split.cords_left_j += 0.5 * setup.cords[set].moving_mass_kg() * y[1] * y[1],
                }
                cords[set] = CordPhase::Slack;
            }
            EventKind::CordsTaut { set } => {
                split.cords_left_j -= 0.5 * setup.cords[set].moving_mass_kg() * y[1] * y[1];
                let drawn = setup.cords[set].elongation(y[0]) > -1e-9;
                let side = if drawn { Side::Drawn } else { Side::Beyond };
                cords[set] = CordPhase::Even { branch: Branch::Loading, side };
            }
            EventKind::Reversal => turn(setup, y, &mut cords, split),
            _ => {}
        }
    }
    cords
}

fn released_phase(setup: &LaunchSetup, set: usize) -> CordPhase {
    let cords = &setup.cords[set];
    CordPhase::Even { branch: cords.released(cords.elongation(setup.start_x_m)), side: Side::Drawn }
}

/// At a reversal each set that pulls goes to its other branch: what the new one does not give back is lost, or, turning
/// from the unloading branch outward, had been given too much of.
fn turn(setup: &LaunchSetup, y: &[f64], cords: &mut [CordPhase; MAX_CORD_SETS], split: &mut EnergySplit) {
    for (set, phase) in setup.cords.iter().zip(cords) {
        if let CordPhase::Even { branch, side } = phase {
            let at = set.elongation_on(*side, y[0]);
            let turned = match branch {
                Branch::Loading => set.turned(at),
                Branch::Unloading { .. } => Branch::Loading,
            };
            split.hysteresis_j += set.work_j(*branch, at) - set.work_j(turned, at);
            *branch = turned;
        }
    }
}

/// Energy that a set which was released has not given yet.
fn wave_energy_j(setup: &LaunchSetup, accounts: usize, set: usize, y: &[f64]) -> f64 {
    let cords = &setup.cords[set];
    cords.stored_j(cords.elongation(setup.start_x_m)) - y[accounts + N_ACCOUNTS + set]
}

/// Energy of an evenly strained set.
fn even_energy_j(setup: &LaunchSetup, set: usize, phase: CordPhase, y: &[f64]) -> f64 {
    let cords = &setup.cords[set];
    let CordPhase::Even { branch, side } = phase else { return 0.0 };
    cords.work_j(branch, cords.elongation_on(side, y[0])) + 0.5 * cords.moving_mass_kg() * y[1] * y[1]
}

fn standing_cords(
    setup: &LaunchSetup,
    accounts: usize,
    cords: &[CordPhase; MAX_CORD_SETS],
    y: &[f64],
    split: &mut EnergySplit,
) {
    for (s, set) in setup.cords.iter().enumerate() {
        match cords[s] {
            CordPhase::Slack => {}
            CordPhase::Wave { .. } => split.still_stored_j += wave_energy_j(setup, accounts, s, y),
            CordPhase::Even { .. } => {
                let kinetic_j = 0.5 * set.moving_mass_kg() * y[1] * y[1];
                split.still_stored_j += even_energy_j(setup, s, cords[s], y) - kinetic_j;
                split.cords_kinetic_j += kinetic_j;
            }
        }
    }
}

fn bodies(setup: &LaunchSetup, start: Motion, end: Motion, payload_end: Motion, split: &mut EnergySplit) {
    let ground = |motion: Motion| motion.v_mps + motion.rail_v_mps;
    let path = |motion: Motion| motion.x_m + motion.rail_x_m - start.x_m - start.rail_x_m;
    split.payload_kinetic_j = 0.5 * setup.payload_mass_kg * ground(payload_end).powi(2);
    split.shuttle_kinetic_j = 0.5 * setup.shuttle_mass_kg * ground(end).powi(2);
    split.potential_j =
        setup.gravity_along_mps2() * (setup.payload_mass_kg * path(payload_end) + setup.shuttle_mass_kg * path(end));
    if let Some(recoil) = setup.recoil {
        split.recoil_j = 0.5 * recoil.mass_kg * end.rail_v_mps.powi(2)
            + 0.5 * recoil.stiffness_n_per_m * (end.rail_x_m.powi(2) - start.rail_x_m.powi(2));
    }
}
