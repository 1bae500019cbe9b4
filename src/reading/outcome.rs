//! What kind of trial it was, with the evidence in words.
//!
//! Every question is put to the channels and answered in a sentence with its numbers; the first outcome in the order
//! of [`decide`] whose evidence is complete wins, and the other sentences stay beside it.

use crate::rig::Rig;

use super::motion::Track;
use super::phases::{Drop, Phases};
use super::read::Stroke;
use super::release::Release;
use super::result::Outcome;
use super::sensors::Sensors;
use super::series::stats_between;
use super::tension::Hold;

/// A shuttle that got no farther than this after the release did not go.
const HANGS_M: f64 = 0.1;
/// Within this time after it.
const SOON_S: f64 = 0.5;
/// Movement of the shuttle in a moment of the hold that only a hook can give.
const JUMP_M: f64 = 0.003;
/// Load that stays under this share of what it was is lost for good.
const STAYS_AWAY: f64 = 0.95;
/// Share of the plan's draw that still counts as the plan's draw.
const SHORT_OF_PLAN: f64 = 0.95;
/// Tension that comes back after a release, as a share of the hold, means that the hook caught again.
const CAUGHT_SHARE: f64 = 0.3;

/// What the other parts of the reading found.
pub(super) struct Evidence<'a> {
    pub sensors: &'a Sensors<'a>,
    pub phases: &'a Phases,
    pub release: Option<&'a Release>,
    pub track: Option<&'a Track>,
    pub stroke: &'a Stroke,
    pub hold: &'a Hold,
    pub rig: &'a Rig,
}

pub(super) fn decide(evidence: &Evidence<'_>) -> (Outcome, Vec<String>) {
    let mut words = vec![evidence.loading()];
    let outcome = match evidence.release {
        Some(release) => evidence.after_release(release, &mut words),
        None => evidence.without_release(&mut words),
    };
    (outcome, words)
}

