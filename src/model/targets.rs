//! Places along the rail where a step has to end: knots of cards, marks, ends.

use super::cord::CordPhase;
use super::setup::LaunchSetup;
use super::system::Phase;

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Mark {
    /// A knot of cord set `set`'s card.
    CordKnot {
        set: usize,
    },
    /// Cord set `set` comes slack.
    CordsTaut {
        set: usize,
    },
    TableStart {
        table: usize,
    },
    TableEnd {
        table: usize,
    },
    /// A knot of a table or of the loss over x.
    Knot,
    Uncoupling,
    Brake,
    RailEnd,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Target {
    pub x_m: f64,
    pub mark: Mark,
}

/// Every target of a setup, in order of x.
pub fn targets(setup: &LaunchSetup) -> Vec<Target> {
    let mut all = Vec::with_capacity(32);
    for (set, cords) in setup.cords.iter().enumerate() {
        all.push(Target { x_m: cords.zero_mark_x_m, mark: Mark::CordsTaut { set } });
        let knots = cords.unloading.knots().iter().filter(|knot| **knot > 0.0);
        all.extend(knots.map(|knot| Target { x_m: cords.x_at_elongation(*knot), mark: Mark::CordKnot { set } }));
    }
    for (table, entry) in setup.tables.iter().enumerate() {
        let knots = entry.force_n.knots();
        all.push(Target { x_m: entry.force_n.first(), mark: Mark::TableStart { table } });
        all.push(Target { x_m: entry.force_n.last(), mark: Mark::TableEnd { table } });
        all.extend(knots[1..knots.len() - 1].iter().map(|knot| Target { x_m: *knot, mark: Mark::Knot }));
    }
    if let Some(loss) = &setup.losses.along_x_n {
        all.extend(loss.knots().iter().map(|knot| Target { x_m: *knot, mark: Mark::Knot }));
    }
    all.extend(setup.uncouple_x_m.map(|x_m| Target { x_m, mark: Mark::Uncoupling }));
    if setup.brake.from_x_m < setup.rail_end_x_m {
        all.push(Target { x_m: setup.brake.from_x_m, mark: Mark::Brake });
    }
    all.push(Target { x_m: setup.rail_end_x_m, mark: Mark::RailEnd });
    all.retain(|target| target.x_m.is_finite());
    all.sort_by(|one, other| one.x_m.total_cmp(&other.x_m));
    all
}

impl Mark {
    /// Whether the equations change there in this phase.
    pub fn matters(self, phase: &Phase) -> bool {
        match self {
            Self::CordKnot { set } => phase.cords[set] == CordPhase::Even,
            Self::CordsTaut { set } => phase.cords[set] != CordPhase::Slack,
            Self::Uncoupling => phase.payload_on,
            Self::TableStart { .. } | Self::TableEnd { .. } | Self::Knot | Self::Brake | Self::RailEnd => true,
        }
    }
}
