//! Whether the cords hold energy. "Slack" needs fresh, plausible data of every tension cell; silence is never slack.

use super::channel::ChannelMonitor;
use super::plan::Plan;
use super::state::CordsNow;

const SLACK_FOR_NS: i64 = 500_000_000;

/// What the tension cells say together.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Cells {
    /// Greatest level of any fresh cell.
    pub tension_n: Option<f64>,
    pub every_cell_fresh: bool,
    /// A fresh cell reads further below zero than the slack threshold: its zero or its wiring is wrong.
    pub implausible: bool,
    /// For how long they must read slack to be believed: two readings of the slowest at least.
    pub slack_for_ns: i64,
}

impl Cells {
    pub fn of(channels: &[ChannelMonitor], host_ns: i64, slack_tension_n: f64) -> Self {
        let mut cells =
            Self { tension_n: None, every_cell_fresh: true, implausible: false, slack_for_ns: SLACK_FOR_NS };
        let mut any = false;
        for channel in channels.iter().filter(|channel| channel.is_tension()) {
            any = true;
            cells.slack_for_ns = cells.slack_for_ns.max(2 * channel.interval_ns());
            match channel.level(host_ns) {
                None => cells.every_cell_fresh = false,
                Some(level_n) => {
                    cells.tension_n = Some(cells.tension_n.map_or(level_n, |most_n: f64| most_n.max(level_n)));
                    cells.implausible |= level_n < -slack_tension_n;
                }
            }
        }
        cells.every_cell_fresh &= any;
        cells
    }

    /// Every cell can be believed.
    pub fn all_speak(&self) -> bool {
        self.every_cell_fresh && !self.implausible
    }
}

/// Remembers how long the cells have been slack: a single low reading does not unload cords.
#[derive(Debug, Default)]
pub struct SlackRule {
    slack_since_ns: Option<i64>,
    was_loaded: bool,
}

impl SlackRule {
    /// Judges one instant.
    pub fn judge(
        &mut self,
        cells: &Cells,
        host_ns: i64,
        plan: Option<&Plan>,
        slack_n: f64,
        draw_m: Option<f64>,
    ) -> CordsNow {
        let Some(tension_n) = cells.tension_n else {
            *self = Self::default();
            return CordsNow::Unknown;
        };
        let loaded = CordsNow::Loaded { tension_n, energy_j: plan.map(|plan| plan.energy_j(tension_n, draw_m)) };
        if tension_n >= slack_n {
            *self = Self { slack_since_ns: None, was_loaded: true };
            return loaded;
        }
        if !cells.all_speak() {
            *self = Self::default();
            return CordsNow::Unknown;
        }
        let since_ns = *self.slack_since_ns.get_or_insert(host_ns);
        match (host_ns - since_ns >= cells.slack_for_ns, self.was_loaded) {
            (true, _) => CordsNow::Slack,
            (false, true) => loaded,
            (false, false) => CordsNow::Unknown,
        }
    }
}
