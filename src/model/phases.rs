//! What a launch does at its events: waves end, cords come slack, the payload leaves, the shuttle brakes, turns, rests.

use super::cord::{Branch, CordPhase, Side};
use super::event::EventKind;
use super::march::{Goal, March};
use super::setup::LaunchSetup;
use super::system::{MAX_CORD_SETS, MAX_GAS, MAX_TABLES, Phase};
use super::targets::Mark;

const MAX_REVERSALS: u32 = 50;

impl<const N: usize> March<'_, N> {
    pub(super) fn separate(&mut self) {
        self.note(EventKind::Separation);
        self.system.phase.payload_on = false;
        self.slope = None;
        let slope = self.slope();
        self.watch_peak(self.ground_acceleration(&slope));
    }

    /// After a change of phase: the payload goes if nothing pushes it any more.
    pub(super) fn separate_if_free(&mut self) {
        const NOTHING: f64 = 1e-9;
        let slope = self.slope();
        let weight_n = self.system.setup.payload_mass_kg * self.system.setup.gravity_mps2;
        if self.contact_n(&self.y, &slope) <= NOTHING * weight_n {
            self.separate();
        }
    }

    pub(super) fn reach(&mut self, goal: Goal) {
        match goal {
            Goal::None | Goal::Strain | Goal::Time => {
                self.slack_where_waves_are_spent();
                return;
            }
            Goal::Place(index) => {
                if !self.reach_places(index) {
                    // Over a knot force and stiffness go on as they were, and so does the slope.
                    return;
                }
            }
            Goal::WaveOver(set) => {
                self.note(EventKind::WaveOver { set });
                let cords = &self.system.setup.cords[set];
                let branch = cords.released(cords.elongation(self.system.setup.start_x_m));
                self.system.phase.cords[set] = CordPhase::Even { branch, side: Side::Drawn };
                self.seek_ahead();
            }
            Goal::Rest => self.reach_rest(),
        }
        self.slope = None;
        if !self.ended {
            let slope = self.slope();
            self.watch_peak(self.ground_acceleration(&slope));
            self.separate_if_free();
        }
    }

    fn slack_where_waves_are_spent(&mut self) {
        for set in 0..self.system.setup.cords.len() {
            let Some(i) = self.system.layout.wave[set] else { continue };
            if matches!(self.system.phase.cords[set], CordPhase::Wave { .. }) && self.y[i] <= 1e-12 {
                self.slacken(set);
                self.slope = None;
                self.separate_if_free();
            }
        }
    }

    /// The gas has built up enough: the shuttle leaves its hold.
    pub(super) fn begin_motion(&mut self) {
        self.note(EventKind::MotionBegins);
        self.system.phase.held = false;
        for phase in &mut self.system.phase.cords {
            if let CordPhase::Wave { until_s, .. } = phase {
                *until_s += self.t_s;
            }
        }
        self.set_off();
    }

    fn slacken(&mut self, set: usize) {
        self.note(EventKind::CordsSlack { set });
        self.system.phase.cords[set] = CordPhase::Slack;
    }

    /// Cords that were slack extend again.
    fn tighten(&mut self, set: usize, side: Side) {
        self.note(EventKind::CordsTaut { set });
        self.system.phase.cords[set] = CordPhase::Even { branch: Branch::Loading, side };
    }

    /// Everything that stands at the place just reached; whether that changes the equations.
    fn reach_places(&mut self, index: usize) -> bool {
        let mut changes = false;
        let x_m = self.targets[index].x_m;
        self.y[0] = x_m;
        let step: isize = if self.system.phase.direction > 0.0 { 1 } else { -1 };
        self.cursor = index as isize;
        while let Some(target) = usize::try_from(self.cursor).ok().and_then(|i| self.targets.get(i)).copied() {
            if (target.x_m - x_m).abs() > 1e-12 {
                break;
            }
            self.cursor += step;
            if target.mark.matters(&self.system.phase) {
                self.pass(target.mark);
                changes |= !matches!(target.mark, Mark::CordKnot { .. } | Mark::Knot);
            }
        }
        changes
    }

    fn pass(&mut self, mark: Mark) {
        let forward = self.system.phase.direction > 0.0;
        match mark {
            Mark::CordKnot { .. } | Mark::Knot => {}
            Mark::CordsTaut { set, side } => match self.system.phase.cords[set] {
                CordPhase::Slack => self.tighten(set, side),
                _ => self.slacken(set),
            },
            Mark::StrokeEnd { gas } => {
                self.note(EventKind::StrokeEnd { gas });
                self.system.phase.gas[gas] = false;
            }
            Mark::TableStart { table } => self.system.phase.tables[table] = forward,
            Mark::TableEnd { table } => self.system.phase.tables[table] = !forward,
            Mark::Uncoupling => self.separate(),
            Mark::Brake => {
                self.note(EventKind::BrakeContact);
                self.system.phase.braking = forward;
            }
            Mark::RailEnd => {
                self.note(EventKind::EndStop);
                self.ended = true;
            }
        }
    }

    /// At standstill: rest if what is left can't move the shuttle, the way back otherwise.
    fn reach_rest(&mut self) {
        self.y[1] = 0.0;
        let (drive_n, resistance_n) = self.drive_and_resistance(&self.y);
        if drive_n.abs() <= resistance_n || self.reversals >= MAX_REVERSALS {
            self.note(EventKind::Rest);
            self.ended = true;
            return;
        }
        let Some(turned) = self.moves_off(drive_n.signum()) else {
            self.note(EventKind::Rest);
            self.ended = true;
            return;
        };
        self.reversals += 1;
        if turned {
            self.note(EventKind::Reversal);
        }
        self.seek_ahead();
        self.size_s = 1e-3;
    }

    /// Sets the direction in which the shuttle leaves its standstill, the one it is driven to first; whether it turned. None, and
    /// nothing changed, where it goes neither way: cords pull less on the branch they turn to, and a rail that recoils takes
    /// the shuttle along.
    fn moves_off(&mut self, driven: f64) -> Option<bool> {
        let standing = self.system.phase.clone();
        for direction in [driven, -driven] {
            let turned = direction != standing.direction;
            self.system.phase.direction = direction;
            if turned {
                self.turn_cords();
            }
            if self.system.rates(self.t_s, &self.y)[1] * direction > 0.0 {
                return Some(turned);
            }
            self.system.phase = standing.clone();
        }
        None
    }

    /// Each set that still pulls changes its branch where the shuttle turns.
    fn turn_cords(&mut self) {
        let (x_m, direction) = (self.y[0], self.system.phase.direction);
        for (set, phase) in self.system.setup.cords.iter().zip(&mut self.system.phase.cords) {
            if let CordPhase::Even { branch, side } = phase {
                let extending = direction * side.sign() < 0.0;
                *branch = if extending { Branch::Loading } else { set.turned(set.elongation_on(*side, x_m)) };
            }
        }
    }

    /// Puts the cursor on the next target from here.
    fn seek_ahead(&mut self) {
        let x_m = self.y[0];
        let found = if self.system.phase.direction > 0.0 {
            Some(self.targets.iter().position(|target| target.x_m > x_m + 1e-12).unwrap_or(self.targets.len()))
        } else {
            self.targets.iter().rposition(|target| target.x_m < x_m - 1e-12)
        };
        self.cursor = found.map_or(-1, |index| index as isize);
    }
}

/// Everything as it is at the instant after release.
pub fn first_phase(setup: &LaunchSetup) -> Phase {
    let mut cords = [CordPhase::Slack; MAX_CORD_SETS];
    for (phase, set) in cords.iter_mut().zip(&setup.cords) {
        let elongation = set.elongation(setup.start_x_m);
        if elongation > 0.0 {
            *phase = if set.mass_kg > 0.0 {
                CordPhase::Wave { until_s: 2.0 * set.transit_s(elongation), branch: set.released(elongation) }
            } else {
                CordPhase::Even { branch: set.released(elongation), side: Side::Drawn }
            };
        }
    }
    let mut tables = [false; MAX_TABLES];
    for (on, table) in tables.iter_mut().zip(&setup.tables) {
        *on = (table.force_n.first()..table.force_n.last()).contains(&setup.start_x_m);
    }
    let braking = setup.start_x_m >= setup.brake.from_x_m;
    let mut gas = [false; MAX_GAS];
    gas[..setup.gas.len()].fill(true);
    Phase { held: false, gas, payload_on: setup.payload_mass_kg > 0.0, direction: 1.0, braking, cords, tables }
}
