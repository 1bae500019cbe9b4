//! The phase tracker: from levels and speeds to the phase the launcher is in.
//!
//! Every change needs its evidence to stand for a while, and the thresholds for entering and leaving a phase differ, so
//! noise does not make phases flicker. Release is the line below half its hold tension with motion, or the anchor's
//! fall, to confirm it; a line that falls alone is told as [`Tracker::released_not_moving`]. Slack is concluded only
//! from fresh data of every tension cell, and nothing is concluded from silence but [`Phase::Unknown`].

use super::state::Phase;

const MS: i64 = 1_000_000;

/// A draw speed that counts as moving, and one that counts as standing.
const MOVING_MPS: f64 = 0.05;
const STANDING_MPS: f64 = 0.02;
/// Forward speed that no winch gives: the shuttle is free.
const FREE_MPS: f64 = 2.0;
/// Forward speed and way that confirm a release the line has shown. A hook that slips and holds again gives the speed
/// for a moment, but not the way.
const RELEASED_MPS: f64 = 0.3;
const RELEASED_M: f64 = 0.03;

const TAUT_FOR_NS: i64 = 100 * MS;
const MOVING_FOR_NS: i64 = 300 * MS;
const STANDING_FOR_NS: i64 = 700 * MS;
const AT_REST_FOR_NS: i64 = 500 * MS;
const UNCONFIRMED_FOR_NS: i64 = 300 * MS;
const REST_SHOWN_NS: i64 = 10_000 * MS;
/// How fast the tension before a release is followed: slower than a release, faster than a winch.
const REFERENCE_TAU_NS: f64 = 60e6;

/// What the tracker judges by, at one instant. `None` is a silent channel.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct Seen {
    pub host_ns: i64,
    pub line_n: Option<f64>,
    pub anchor_n: Option<f64>,
    /// Whether every tension cell of the rig is fresh.
    pub every_cell_fresh: bool,
    /// For how long they must read slack.
    pub slack_for_ns: i64,
    /// Greatest tension of any fresh cell.
    pub tension_n: Option<f64>,
    pub x_m: Option<f64>,
    /// Over 100 ms, positive toward the exit.
    pub speed_mps: Option<f64>,
    /// Over 10 ms.
    pub fast_speed_mps: Option<f64>,
}

/// How long a condition has stood.
#[derive(Debug, Clone, Copy, Default)]
struct Dwell(Option<i64>);

impl Dwell {
    fn lasts(&mut self, stands: bool, host_ns: i64, for_ns: i64) -> bool {
        if !stands {
            self.0 = None;
            return false;
        }
        let since_ns = *self.0.get_or_insert(host_ns);
        host_ns - since_ns >= for_ns
    }
}

#[derive(Debug, Clone, Copy, Default)]
struct Dwells {
    taut: Dwell,
    slack: Dwell,
    back: Dwell,
    forward: Dwell,
    standing: Dwell,
    dropped: Dwell,
}

/// Conditions that have stood long enough, this step.
#[derive(Debug, Clone, Copy)]
struct Stood {
    taut: bool,
    slack: bool,
    back: bool,
    forward: bool,
    standing: bool,
    at_rest: bool,
}

/// Follows a level slowly, and stands still while told to.
#[derive(Debug, Clone, Copy, Default)]
struct Reference(Option<(i64, f64)>);

impl Reference {
    fn follow(&mut self, host_ns: i64, level: f64) {
        let (then_ns, value) = self.0.unwrap_or((host_ns, level));
        let weight = 1.0 - (-((host_ns - then_ns).max(0) as f64) / REFERENCE_TAU_NS).exp();
        self.0 = Some((host_ns, value + weight * (level - value)));
    }

    fn value(&self) -> Option<f64> {
        self.0.map(|(_, value)| value)
    }
}

/// The phase, since when, and the evidence so far.
#[derive(Debug)]
pub struct Tracker {
    slack_tension_n: f64,
    zero_mark_x_m: f64,
    phase: Phase,
    since_ns: i64,
    before_unknown: Phase,
    dwells: Dwells,
    line: Reference,
    anchor: Reference,
    place: Reference,
    released_not_moving: bool,
}

