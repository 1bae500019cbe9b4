//! The losses that a fit can find.

use serde::Serialize;

use crate::model::LaunchSetup;
use crate::rig::{Given, Rig};

/// One loss, by its name in `losses.fit`.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Term {
    Friction,
    LoadFriction,
    PullFriction,
    Viscous,
    ShuttleDragArea,
    PayloadDragArea,
    CordLag,
    CordViscous,
}

impl Term {
    pub const ALL: [Self; 8] = [
        Self::Friction,
        Self::LoadFriction,
        Self::PullFriction,
        Self::Viscous,
        Self::ShuttleDragArea,
        Self::PayloadDragArea,
        Self::CordLag,
        Self::CordViscous,
    ];

    /// As in the rig file, in `losses.fit` and in loss cards.
    pub const fn name(self) -> &'static str {
        match self {
            Self::Friction => "friction",
            Self::LoadFriction => "load_friction",
            Self::PullFriction => "pull_friction",
            Self::Viscous => "viscous",
            Self::ShuttleDragArea => "shuttle_drag_area",
            Self::PayloadDragArea => "payload_drag_area",
            Self::CordLag => "cord_lag",
            Self::CordViscous => "cord_viscous",
        }
    }

    pub fn named(name: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|term| term.name() == name)
    }

    pub const fn meaning(self) -> &'static str {
        match self {
            Self::Friction => "constant friction",
            Self::LoadFriction => "friction by the load across the rail",
            Self::PullFriction => "friction by the cords' pull",
            Self::Viscous => "viscous loss of the rail",
            Self::ShuttleDragArea => "drag of the shuttle",
            Self::PayloadDragArea => "drag of the payload",
            Self::CordLag => "held tension the cords don't give back",
            Self::CordViscous => "viscous loss of a cord",
        }
    }

    pub const fn unit(self) -> &'static str {
        match self {
            Self::Friction => "N",
            Self::LoadFriction | Self::PullFriction | Self::CordLag => "",
            Self::Viscous | Self::CordViscous => "N s/m",
            Self::ShuttleDragArea | Self::PayloadDragArea => "m2",
        }
    }

    /// Whether it stays with the cords when they are changed, and scales with their number.
    pub const fn is_of_cords(self) -> bool {
        matches!(self, Self::PullFriction | Self::CordLag | Self::CordViscous)
    }

    /// What the rig file says of it: zero without uncertainty where it is silent.
    pub fn given(self, rig: &Rig) -> Given {
        let more = &rig.details.losses;
        let some = |given: Option<Given>| given.unwrap_or(Given::exactly(0.0));
        match self {
            Self::Friction => rig.losses.friction_n,
            Self::LoadFriction => some(more.load_coefficient),
            Self::PullFriction => some(more.pull_coefficient),
            Self::Viscous => some(more.viscous_n_per_mps),
            Self::ShuttleDragArea => rig.losses.shuttle_drag_area_m2,
            Self::PayloadDragArea => rig.payload.drag_area_m2,
            Self::CordLag => some(more.cord_lag),
            Self::CordViscous => some(more.cord_viscous_n_per_mps),
        }
    }

    /// Takes it out of a rig, so that [`Self::put`] alone says what it is.
    pub(super) fn clear(self, rig: &mut Rig) {
        let more = &mut rig.details.losses;
        match self {
            Self::Friction => rig.losses.friction_n = Given::exactly(0.0),
            Self::LoadFriction => more.load_coefficient = None,
            Self::PullFriction => more.pull_coefficient = None,
            Self::Viscous => more.viscous_n_per_mps = None,
            Self::ShuttleDragArea => rig.losses.shuttle_drag_area_m2 = Given::exactly(0.0),
            Self::PayloadDragArea => rig.payload.drag_area_m2 = Given::exactly(0.0),
            Self::CordLag => more.cord_lag = None,
            Self::CordViscous => more.cord_viscous_n_per_mps = None,
        }
    }

    /// Puts a value into a setup of a rig from which the term was cleared.
    pub(super) fn put(self, setup: &mut LaunchSetup, value: f64) {
        match self {
            Self::Friction => setup.losses.friction_n += value,
            Self::LoadFriction => setup.losses.load_coefficient += value,
            Self::PullFriction => setup.losses.pull_coefficient += value,
            Self::Viscous => setup.losses.viscous_n_per_mps += value,
            Self::ShuttleDragArea => setup.shuttle_drag_area_m2 += value,
            Self::PayloadDragArea => setup.payload_drag_area_m2 += value,
            Self::CordLag => setup.lag_cords(value),
            Self::CordViscous => setup.losses.viscous_n_per_mps += value * setup.cord_viscous_factor(),
        }
    }

    /// The value at which it takes a hundredth of the held pull: of its weight, at full speed, all along.
    pub(super) fn size(self, setup: &LaunchSetup, speed_mps: f64) -> f64 {
        let force_n = 0.01 * setup.cord_pull_n(setup.start_x_m).max(1.0);
        let speed_mps = speed_mps.max(1.0);
        let dynamic_pa = 0.5 * setup.air_density_kg_per_m3.max(0.1) * speed_mps * speed_mps;
        let weight_n = (setup.shuttle_mass_kg + setup.payload_mass_kg) * setup.gravity_mps2;
        match self {
            Self::Friction => force_n,
            Self::LoadFriction => force_n / weight_n,
            Self::PullFriction | Self::CordLag => 0.01,
            Self::Viscous => force_n / speed_mps,
            Self::ShuttleDragArea | Self::PayloadDragArea => force_n / dynamic_pa,
            Self::CordViscous => force_n / speed_mps / setup.cord_viscous_factor().max(1e-6),
        }
    }
}
