//! Digital inputs: the release pin and two beam gates that the payload's flag passes.

use crate::draw::{Draw, Purpose};
use crate::physics::trajectory::Trajectory;

/// Pulled when the line lets go.
pub const RELEASE_PIN: u8 = 0;
/// Inputs of the gates, and where the crew measured them on the rail.
pub const GATES: [(u8, f64); 2] = [(1, 3.0), (2, 3.6)];
/// Length of the flag on the payload.
pub const FLAG_M: f64 = 0.100;
/// Standard deviation of each gate's true place about the measured one.
const GATE_X_M: f64 = 3e-4;

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Edge {
    pub t_s: f64,
    pub input: u8,
    pub rising: bool,
}

/// True places of the gates for `seed`.
pub fn gate_places(seed: u64) -> Vec<f64> {
    let mut draw = Draw::new(seed, Purpose::Gates);
    GATES.iter().map(|(_, x_m)| x_m + draw.normal(GATE_X_M)).collect()
}

/// Every edge of a trial, in the order of time.
pub fn edges(trajectory: &Trajectory, release_s: Option<f64>, seed: u64) -> Vec<Edge> {
    let Some(release_s) = release_s else { return Vec::new() };
    let mut edges = vec![Edge { t_s: release_s, input: RELEASE_PIN, rising: false }];
    for ((input, _), x_m) in GATES.into_iter().zip(gate_places(seed)) {
        for (flag_m, rising) in [(0.0, true), (FLAG_M, false)] {
            edges.extend(passes(trajectory, release_s, x_m + flag_m).map(|t_s| Edge { t_s, input, rising }));
        }
    }
    edges.sort_by(|a, b| a.t_s.total_cmp(&b.t_s));
    edges
}

/// When the payload's flag first comes to `x_m` after `from_s`.
fn passes(trajectory: &Trajectory, from_s: f64, x_m: f64) -> Option<f64> {
    let rows = &trajectory.rows;
    let start = rows.partition_point(|row| row.t_s < from_s);
    let after = start + rows.get(start..)?.iter().position(|row| row.payload_x_m >= x_m)?;
    let (before, after) = (rows.get(after.checked_sub(1)?)?, rows.get(after)?);
    let share = (x_m - before.payload_x_m) / (after.payload_x_m - before.payload_x_m);
    Some(before.t_s + share * (after.t_s - before.t_s))
}
