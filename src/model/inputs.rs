//! What a forecast is unsure of: the inputs of a launch that carry an uncertainty, by name.

use super::error::ModelError;
use super::from_rig::hold_pull_band_n;
use super::relaxation::standing_uncertainties;
use super::setup::LaunchSetup;
use crate::estimation::Cholesky;
use crate::rig::{Given, LossCard, Rig};

/// Relative standard uncertainty of the launch speed for each unit of cord mass over carried mass: the one third rule
/// after the strain wave, against a chain of masses (tools/oracles/launch_chain.py: 0.7 % at a ratio of 0.2).
const CORD_MODEL_PER_MASS_RATIO: f64 = 0.03;

/// How much is known of the pull.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Known {
    /// Nothing but the plan: the cord curves' own uncertainty counts in full.
    Plan,
    /// Tension of the release line at the hold: friction can hold either way.
    HoldTension { tension_n: f64, x_m: f64 },
}

#[derive(Debug, Clone, Copy, PartialEq)]
enum What {
    ShuttleMass,
    PayloadMass,
    PayloadDragArea,
    ShuttleDragArea,
    Friction,
    LoadFriction,
    PullFriction,
    Viscous,
    CordLag,
    CordViscous,
    LossAlongX,
    Breakaway,
    /// Relative, of one cord set, at every elongation.
    CordForce {
        set: usize,
    },
    /// Relative, growing from the hold toward slack.
    CordShape {
        set: usize,
    },
    HoldPull,
    Draw,
    HeadWind,
    /// Relative.
    AirDensity,
    /// Relative.
    Brake,
    GasPressure {
        gas: usize,
    },
    RailMass,
    RailStiffness,
    /// Relative, of the launch speed.
    CordModel,
    /// Relative, of the launch speed: what the trials behind the loss card left unexplained.
    Unexplained,
}

/// One uncertain input.
#[derive(Debug, Clone, PartialEq)]
pub struct Input {
    /// As correlations name it.
    pub name: String,
    /// In words.
    pub meaning: &'static str,
    pub unit: &'static str,
    pub standard_uncertainty: f64,
    what: What,
}

/// All uncertain inputs of a forecast with their correlations.
#[derive(Debug, Clone, PartialEq)]
pub struct Inputs {
    pub all: Vec<Input>,
    /// Between inputs, by their place in `all`.
    pub correlations: Vec<Vec<f64>>,
    root: Cholesky,
}

/// A setup moved from its best values, with what the move does to the answer itself.
#[derive(Debug, Clone)]
pub struct Moved {
    pub setup: LaunchSetup,
    pub speed_factor: f64,
}

impl Inputs {
    /// Inputs of a rig that have an uncertainty.
    ///
    /// # Errors
    /// Correlations that name no input, or contradict each other.
    pub fn of(rig: &Rig, known: Known) -> Result<Self, ModelError> {
        let mut all = Vec::new();
        let mut add = |name: &str, meaning: &'static str, unit: &'static str, u: f64, what: What| {
            if u > 0.0 {
                all.push(Input { name: name.to_owned(), meaning, unit, standard_uncertainty: u, what });
            }
        };
        bodies(rig, &mut add);
        sources(rig, known, &mut add);
        let correlations = correlation_matrix(rig, &all)?;
        let root = Cholesky::of(&correlations).map_err(ModelError::Correlations)?;
        Ok(Self { all, correlations, root })
    }

    /// The setup with each input moved by that many of its standard uncertainties.
    pub fn moved(&self, setup: &LaunchSetup, deviates: &[f64]) -> Moved {
        let mut moved = Moved { setup: setup.clone(), speed_factor: 1.0 };
        for (input, deviate) in self.all.iter().zip(deviates) {
            if *deviate != 0.0 {
                input.what.apply(&mut moved, deviate * input.standard_uncertainty);
            }
        }
        moved
    }

    /// Independent normal deviates turned into correlated ones.
    pub fn correlate(&self, independent: &[f64]) -> Vec<f64> {
        self.root.correlate(independent)
    }
}

type Add<'a> = dyn FnMut(&str, &'static str, &'static str, f64, What) + 'a;