impl Tracker {
    pub fn new(slack_tension_n: f64, zero_mark_x_m: f64) -> Self {
        Self {
            slack_tension_n,
            zero_mark_x_m,
            phase: Phase::Unknown,
            since_ns: 0,
            before_unknown: Phase::Unknown,
            dwells: Dwells::default(),
            line: Reference::default(),
            anchor: Reference::default(),
            place: Reference::default(),
            released_not_moving: false,
        }
    }

    pub fn phase(&self) -> Phase {
        self.phase
    }

    /// When the present phase began, host time.
    pub fn since_ns(&self) -> i64 {
        self.since_ns
    }

    /// The line fell below half its tension and nothing else says that the shuttle left.
    pub fn released_not_moving(&self) -> bool {
        self.released_not_moving
    }

    /// Where the shuttle was held: follows it slowly, and stands still from the line's fall on.
    pub fn place_before_release_m(&self) -> Option<f64> {
        self.place.value()
    }

    /// Judges one instant; gives the phase left behind when it changed.
    pub fn step(&mut self, seen: &Seen) -> Option<Phase> {
        if self.since_ns == 0 {
            self.since_ns = seen.host_ns;
        }
        let stood = self.stood(seen);
        let next = if self.is_blind(seen) {
            Phase::Unknown
        } else if self.is_released(seen) {
            Phase::Launch
        } else {
            self.next(seen, &stood)
        };
        self.enter(next, seen.host_ns)
    }

    /// No cell speaks; or a phase that says "slack" while a cell is silent.
    fn is_blind(&self, seen: &Seen) -> bool {
        let says_slack = matches!(self.phase, Phase::Slack | Phase::Rest);
        seen.tension_n.is_none() || (says_slack && !seen.every_cell_fresh)
    }

    fn stood(&mut self, seen: &Seen) -> Stood {
        let t = seen.host_ns;
        let below = seen.tension_n.is_some_and(|tension_n| tension_n < self.slack_tension_n);
        let above = seen.tension_n.is_some_and(|tension_n| tension_n >= self.slack_tension_n);
        let speed = |test: fn(f64) -> bool| seen.speed_mps.is_some_and(test);
        let dwells = &mut self.dwells;
        let still = speed(|v| v.abs() < STANDING_MPS);
        Stood {
            taut: dwells.taut.lasts(above, t, TAUT_FOR_NS),
            slack: dwells.slack.lasts(below && seen.every_cell_fresh, t, seen.slack_for_ns),
            back: dwells.back.lasts(speed(|v| v < -MOVING_MPS), t, MOVING_FOR_NS),
            forward: dwells.forward.lasts(speed(|v| v > MOVING_MPS), t, MOVING_FOR_NS),
            standing: dwells.standing.lasts(still, t, STANDING_FOR_NS),
            at_rest: dwells.standing.lasts(still, t, AT_REST_FOR_NS),
        }
    }

    /// Looks for a release while the cords are drawn.
    fn is_released(&mut self, seen: &Seen) -> bool {
        if !matches!(self.phase, Phase::WinchBack | Phase::Hold | Phase::LetDown) {
            self.line = Reference::default();
            self.anchor = Reference::default();
            self.place = Reference::default();
            self.released_not_moving = false;
            return false;
        }
        let line_fell = fell(&self.line, seen.line_n, 0.5, 2.0 * self.slack_tension_n);
        let anchor_fell = fell(&self.anchor, seen.anchor_n, 0.85, 2.0 * self.slack_tension_n);
        if !line_fell {
            follow(&mut self.line, seen.host_ns, seen.line_n);
            follow(&mut self.anchor, seen.host_ns, seen.anchor_n);
            follow(&mut self.place, seen.host_ns, seen.x_m);
        }
        let speed_mps = seen.fast_speed_mps.unwrap_or(0.0);
        let alone_ns = self.dwells.dropped.lasts(line_fell, seen.host_ns, UNCONFIRMED_FOR_NS);
        self.released_not_moving = alone_ns;
        let way_m = self.place.value().zip(seen.x_m).map_or(0.0, |(from_m, x_m)| x_m - from_m);
        let confirmed =
            (speed_mps > RELEASED_MPS && way_m > RELEASED_M) || (anchor_fell && seen.fast_speed_mps.is_none());
        speed_mps > FREE_MPS || (line_fell && confirmed) || (seen.line_n.is_none() && anchor_fell && confirmed)
    }

