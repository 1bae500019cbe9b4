//! What a launch leaves behind: rows, instants, energies.

use super::launch::Held;
use super::stroke::{Energy, System, at};
use super::trajectory::Row;

/// Something that happened at one instant of the launch.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Instant {
    pub t_s: f64,
    pub what: Happening,
    /// Shuttle in the rail frame, payload in the ground frame.
    pub row: Row,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Happening {
    HookOpens,
    HookSlips,
    FirstMotion,
    CordBreaks,
    /// The contact force vanished.
    Separation,
    /// The payload came off its seat though it was pushed.
    PayloadOff,
    CordsSlack,
    BrakeReached,
    StopReached,
    Rest,
}

impl Happening {
    /// The word in the truth log.
    pub const fn word(self) -> &'static str {
        match self {
            Self::HookOpens => "hook-opens",
            Self::HookSlips => "hook-slips",
            Self::FirstMotion => "first-motion",
            Self::CordBreaks => "cord-breaks",
            Self::Separation => "separation",
            Self::PayloadOff => "payload-off",
            Self::CordsSlack => "cords-slack",
            Self::BrakeReached => "brake-reached",
            Self::StopReached => "stop-reached",
            Self::Rest => "rest",
        }
    }
}

/// A launch, or a slip of the hook, as it truly went.
#[derive(Debug, Clone)]
pub struct Course {
    pub rows: Vec<Row>,
    pub instants: Vec<Instant>,
    pub before: Energy,
    pub at_separation: Option<Split>,
    pub at_end: Split,
    /// `|change of energy − works| / elastic energy at the start`, the largest seen at separation and end.
    pub energy_error: f64,
    /// How the rig stands after it.
    pub after: Held,
}

impl Course {
    pub fn instant(&self, what: Happening) -> Option<&Instant> {
        self.instants.iter().find(|instant| instant.what == what)
    }
}

/// Where the energy is, and where it went, J.
#[derive(Debug, Clone, Copy)]
pub struct Split {
    pub energy: Energy,
    /// Given by the cords to everything that moves.
    pub cords_delivered_j: f64,
    pub gas_delivered_j: f64,
    pub line_j: f64,
    pub friction_j: f64,
    pub brake_j: f64,
    pub shuttle_drag_j: f64,
    pub payload_drag_j: f64,
    pub rail_damper_j: f64,
    pub cord_ground_j: f64,
    /// Kinetic and height energy that went away with a broken cord.
    pub gone_with_cord_j: f64,
    /// Elastic energy that went away with a broken cord.
    pub elastic_gone_j: f64,
}

impl Split {
    pub(super) fn of(system: &System, y: &[f64], gone: &Energy) -> Self {
        Self {
            energy: system.energy(y),
            cords_delivered_j: y[at::CORDS],
            gas_delivered_j: y[at::GAS],
            line_j: y[at::LINE],
            friction_j: y[at::FRICTION],
            brake_j: y[at::BRAKE],
            shuttle_drag_j: y[at::SHUTTLE_DRAG],
            payload_drag_j: y[at::PAYLOAD_DRAG],
            rail_damper_j: y[at::RAIL_DAMPER],
            cord_ground_j: y[at::CORD_GROUND],
            gone_with_cord_j: gone.mechanical_j(),
            elastic_gone_j: gone.cord_elastic_j,
        }
    }

    pub(super) fn error_j(&self, before: &Energy) -> f64 {
        let losses_j = self.line_j
            + self.friction_j
            + self.brake_j
            + self.shuttle_drag_j
            + self.payload_drag_j
            + self.rail_damper_j
            + self.cord_ground_j
            + self.gone_with_cord_j;
        let delivered_j = self.cords_delivered_j + self.gas_delivered_j;
        (self.energy.mechanical_j() - before.mechanical_j() - delivered_j + losses_j).abs()
    }
}
