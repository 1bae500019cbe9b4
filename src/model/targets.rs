//! Places along the rail where a step has to end: knots of cards, marks, ends.

use super::cord::{CordPhase, Side};
use super::setup::LaunchSetup;
use super::system::Phase;

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Mark {
    /// A knot of cord set `set`'s card.
    CordKnot {
        set: usize,
        side: Side,
    },
    /// Cord set `set` comes slack, or taut on the way back.
    CordsTaut {
        set: usize,
        side: Side,
    },
    /// A piston's stroke ends.
    StrokeEnd {
        gas: usize,
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
        for (side, mark_x_m) in [(Side::Drawn, Some(cords.zero_mark_x_m)), (Side::Beyond, cords.retension_x_m)] {
            let Some(x_m) = mark_x_m else { continue };
            all.push(Target { x_m, mark: Mark::CordsTaut { set, side } });
            let knots = cords.unloading.knots().iter().filter(|knot| **knot > 0.0);
            all.extend(
                knots
                    .map(|knot| Target { x_m: cords.x_at_elongation(side, *knot), mark: Mark::CordKnot { set, side } }),
            );
        }
    }
    for (gas, source) in setup.gas.iter().enumerate() {
        all.push(Target { x_m: setup.start_x_m + source.travel_m(), mark: Mark::StrokeEnd { gas } });
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
            Self::CordKnot { set, side } => {
                matches!(phase.cords[set], CordPhase::Even { side: extended, .. } if extended == side)
            }
            Self::CordsTaut { set, side } => match phase.cords[set] {
                CordPhase::Wave { .. } => side == Side::Drawn,
                CordPhase::Even { side: extended, .. } => extended == side,
                CordPhase::Slack => (side == Side::Drawn) == (phase.direction < 0.0),
            },
            Self::StrokeEnd { gas } => phase.gas[gas],
            Self::Uncoupling => phase.payload_on,
            Self::TableStart { .. } | Self::TableEnd { .. } | Self::Knot | Self::Brake | Self::RailEnd => true,
        }
    }
}
