//! What truly happened, over time: rows on a grid that is fine where things move fast, with straight lines between.

/// The rig at one instant. Positions and speeds with `ground` are in the ground frame, the others in the rail's.
#[derive(Debug, Clone, Copy, Default, PartialEq)]
pub struct Row {
    pub t_s: f64,
    pub x_m: f64,
    pub v_mps: f64,
    pub shuttle_a_ground_mps2: f64,
    /// Release line at the shuttle.
    pub line_n: f64,
    /// All cords, at the shuttle.
    pub cords_n: f64,
    /// All cords, at their fixed ends.
    pub anchor_n: f64,
    /// Between shuttle and payload.
    pub contact_n: f64,
    pub payload_x_m: f64,
    pub payload_v_ground_mps: f64,
    pub payload_a_ground_mps2: f64,
    pub rail_x_m: f64,
    pub rail_v_mps: f64,
    /// Absolute.
    pub reservoir_pa: f64,
    pub cylinder_pa: f64,
}

impl Row {
    fn between(&self, next: &Self, share: f64) -> Self {
        let mix = |a: f64, b: f64| a + (b - a) * share;
        Self {
            t_s: mix(self.t_s, next.t_s),
            x_m: mix(self.x_m, next.x_m),
            v_mps: mix(self.v_mps, next.v_mps),
            shuttle_a_ground_mps2: mix(self.shuttle_a_ground_mps2, next.shuttle_a_ground_mps2),
            line_n: mix(self.line_n, next.line_n),
            cords_n: mix(self.cords_n, next.cords_n),
            anchor_n: mix(self.anchor_n, next.anchor_n),
            contact_n: mix(self.contact_n, next.contact_n),
            payload_x_m: mix(self.payload_x_m, next.payload_x_m),
            payload_a_ground_mps2: mix(self.payload_a_ground_mps2, next.payload_a_ground_mps2),
            reservoir_pa: mix(self.reservoir_pa, next.reservoir_pa),
            cylinder_pa: mix(self.cylinder_pa, next.cylinder_pa),
            payload_v_ground_mps: mix(self.payload_v_ground_mps, next.payload_v_ground_mps),
            rail_x_m: mix(self.rail_x_m, next.rail_x_m),
            rail_v_mps: mix(self.rail_v_mps, next.rail_v_mps),
        }
    }
}

/// Rows in order of time. Before the first and after the last, the rig stands as it does there.
#[derive(Debug, Clone, Default)]
pub struct Trajectory {
    pub rows: Vec<Row>,
}

impl Trajectory {
    /// The rig at `t_s`.
    pub fn at(&self, t_s: f64) -> Row {
        let after = self.rows.partition_point(|row| row.t_s <= t_s);
        match (after.checked_sub(1).and_then(|idx| self.rows.get(idx)), self.rows.get(after)) {
            (Some(row), Some(next)) => row.between(next, (t_s - row.t_s) / (next.t_s - row.t_s)),
            (Some(row), None) | (None, Some(row)) => Row { t_s, ..*row },
            (None, None) => Row { t_s, ..Row::default() },
        }
    }

    pub fn end_s(&self) -> f64 {
        self.rows.last().map_or(0.0, |row| row.t_s)
    }

    /// Values of `quantity` every `interval_s` from `from_s` to `to_s`.
    pub fn sampled(&self, from_s: f64, to_s: f64, interval_s: f64, quantity: impl Fn(&Row) -> f64) -> Vec<f64> {
        let n = ((to_s - from_s) / interval_s).floor() as usize + 1;
        (0..n).map(|idx| quantity(&self.at(from_s + idx as f64 * interval_s))).collect()
    }
}
