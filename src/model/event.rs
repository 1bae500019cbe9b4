//! What happens in a launch, and what is kept of its course.

use super::along::Along;
use super::integrate::Dense;
use super::system::Phase;

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum EventKind {
    Release,
    /// Pressure has grown enough to move the shuttle.
    MotionBegins,
    /// A cord set's strain wave has come back: it is taken as evenly strained from here.
    WaveOver {
        set: usize,
    },
    CordsSlack {
        set: usize,
    },
    /// A cord set that was slack extends again.
    CordsTaut {
        set: usize,
    },
    /// A piston is at the end of its stroke.
    StrokeEnd {
        gas: usize,
    },
    Separation,
    BrakeContact,
    /// The shuttle turned round.
    Reversal,
    Rest,
    /// The shuttle reached the end of the rail moving.
    EndStop,
}

/// An instant of the event.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Event {
    pub kind: EventKind,
    pub t_s: f64,
    pub x_m: f64,
    /// In the rail's frame.
    pub v_mps: f64,
    /// In the ground's frame.
    pub ground_v_mps: f64,
}

/// What the integration took.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Cost {
    pub steps: u32,
    pub rejected: u32,
    pub evaluations: u32,
}

/// A stretch of the solution, for reading it out later.
#[derive(Debug, Clone)]
pub struct Segment<const N: usize> {
    pub along: Along,
    pub dense: Dense<N>,
    pub from_s: f64,
    pub to_s: f64,
    pub phase: Phase,
}

/// Greatest and least acceleration, and where.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Peak {
    pub acceleration_mps2: f64,
    pub t_s: f64,
    pub x_m: f64,
}
