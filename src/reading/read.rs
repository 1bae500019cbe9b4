//! The reading itself: each question in turn, each answer or its absence written down.

use crate::calibration::Signal;
use crate::rig::local_gravity_mps2;
use crate::rig::{Rig, Role};

use super::arrest;
use super::energy;

use super::launch::{self, Separation};
use super::motion::{self, Setting, Track};
use super::outcome::{self, Evidence};
use super::peak;
use super::phases::Phases;
use super::release::{self, Release};
use super::result::{Outcome, Reading};
use super::rows::Book;
use super::sensors::Sensors;
use super::stroke::{self, Step};
use super::tension;

/// How well the nominal place of the drawn shuttle is known without an encoder.
const U_PLANNED_X_M: f64 = 0.05;

/// Everything a trial's signals say by themselves, without a model of the launcher.
///
/// Never fails: what cannot be had is in [`Reading::absent`] with its reason.
pub fn read(signals: &[Signal], rig: &Rig) -> Reading {
    let mut sensors = Sensors::new(signals, rig);
    let mut book = Book::default();
    let Some(phases) = Phases::find(&sensors, rig) else { return nothing(&sensors, book) };
    let release = phases
        .release_hint_s
        .and_then(|hint_s| release::find(hint_s, sensors.line, sensors.specific_force, sensors.position, &mut book));
    if let Some(release) = &release {
        refuse_reversed_accelerometer(&mut sensors, release);
    }
    for (_, reason) in &sensors.refused {
        book.findings.push(reason.clone());
    }
    phase_instants(&phases, &mut book);
    let hold = tension::report(&sensors, &phases, release.as_ref(), rig, &mut book);
    let gravity_along_mps2 = gravity_along_mps2(rig);
    let track = release.as_ref().and_then(|release| smoothed(&sensors, &phases, release, rig));
    let rows = release.as_ref().map(|release| stroke_rows(&sensors, track.as_ref(), release, rig, &mut book));
    let stroke = rows.unwrap_or_default();
    let separation = stroke.separation;
    if release.is_none() {
        without_release(&mut book);
    }
    let energy = energy::report(&hold, separation.as_ref(), gravity_along_mps2, rig, &mut book);
    if let (Some(release), Some(track)) = (&release, &track) {
        energy::closure(&hold, release, track, rig, &mut book);
        arrest::report(&sensors, track, separation.as_ref(), rig, &mut book);
    }
    let (outcome, outcome_evidence) = outcome::decide(&Evidence {
        sensors: &sensors,
        phases: &phases,
        release: release.as_ref(),
        track: track.as_ref(),
        stroke: &stroke,
        hold: &hold,
        rig,
    });
    book.instants.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
    Reading {
        outcome,
        outcome_evidence,
        instants: book.instants,
        results: book.results,
        absent: book.absent,
        findings: book.findings,
        motion: track.map(|track| track.motion),
        energy,
    }
}

/// g·sin θ at the site.
fn gravity_along_mps2(rig: &Rig) -> f64 {
    local_gravity_mps2(rig.site.latitude_rad, rig.site.altitude_m) * rig.rail.incline_rad.sin()
}

fn nothing(sensors: &Sensors<'_>, mut book: Book) -> Reading {
    for role in Role::ALL {
        book.findings.push(sensors.why_not(role));
    }
    without_release(&mut book);
    Reading {
        outcome: Outcome::Truncated,
        outcome_evidence: vec!["no channel holds a usable sample".to_owned()],
        instants: Vec::new(),
        results: Vec::new(),
        absent: book.absent,
        findings: book.findings,
        motion: None,
        energy: None,
    }
}

fn phase_instants(phases: &Phases, book: &mut Book) {
    const U_BIN_S: f64 = 0.005;
    if let Some(time_s) = phases.loaded_from_s {
        let evidence = format!("tension at the {} above slack", phases.load_channel);
        book.instant("winch_back_start", time_s, U_BIN_S, evidence);
    }
    if let Some(time_s) = phases.hold_start_s {
        book.instant("hold_start", time_s, U_BIN_S, "the shuttle stood drawn from here on");
    }
    if let (None, Some(time_s)) = (phases.release_hint_s, phases.hold_end_s.filter(|_| !phases.loaded_at_end())) {
        book.instant("let_down_start", time_s, U_BIN_S, "the tension left its top for good, without a release");
    }
    if let Some(time_s) = phases.loaded_until_s.filter(|_| !phases.loaded_at_end() && phases.release_hint_s.is_none()) {
        book.instant("slack", time_s, U_BIN_S, format!("tension at the {} last above slack", phases.load_channel));
    }
}