    fn next(&self, seen: &Seen, stood: &Stood) -> Phase {
        match self.phase {
            Phase::Unknown => self.out_of_unknown(stood),
            Phase::Slack if stood.taut => Phase::WinchBack,
            Phase::Slack => Phase::Slack,
            Phase::WinchBack | Phase::Hold | Phase::LetDown => self.while_drawn(seen, stood),
            Phase::Launch => self.while_launching(seen, stood),
            Phase::RunOut => self.while_running_out(seen, stood),
            Phase::Rest => self.while_at_rest(seen, stood),
        }
    }

    fn out_of_unknown(&self, stood: &Stood) -> Phase {
        let was_launched = matches!(self.before_unknown, Phase::Launch | Phase::RunOut | Phase::Rest);
        match (stood.slack, stood.taut) {
            (true, _) if was_launched => Phase::Rest,
            (true, _) => Phase::Slack,
            (_, true) if stood.back => Phase::WinchBack,
            (_, true) if stood.forward => Phase::LetDown,
            (_, true) => Phase::Hold,
            _ => Phase::Unknown,
        }
    }

    fn while_drawn(&self, seen: &Seen, stood: &Stood) -> Phase {
        // After a let-down friction may keep the shuttle short of the zero mark, the cords a little loaded: no hold.
        let spent = self.phase == Phase::LetDown && seen.line_n.is_some_and(|line_n| line_n < self.slack_tension_n);
        if stood.slack {
            Phase::Slack
        } else if stood.back {
            Phase::WinchBack
        } else if stood.forward {
            Phase::LetDown
        } else if stood.standing && !spent {
            Phase::Hold
        } else {
            self.phase
        }
    }

    fn while_launching(&self, seen: &Seen, stood: &Stood) -> Phase {
        let past_mark = match seen.x_m {
            Some(x_m) => x_m >= self.zero_mark_x_m,
            None => stood.slack,
        };
        if past_mark {
            Phase::RunOut
        } else if stood.at_rest && stood.slack {
            Phase::Rest
        } else if stood.standing && stood.taut {
            Phase::Hold
        } else {
            Phase::Launch
        }
    }

    fn while_running_out(&self, seen: &Seen, stood: &Stood) -> Phase {
        let blind_rest = seen.x_m.is_none() && stood.slack && seen.host_ns - self.since_ns >= 2_000 * MS;
        if stood.at_rest || blind_rest { Phase::Rest } else { Phase::RunOut }
    }

    fn while_at_rest(&self, seen: &Seen, stood: &Stood) -> Phase {
        if stood.taut && stood.back {
            Phase::WinchBack
        } else if stood.slack && (stood.back || seen.host_ns - self.since_ns >= REST_SHOWN_NS) {
            Phase::Slack
        } else {
            Phase::Rest
        }
    }

    fn enter(&mut self, next: Phase, host_ns: i64) -> Option<Phase> {
        if next == self.phase {
            return None;
        }
        let left = self.phase;
        if next == Phase::Unknown {
            self.before_unknown = left;
        }
        self.phase = next;
        self.since_ns = host_ns;
        self.dwells = Dwells { taut: self.dwells.taut, slack: self.dwells.slack, ..Dwells::default() };
        Some(left)
    }
}

fn fell(reference: &Reference, level_n: Option<f64>, to_share: f64, least_n: f64) -> bool {
    match (reference.value(), level_n) {
        (Some(before_n), Some(now_n)) => before_n > least_n && now_n < to_share * before_n,
        _ => false,
    }
}

fn follow(reference: &mut Reference, host_ns: i64, level_n: Option<f64>) {
    match level_n {
        Some(level_n) => reference.follow(host_ns, level_n),
        None => *reference = Reference::default(),
    }
}