impl Evidence<'_> {
    fn loading(&self) -> String {
        let phases = self.phases;
        match phases.loaded_from_s {
            Some(from_s) => format!(
                "tension at the {} rose above slack at {from_s:.2} s and reached {:.0} N",
                phases.load_channel,
                phases.peak_load_n - phases.zero_n
            ),
            None => format!("tension never rose above slack ({})", phases.load_channel),
        }
    }

    fn without_release(&self, words: &mut Vec<String>) -> Outcome {
        let phases = self.phases;
        let Some(until_s) = phases.loaded_until_s else {
            words.push("no tension and no release: nothing was tried".to_owned());
            return Outcome::Aborted;
        };
        if phases.loaded_at_end() {
            words.push(format!("the record ends at {:.2} s with the tension still above slack", phases.end_s));
            return Outcome::Truncated;
        }
        if let Some((outcome, sentence)) = phases.partial_drops.iter().find_map(|drop| self.partial_drop(drop)) {
            words.push(sentence);
            return outcome;
        }
        words.push(format!("tension went back to slack by {until_s:.2} s, slowly: the winch let down"));
        match self.draw_m() {
            Some(draw_m) if draw_m < 0.5 * self.rig.plan.draw_m => {
                words.push(format!("the draw was {draw_m:.2} m of {:.2} m planned", self.rig.plan.draw_m));
                Outcome::Aborted
            }
            _ => Outcome::LetDown,
        }
    }

    fn after_release(&self, release: &Release, words: &mut Vec<String>) -> Outcome {
        words.push(format!("the load fell below half its hold value at {:.4} s: release", release.time_s));
        if let Some(sentence) = self.caught_again(release) {
            words.push(sentence);
            return Outcome::HookSlip;
        }
        let Some(track) = self.track else {
            words.push("no channel shows the shuttle's motion: whether it launched is not known".to_owned());
            return Outcome::Truncated;
        };
        let advance_m = self.advance_m(track, release.time_s);
        if advance_m < HANGS_M && self.phases.end_s - release.time_s > 0.5 {
            words.push(format!("the shuttle moved only {advance_m:.3} m after it"));
            return Outcome::HangFire;
        }
        let finished = track.rest_s.is_some();
        words.push(match track.rest_s {
            Some(rest_s) => format!("the shuttle moved {advance_m:.2} m and stood at {rest_s:.2} s"),
            None => format!("the record ends at {:.2} s before the shuttle stood", self.phases.end_s),
        });
        if let Some(alone) = &self.stroke.alone {
            words.push(alone.clone());
            return if finished { Outcome::ShuttleAlone } else { Outcome::Truncated };
        }
        if let Some(contradiction) = &self.stroke.contradiction {
            words.push(contradiction.clone());
            return if finished { Outcome::Launched } else { Outcome::Truncated };
        }
        let Some(separation) = self.stroke.separation else {
            let pushed = "the payload was pushed all the way: no loss of contact was seen";
            words.push(self.stroke.together.clone().unwrap_or_else(|| pushed.to_owned()));
            return if finished { Outcome::PayloadNotSeparated } else { Outcome::Truncated };
        };
        words.push(format!("the payload left at {:.4} s, x = {:.3} m", separation.time_s, separation.x_m));
        if !finished {
            return Outcome::Truncated;
        }
        self.refine_launch(track, words)
    }

    fn refine_launch(&self, track: &Track, words: &mut Vec<String>) -> Outcome {
        let furthest_m = track.motion.x_m.iter().copied().fold(f64::NEG_INFINITY, f64::max);
        if track.has_position && furthest_m > self.rig.rail.length_m - 0.005 {
            words.push(format!(
                "the shuttle reached x = {furthest_m:.3} m, the stop is at {:.3} m",
                self.rig.rail.length_m
            ));
            return Outcome::ArrestOverrun;
        }
        if let Some(step) = self.stroke.step {
            words.push(format!(
                "in the stroke, at x = {:.2} m, the specific force changed at once from {:.0} to {:.0} m/s²: {}",
                step.x_m,
                step.from_mps2,
                step.to_mps2,
                if step.is_up() { "the shuttle lost its payload" } else { "force was lost, as when a cord fails" }
            ));
            return if step.is_up() { Outcome::PayloadLeftEarly } else { Outcome::CordFailure };
        }
        if let Some(draw_m) = self.draw_m().filter(|draw_m| *draw_m < SHORT_OF_PLAN * self.rig.plan.draw_m) {
            words.push(format!(
                "it was released at a draw of {draw_m:.2} m, the plan says {:.2} m",
                self.rig.plan.draw_m
            ));
            return Outcome::EarlyRelease;
        }
        if self.phases.hold_start_s.is_none() && self.sensors.position.is_some() {
            words.push("it was released while the winch was still drawing: there was no hold".to_owned());
            return Outcome::EarlyRelease;
        }
        Outcome::Launched
    }

    fn caught_again(&self, release: &Release) -> Option<String> {
        let line = self.sensors.line?;
        let held_n = self.hold.tension_n?.0;
        let later = stats_between(line, release.time_s + 0.2, release.time_s + 0.45)?;
        let later_n = later.mean - self.phases.zero_n;
        (later_n > CAUGHT_SHARE * held_n)
            .then(|| format!("the line's tension came back to {later_n:.0} N after it: the hook caught again"))
    }

    fn draw_m(&self) -> Option<f64> {
        self.hold.x_m.map(|(x_m, _)| self.rig.draw_m(x_m))
    }

    /// How far the shuttle got soon after the release: a jam that is let down later moves then, not now.
    fn advance_m(&self, track: &Track, release_s: f64) -> f64 {
        let first = track.motion.x_m.first().copied().unwrap_or(0.0);
        let soon = track.index_at(release_s + SOON_S) + 1;
        track.motion.x_m.iter().take(soon).map(|x_m| x_m - first).fold(0.0, f64::max)
    }

    /// A sudden partial fall of the load: load that stays away is a failed cord, a shuttle that jumped is a slipped hook.
    fn partial_drop(&self, drop: &Drop) -> Option<(Outcome, String)> {
        let fell =
            format!("the load fell at once from {:.0} to {:.0} N at {:.2} s", drop.from_n, drop.low_n, drop.time_s);
        let jumped_m = self.sensors.position.and_then(|position| {
            let before = stats_between(position, drop.time_s - 0.1, drop.time_s - 0.02)?;
            let after = stats_between(position, drop.time_s + 0.1, drop.time_s + 0.3)?;
            Some(after.mean - before.mean)
        });
        if let Some(jumped_m) = jumped_m.filter(|jumped_m| *jumped_m > JUMP_M) {
            let sentence =
                format!("{fell} while the shuttle jumped {:.1} mm forward and was held again", 1e3 * jumped_m);
            return Some((Outcome::HookSlip, sentence));
        }
        let stays_away = drop.to_n < STAYS_AWAY * drop.from_n;
        stays_away.then(|| {
            (Outcome::CordFailure, format!("{fell} and stayed at {:.0} N with the shuttle standing", drop.to_n))
        })
    }
}
