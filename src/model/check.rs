//! Refuses setups that describe no launch.

use super::error::ModelError;
use super::setup::LaunchSetup;
use super::system::{MAX_CORD_SETS, MAX_GAS, MAX_TABLES};

fn require(
    what: &'static str,
    value: f64,
    unit: &'static str,
    must_be: &'static str,
    holds: bool,
) -> Result<(), ModelError> {
    if holds && !value.is_nan() { Ok(()) } else { Err(ModelError::Impossible { what, value, unit, must_be }) }
}

fn not_negative(what: &'static str, value: f64, unit: &'static str) -> Result<(), ModelError> {
    require(what, value, unit, "zero or more", value >= 0.0)
}

impl LaunchSetup {
    /// # Errors
    /// Numbers that no launcher can have, each with what it must be.
    pub fn check(&self) -> Result<(), ModelError> {
        let moving_kg = self.shuttle_mass_kg + self.payload_mass_kg;
        not_negative("shuttle mass", self.shuttle_mass_kg, "kg")?;
        not_negative("payload mass", self.payload_mass_kg, "kg")?;
        require("moving mass", moving_kg, "kg", "more than zero", moving_kg > 0.0)?;
        let start_m = self.start_x_m;
        require("start of the shuttle", start_m, "m", "before the end of the rail", start_m < self.rail_end_x_m)?;
        require("incline", self.incline_rad, "rad", "between -pi/2 and pi/2", self.incline_rad.abs() < 1.571)?;
        require("gravity", self.gravity_mps2, "m/s^2", "finite", self.gravity_mps2.is_finite())?;
        require("head wind", self.head_wind_mps, "m/s", "finite", self.head_wind_mps.is_finite())?;
        not_negative("air density", self.air_density_kg_per_m3, "kg/m^3")?;
        not_negative("payload drag area", self.payload_drag_area_m2, "m^2")?;
        not_negative("shuttle drag area", self.shuttle_drag_area_m2, "m^2")?;
        not_negative("friction", self.losses.friction_n, "N")?;
        not_negative("breakaway friction", self.losses.breakaway_n, "N")?;
        not_negative("load friction coefficient", self.losses.load_coefficient, "")?;
        not_negative("pull friction coefficient", self.losses.pull_coefficient, "")?;
        not_negative("viscous loss", self.losses.viscous_n_per_mps, "N s/m")?;
        not_negative("brake force", self.brake.constant_n, "N")?;
        let tolerance = self.relative_tolerance;
        require("relative tolerance", tolerance, "", "between 1e-13 and 1e-2", (1e-13..=1e-2).contains(&tolerance))?;
        self.check_sources()
    }

    fn check_sources(&self) -> Result<(), ModelError> {
        let (n_sets, n_tables) = (self.cords.len(), self.tables.len());
        if n_sets > MAX_CORD_SETS || n_tables > MAX_TABLES || self.gas.len() > MAX_GAS {
            let (max_sets, max_tables) = (MAX_CORD_SETS, MAX_TABLES);
            return Err(ModelError::TooManySources { n_sets, n_tables, max_sets, max_tables });
        }
        for set in &self.cords {
            require("cord count", set.count, "", "more than zero", set.count > 0.0)?;
            require("cord free length", set.free_length_m, "m", "more than zero", set.free_length_m > 0.0)?;
            require("travel ratio", set.travel_ratio, "", "more than zero", set.travel_ratio > 0.0)?;
            not_negative("cord mass", set.mass_kg, "kg")?;
        }
        for source in &self.gas {
            let charged_pa = source.charged_pressure_pa;
            let over = charged_pa >= source.ambient_pressure_pa;
            require("charged pressure (absolute)", charged_pa, "Pa", "at least the ambient pressure", over)?;
            require(
                "ambient pressure",
                source.ambient_pressure_pa,
                "Pa",
                "more than zero",
                source.ambient_pressure_pa > 0.0,
            )?;
            require("vessel volume", source.vessel_volume_m3, "m^3", "more than zero", source.vessel_volume_m3 > 0.0)?;
            let dead_m3 = source.dead_volume_m3;
            let enough = dead_m3 > 0.0 || (!source.has_valve() && dead_m3 == 0.0);
            require("dead volume", dead_m3, "m^3", "more than zero behind a valve", enough)?;
            require("piston area", source.piston_area_m2, "m^2", "more than zero", source.piston_area_m2 > 0.0)?;
            require("piston stroke", source.stroke_m, "m", "more than zero", source.stroke_m > 0.0)?;
            require("piston travel ratio", source.travel_ratio, "", "more than zero", source.travel_ratio > 0.0)?;
            require("gas temperature", source.temperature_k, "K", "more than zero", source.temperature_k > 0.0)?;
            let exponent = source.polytropic_exponent;
            require("polytropic exponent", exponent, "", "between 1 and 1.7", (1.0..=1.7).contains(&exponent))?;
            require("leak time", source.leak_time_s, "s", "more than zero", source.leak_time_s > 0.0)?;
            not_negative("time from charging to release", source.hold_s, "s")?;
        }
        if let Some(recoil) = &self.recoil {
            require("rail mass", recoil.mass_kg, "kg", "more than zero", recoil.mass_kg > 0.0)?;
            not_negative("rail support stiffness", recoil.stiffness_n_per_m, "N/m")?;
            not_negative("rail support damping", recoil.damping_n_per_mps, "N s/m")?;
        }
        Ok(())
    }
}
