//! From a rig file to a launch: as planned, or as drawn and measured.

use super::cord::CordSet;
use super::curve::Curve;
use super::error::ModelError;
use super::setup::{ACCURATE, Brake, LaunchSetup, RailLosses};
use super::surroundings::local_gravity_mps2;
use crate::rig::Rig;

impl LaunchSetup {
    /// The launch that the rig file plans, from its planned draw: no tension is known yet.
    ///
    /// # Errors
    /// A cord curve that is none, a draw beyond the elongation the cord was described for.
    pub fn planned(rig: &Rig) -> Result<Self, ModelError> {
        let setup = Self::at(rig, rig.rail.zero_mark_x_m - rig.plan.draw_m)?;
        setup.refuse_beyond_card()?;
        Ok(setup)
    }

    /// The launch from where the shuttle is held: the cords' force is scaled to the hold tension measured in the release
    /// line, corrected for weight. Friction may hold either way, so the pull is known within its band only
    /// ([`hold_pull_band_n`]).
    ///
    /// # Errors
    /// As [`LaunchSetup::planned`], and a tension that leaves no pull.
    pub fn drawn(rig: &Rig, hold_tension_n: f64, x0_m: f64) -> Result<Self, ModelError> {
        let mut setup = Self::at(rig, x0_m)?;
        setup.refuse_beyond_card()?;
        let pull_n = hold_tension_n + setup.hold_weight_n();
        let described_n = setup.cord_pull_n(x0_m);
        if !(pull_n > 0.0 && described_n > 0.0) {
            return Err(ModelError::NoPullAtHold { tension_n: hold_tension_n, x_m: x0_m });
        }
        setup.scale_cords(pull_n / described_n);
        Ok(setup)
    }

    fn at(rig: &Rig, start_x_m: f64) -> Result<Self, ModelError> {
        let points: Vec<(f64, f64)> = rig.cords.curve.iter().map(|point| (point.elongation, point.tension_n)).collect();
        let unloading = Curve::through(&points).map_err(|source| ModelError::CordCurve { set: 0, source })?;
        let (count, zero_mark_x_m) = (f64::from(rig.cords.count), rig.rail.zero_mark_x_m);
        let cords = CordSet {
            mass_kg: rig.cords.mass_kg,
            travel_ratio: rig.cords.travel_ratio,
            ..CordSet::simple(count, rig.cords.free_length_m, zero_mark_x_m, unloading)
        };
        Ok(Self {
            shuttle_mass_kg: rig.shuttle.mass_kg.value,
            payload_mass_kg: rig.payload.mass_kg.value,
            start_x_m,
            rail_end_x_m: rig.rail.length_m,
            incline_rad: rig.rail.incline_rad,
            gravity_mps2: local_gravity_mps2(rig.site.latitude_rad, rig.site.altitude_m),
            air_density_kg_per_m3: rig.site.air_density_kg_per_m3,
            head_wind_mps: rig.site.head_wind_mps,
            payload_drag_area_m2: rig.payload.drag_area_m2.value,
            shuttle_drag_area_m2: rig.losses.shuttle_drag_area_m2.value,
            cords: vec![cords],
            tables: Vec::new(),
            gas: Vec::new(),
            losses: RailLosses { friction_n: rig.losses.friction_n.value, ..RailLosses::default() },
            brake: Brake {
                from_x_m: rig.rail.brake_x_m,
                constant_n: rig.rail.brake_force_n,
                per_metre_n_per_m: 0.0,
                per_speed_n_per_mps: 0.0,
            },
            recoil: None,
            thrust: None,
            lift_area_m2: 0.0,
            uncouple_x_m: None,
            relative_tolerance: ACCURATE,
        })
    }

    /// Pull of all cords at rest at a place, N.
    pub fn cord_pull_n(&self, x_m: f64) -> f64 {
        let taut = self.cords.iter().map(|set| (set, set.elongation(x_m))).filter(|(_, elongation)| *elongation > 0.0);
        taut.map(|(set, elongation)| set.pull_n(set.released(elongation), elongation)).sum()
    }

    /// Weight along the rail that helps the line hold the shuttle against the cords, N.
    pub fn hold_weight_n(&self) -> f64 {
        (self.shuttle_mass_kg + self.payload_mass_kg) * self.gravity_along_mps2()
    }

    /// Multiplies the tension of every cord.
    pub fn scale_cords(&mut self, factor: f64) {
        for set in &mut self.cords {
            set.scale(factor);
        }
    }

    fn refuse_beyond_card(&self) -> Result<(), ModelError> {
        for (s, set) in self.cords.iter().enumerate() {
            let asked = set.elongation(self.start_x_m);
            let known = set.unloading.last();
            if asked > known * (1.0 + 1e-9) {
                return Err(ModelError::BeyondCard {
                    set: s,
                    asked_percent: 100.0 * asked,
                    known_percent: 100.0 * known,
                });
            }
        }
        Ok(())
    }
}

/// Half-width of the band in which the cords' pull lies at a given hold tension, N: friction can hold either way.
pub fn hold_pull_band_n(rig: &Rig) -> f64 {
    rig.losses.friction_n.value
}

/// Tension that the release line should show at a draw while winching back, N: pull and friction less weight, never
/// below zero.
///
/// # Errors
/// A cord curve that is none.
pub fn planned_line_tension_n(rig: &Rig, draw_m: f64) -> Result<f64, ModelError> {
    let setup = LaunchSetup::at(rig, rig.rail.zero_mark_x_m - draw_m)?;
    let tension_n = setup.cord_pull_n(setup.start_x_m) + setup.losses.friction_n - setup.hold_weight_n();
    Ok(tension_n.max(0.0))
}

/// Energy in the cords at a draw and release-line tension, J: what a release would set free.
///
/// # Errors
/// As [`LaunchSetup::drawn`], except that slack cords hold nothing and that any elongation is taken.
pub fn stored_energy_j(rig: &Rig, line_tension_n: f64, x_m: f64) -> Result<f64, ModelError> {
    let mut setup = LaunchSetup::at(rig, x_m)?;
    let (pull_n, described_n) = (line_tension_n + setup.hold_weight_n(), setup.cord_pull_n(x_m));
    if !(pull_n > 0.0 && described_n > 0.0) {
        return Ok(0.0);
    }
    setup.scale_cords(pull_n / described_n);
    Ok(super::energy::stored_j(&setup))
}