fn bodies(rig: &Rig, add: &mut Add) {
    let u = |given: Given| given.standard_uncertainty;
    let some = |given: Option<Given>| given.map_or(0.0, u);
    let more = &rig.details.losses;
    let settings = &rig.details.settings;
    add("shuttle.mass", "shuttle mass", "kg", u(rig.shuttle.mass_kg), What::ShuttleMass);
    add("payload.mass", "payload mass", "kg", u(rig.payload.mass_kg), What::PayloadMass);
    add("payload.drag_area", "payload drag area", "m^2", u(rig.payload.drag_area_m2), What::PayloadDragArea);
    add(
        "losses.shuttle_drag_area",
        "shuttle drag area",
        "m^2",
        u(rig.losses.shuttle_drag_area_m2),
        What::ShuttleDragArea,
    );
    add("losses.friction", "rail friction", "N", u(rig.losses.friction_n), What::Friction);
    add("losses.load_friction", "friction by load", "", some(more.load_coefficient), What::LoadFriction);
    add("losses.pull_friction", "friction by pull", "", some(more.pull_coefficient), What::PullFriction);
    add("losses.viscous", "viscous loss", "N s/m", some(more.viscous_n_per_mps), What::Viscous);
    add("losses.cord_lag", "held tension the cords don't give back", "", some(more.cord_lag), What::CordLag);
    add("losses.cord_viscous", "viscous loss of a cord", "N s/m", some(more.cord_viscous_n_per_mps), What::CordViscous);
    if let Some(card) = &more.card {
        add("losses.unexplained", "unexplained by the loss card", "relative", card.unexplained, What::Unexplained);
    }
    add("losses.breakaway", "breakaway friction", "N", some(more.breakaway_n), What::Breakaway);
    add("losses.along_x", "loss over x", "relative", more.along_x_relative_uncertainty, What::LossAlongX);
    add("site.head_wind", "head wind", "m/s", settings.head_wind_mps, What::HeadWind);
    add("site.air_density", "air density", "relative", settings.air_density_relative, What::AirDensity);
    add("rail.brake_force", "brake force", "relative", rig.details.brake.relative_uncertainty, What::Brake);
    if let Some(support) = rig.details.rail_support {
        add("rail_support.mass", "rail mass", "kg", u(support.mass_kg), What::RailMass);
        add("rail_support.stiffness", "rail support", "N/m", u(support.stiffness_n_per_m), What::RailStiffness);
    }
}

fn sources(rig: &Rig, known: Known, add: &mut Add) {
    let groups = rig.details.more_cords.iter().map(|group| (&group.cords, &group.details));
    let sets = Some((&rig.cords, &rig.details.cords)).filter(|(cords, _)| cords.count > 0).into_iter().chain(groups);
    let mut cord_mass_kg = 0.0;
    for (set, (cords, details)) in sets.enumerate() {
        let u = cords.force_relative_uncertainty;
        let table = if set == 0 { "cords".to_owned() } else { format!("more_cords[{}]", set - 1) };
        let name = |key: &str| format!("{table}.{key}");
        match known {
            Known::Plan => {
                let (by_kelvin, by_cycles) = standing_uncertainties(details);
                let what = What::CordForce { set };
                add(&name("force"), "cord force", "relative", u, what);
                add(&name("tension_per_kelvin"), "cord force by temperature", "relative", by_kelvin, what);
                add(&name("cycles"), "cord force by cycles", "relative", by_cycles, what);
            }
            // Losses fitted with these curves hold what their shape is wrong by; what is left of it is unexplained.
            Known::HoldTension { .. } if rig.details.losses.card.as_ref().is_some_and(LossCard::has_cord_lag) => {}
            Known::HoldTension { .. } => {
                add(&name("force"), "shape of the cord curve", "relative", u, What::CordShape { set });
            }
        }
        cord_mass_kg += f64::from(cords.count) * cords.mass_kg * cords.travel_ratio.powi(2);
    }
    match known {
        Known::Plan => add("plan.draw", "draw", "m", rig.details.settings.draw_m, What::Draw),
        Known::HoldTension { .. } => {
            add("hold.pull", "stiction band at the hold", "N", hold_pull_band_n(rig) / 3.0_f64.sqrt(), What::HoldPull);
        }
    }
    for (gas, source) in rig.details.gas.iter().enumerate() {
        let u_pa = source.charged_pressure_pa.standard_uncertainty;
        add(&format!("gas[{gas}].charged_pressure"), "charged pressure", "Pa", u_pa, What::GasPressure { gas });
    }
    let ratio = CORD_MODEL_PER_MASS_RATIO * cord_mass_kg / rig.moving_mass_kg();
    add("model.cord_mass", "cords' own motion (model)", "relative", ratio, What::CordModel);
}