fn smoothed(sensors: &Sensors<'_>, phases: &Phases, release: &Release, rig: &Rig) -> Option<Track> {
    let setting = Setting {
        release_s: release.time_s,
        u_release_s: release.u_s,
        stood_from_s: phases.hold_start_s,
        gravity_along_mps2: gravity_along_mps2(rig),
        planned_x_m: rig.rail.zero_mark_x_m - rig.plan.draw_m,
        u_planned_x_m: U_PLANNED_X_M,
        brake_x_m: rig.rail.brake_x_m,
        end_s: phases.end_s,
    };
    motion::track(sensors.position, sensors.specific_force, &setting)
}

/// What the power stroke showed.
#[derive(Debug, Clone, Default)]
pub(super) struct Stroke {
    pub separation: Option<Separation>,
    pub step: Option<Step>,
    /// Why the payload is taken to have stayed on the shuttle.
    pub together: Option<String>,
}

/// Separation and all that hangs on it.
fn stroke_rows(sensors: &Sensors<'_>, track: Option<&Track>, release: &Release, rig: &Rig, book: &mut Book) -> Stroke {
    let Some(track) = track else {
        let reason = format!(
            "needs an encoder or an accelerometer: {}; {}",
            sensors.why_not(Role::ShuttlePosition),
            sensors.why_not(Role::ShuttleSpecificForce)
        );
        motion_absent(&reason, book);
        return Stroke::default();
    };
    if track.consistency > MISFIT {
        book.findings.push(format!(
            "encoder and accelerometer disagree: innovations {:.1} times as large as their noise allows; the motion's uncertainty is widened by that",
            track.consistency.sqrt()
        ));
    }
    peak::report_sensor(track, book);
    let crossing = match launch::find(track, release.time_s, rig) {
        Ok(crossing) => crossing,
        Err(reason) => {
            motion_absent(&reason, book);
            return Stroke::default();
        }
    };
    let step = stroke::step(track, release.time_s, crossing.time_s);
    let (separation, evidence) = match step.filter(Step::is_up) {
        Some(step) => (launch::at(track, step.time_s, U_STEP_S), left_early(&step)),
        None => (crossing, launch::evidence(&crossing, rig)),
    };
    peak::report(sensors, track, (release.time_s, separation.time_s), rig, book);
    if let Some(together) = stroke::coasted_together(track, &crossing, rig).filter(|_| !step.is_some_and(|s| s.is_up()))
    {
        for name in SEPARATION_NAMES {
            book.absent(name, together.clone());
        }
        return Stroke { separation: None, step, together: Some(together) };
    }
    launch::report(&separation, &evidence, track, sensors, rig, book);
    Stroke { separation: Some(separation), step, together: None }
}

/// How well the instant of a step is known.
const U_STEP_S: f64 = 2e-4;

fn left_early(step: &Step) -> String {
    format!(
        "specific force of the shuttle rose at once from {:.0} to {:.0} m/s² at x = {:.2} m: it became lighter",
        step.from_mps2, step.to_mps2, step.x_m
    )
}

/// Mean normalised squared innovation above which the sensors are said to disagree.
const MISFIT: f64 = 9.0;

const SEPARATION_NAMES: [&str; 3] = ["launch_speed", "airspeed_at_separation", "separation_x"];

fn motion_absent(reason: &str, book: &mut Book) {
    for name in SEPARATION_NAMES.into_iter().chain(peak::NAMES) {
        book.absent(name, reason);
    }
}

fn without_release(book: &mut Book) {
    const REASON: &str = "no release was found";
    book.absent("release_time", REASON);
    motion_absent(REASON, book);
    for name in ["closure_force", "arrest_peak_g", "arrest_distance"] {
        book.absent(name, REASON);
    }
}

/// After a release the specific force along the rail must rise.
fn refuse_reversed_accelerometer(sensors: &mut Sensors<'_>, release: &Release) {
    let Some(signal) = sensors.specific_force else { return };
    let Some(standing) = release.standing_force_mps2 else { return };
    let Some(after) = super::series::stats_between(signal, release.time_s + 0.01, release.time_s + 0.06) else {
        return;
    };
    let change = after.mean - standing;
    if change < -5.0 {
        sensors.refuse(
            Role::ShuttleSpecificForce,
            format!(
                "channel {}: specific force changes by {change:.1} m/s² at the release; a launch raises it, so its sign is reversed or it sits the wrong way round",
                signal.name
            ),
        );
    }
}

#[cfg(test)]
mod tests;