fn correlation_matrix(rig: &Rig, all: &[Input]) -> Result<Vec<Vec<f64>>, ModelError> {
    let mut matrix = vec![vec![0.0; all.len()]; all.len()];
    for (i, row) in matrix.iter_mut().enumerate() {
        row[i] = 1.0;
    }
    for correlation in &rig.details.correlations {
        let place = |name: &String| {
            all.iter().position(|input| input.name == *name).ok_or_else(|| ModelError::NoSuchInput {
                name: name.clone(),
                known: all.iter().map(|input| input.name.as_str()).collect::<Vec<_>>().join(", "),
            })
        };
        let (i, j) = (place(&correlation.between[0])?, place(&correlation.between[1])?);
        (matrix[i][j], matrix[j][i]) = (correlation.coefficient, correlation.coefficient);
    }
    Ok(matrix)
}

impl What {
    /// Moves a setup by `by`; what can't be negative stops at zero.
    fn apply(self, moved: &mut Moved, by: f64) {
        let setup = &mut moved.setup;
        let add = |value: &mut f64| *value = (*value + by).max(0.0);
        let times = |value: &mut f64| *value *= (1.0 + by).max(0.0);
        match self {
            Self::ShuttleMass => add(&mut setup.shuttle_mass_kg),
            Self::PayloadMass => add(&mut setup.payload_mass_kg),
            Self::PayloadDragArea => add(&mut setup.payload_drag_area_m2),
            Self::ShuttleDragArea => add(&mut setup.shuttle_drag_area_m2),
            Self::Friction => add(&mut setup.losses.friction_n),
            Self::LoadFriction => add(&mut setup.losses.load_coefficient),
            Self::PullFriction => add(&mut setup.losses.pull_coefficient),
            Self::Viscous => add(&mut setup.losses.viscous_n_per_mps),
            Self::CordLag => setup.lag_cords(by),
            Self::CordViscous => {
                let by = by * setup.cord_viscous_factor();
                let viscous = &mut setup.losses.viscous_n_per_mps;
                *viscous = (*viscous + by).max(0.0);
            }
            Self::Breakaway => add(&mut setup.losses.breakaway_n),
            Self::LossAlongX => {
                setup.losses.along_x_n.iter_mut().for_each(|loss| loss.scale((1.0 + by).max(0.0)));
            }
            Self::CordForce { set } => setup.cords[set].scale((1.0 + by).max(0.0)),
            Self::CordShape { set } => {
                let held = setup.cords[set].elongation(setup.start_x_m);
                setup.cords[set].reshape(|elongation| 1.0 + by * (1.0 - elongation / held));
            }
            Self::HoldPull => {
                let pull_n = setup.cord_pull_n(setup.start_x_m);
                setup.scale_cords(((pull_n + by) / pull_n).max(0.0));
            }
            Self::Draw => setup.hold_at(setup.start_x_m - by),
            Self::HeadWind => setup.head_wind_mps += by,
            Self::AirDensity => times(&mut setup.air_density_kg_per_m3),
            Self::Brake => {
                times(&mut setup.brake.constant_n);
                times(&mut setup.brake.per_metre_n_per_m);
                times(&mut setup.brake.per_speed_n_per_mps);
            }
            Self::GasPressure { gas } => {
                let source = &mut setup.gas[gas];
                source.charged_pressure_pa = (source.charged_pressure_pa + by).max(source.ambient_pressure_pa);
            }
            Self::RailMass => setup.recoil.iter_mut().for_each(|recoil| add(&mut recoil.mass_kg)),
            Self::RailStiffness => setup.recoil.iter_mut().for_each(|recoil| add(&mut recoil.stiffness_n_per_m)),
            Self::CordModel | Self::Unexplained => moved.speed_factor *= 1.0 + by,
        }
    }
}
