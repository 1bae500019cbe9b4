//! The reading itself: each question in turn, each answer or its absence written down.

use crate::calibration::Signal;
use crate::rig::local_gravity_mps2;
use crate::rig::{InputMeaning, Rig, Role};

use super::arrest;
use super::beside::{Beside, EdgeSeen};
use super::cords;
use super::dynamics::RailModel;
use super::energy;
use super::impulse;
use super::launch::{self, Separation};
use super::motion::{self, Setting, Track};
use super::others;
use super::outcome::{self, Evidence};
use super::overspeed;
use super::peak;
use super::phases::Phases;
use super::release::{self, Release};
use super::result::{Outcome, Reading};
use super::rows::Book;
use super::sensors::Sensors;
use super::slips::{Repaired, repaired};
use super::stroke::{self, Step};
use super::tension;
use super::verdict::verdicts;

/// How well the nominal place of the drawn shuttle is known without an encoder.
const U_PLANNED_X_M: f64 = 0.05;

/// Everything a trial's signals say by themselves, without a model of the launcher.
///
/// Never fails: what cannot be had is in [`Reading::absent`] with its reason.
pub fn read(signals: &[Signal], rig: &Rig) -> Reading {
    read_beside(signals, &Beside::default(), rig)
}

/// The same with what was recorded beside the channels: the release input takes part in the release instant, gates,
/// recorder and camera are compared with the motion.
pub fn read_beside(signals: &[Signal], beside: &Beside, rig: &Rig) -> Reading {
    let mut book = Book::default();
    let repairs: Vec<Option<Repaired>> = signals.iter().map(repaired).collect();
    if repairs.iter().all(Option::is_none) {
        return read_whole(signals, beside, rig, book);
    }
    let whole: Vec<Signal> = signals
        .iter()
        .zip(repairs)
        .map(|(signal, repair)| {
            repair.map_or_else(
                || signal.clone(),
                |Repaired { signal, findings }| {
                    book.findings.extend(findings);
                    signal
                },
            )
        })
        .collect();
    read_whole(&whole, beside, rig, book)
}

fn read_whole(signals: &[Signal], beside: &Beside, rig: &Rig, mut book: Book) -> Reading {
    let mut sensors = Sensors::new(signals, rig);
    let Some(phases) = Phases::find(&sensors, rig) else { return nothing(&sensors, rig, book) };
    let release =
        phases.release_hint_s.and_then(|hint_s| release::find(hint_s, &sensors, release_edges(beside, rig), &mut book));
    if let Some(release) = &release {
        refuse_reversed_accelerometer(&mut sensors, release);
    }
    for (_, reason) in &sensors.refused {
        book.findings.push(reason.clone());
    }
    phase_instants(&phases, &mut book);
    let hold = tension::report(&sensors, &phases, release.as_ref(), rig, &mut book);
    let gravity_along_mps2 = gravity_along_mps2(rig);
    cords::report(&sensors, &phases, &hold, gravity_along_mps2, rig, &mut book);
    // Up to the release an encoder that can't follow a launch is right.
    if let Some(release) = &release {
        refuse_lagging_encoder(&mut sensors, release, &mut book);
    }
    let track = release.as_ref().and_then(|release| smoothed(&sensors, &phases, release, &hold, rig));
    let rows = release.as_ref().map(|release| stroke_rows(&sensors, track.as_ref(), release, &hold, rig, &mut book));
    let stroke = rows.unwrap_or_default();
    let separation = stroke.separation;
    if release.is_none() {
        without_release(rig, &mut book);
    }
    let doubt = match (&release, &track, &separation) {
        (Some(release), Some(track), Some(separation)) => {
            impulse::report(&sensors, release, track, separation, rig, &mut book)
        }
        _ => None,
    };
    let launch = separation.as_ref().ok_or("no separation was found");
    let weighed = launch.and_then(|launch| doubt.map_or(Ok(launch), Err));
    let energy = energy::report(&hold, weighed, gravity_along_mps2, rig, &mut book);
    if let (Some(release), Some(track)) = (&release, &track) {
        energy::closure(&hold, release, track, rig, &mut book);
        arrest::report(&sensors, track, separation.as_ref(), rig, &mut book);
    }
    if let (Some(release), Some(track), Some(separation)) = (&release, &track, &separation) {
        others::report(beside, track, (release.time_s, release.u_s), separation, rig, &mut book);
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
    let verdicts = verdicts(rig, &book);
    book.instants.sort_by(|a, b| a.time_s.total_cmp(&b.time_s));
    Reading {
        outcome,
        outcome_evidence,
        instants: book.instants,
        results: book.results,
        absent: book.absent,
        verdicts,
        findings: book.findings,
        motion: track.map(|track| track.motion),
        energy,
    }
}

/// Falling edges of the release input.
fn release_edges<'a>(beside: &'a Beside, rig: &'a Rig) -> impl Iterator<Item = &'a EdgeSeen> {
    let inputs = rig.details.inputs.iter().filter(|input| input.meaning == InputMeaning::Release);
    inputs.flat_map(|input| {
        beside.edges.iter().filter(|edge| edge.device == input.device && edge.input == input.number && !edge.rising)
    })
}

/// g·sin θ at the site.
fn gravity_along_mps2(rig: &Rig) -> f64 {
    local_gravity_mps2(rig.site.latitude_rad, rig.site.altitude_m) * rig.rail.incline_rad.sin()
}

fn nothing(sensors: &Sensors<'_>, rig: &Rig, mut book: Book) -> Reading {
    for role in Role::ALL.into_iter().filter(|role| !role.is_extra()) {
        book.findings.push(sensors.why_not(role));
    }
    without_release(rig, &mut book);
    Reading {
        outcome: Outcome::Truncated,
        outcome_evidence: vec!["no channel holds a usable sample".to_owned()],
        instants: Vec::new(),
        results: Vec::new(),
        verdicts: verdicts(rig, &book),
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

fn smoothed(
    sensors: &Sensors<'_>,
    phases: &Phases,
    release: &Release,
    hold: &tension::Hold,
    rig: &Rig,
) -> Option<Track> {
    let setting = Setting {
        release_s: release.time_s,
        u_release_s: release.u_s,
        stood_from_s: phases.hold_start_s,
        gravity_along_mps2: gravity_along_mps2(rig),
        planned_x_m: rig.rail.zero_mark_x_m - rig.plan.draw_m,
        u_planned_x_m: U_PLANNED_X_M,
        brake_x_m: rig.rail.brake_x_m,
        end_s: phases.end_s,
        rail: rail_of(rig, hold),
    };
    motion::track(sensors.position, sensors.specific_force, &setting)
}

/// The rail on its feet, hit by the cords' force at once: it swings with √(k/m) and reaches F/√(k·m) (any mechanics text).
/// `None` where the rig file calls it firm.
fn rail_of(rig: &Rig, hold: &tension::Hold) -> Option<RailModel> {
    let support = rig.details.rail_support?;
    let (m_kg, k_n_per_m) = (support.mass_kg.value, support.stiffness_n_per_m.value);
    let force_n = hold.tension_n.map_or(rig.limits.tension_n, |(tension_n, _)| tension_n);
    let speed_mps = force_n / (k_n_per_m * m_kg).sqrt();
    let rate_per_s = (k_n_per_m / m_kg).sqrt();
    (speed_mps.is_finite() && rate_per_s > 0.0).then_some(RailModel { rate_per_s, speed_mps })
}

/// What the power stroke showed.
#[derive(Debug, Clone, Default)]
pub(super) struct Stroke {
    pub separation: Option<Separation>,
    pub step: Option<Step>,
    /// Why the payload is taken to have stayed on the shuttle.
    pub together: Option<String>,
    /// Why there is taken to have been no payload.
    pub alone: Option<String>,
    /// Why encoder and accelerometer can't both be right.
    pub contradiction: Option<String>,
}

/// Separation and all that hangs on it.
fn stroke_rows(
    sensors: &Sensors<'_>,
    track: Option<&Track>,
    release: &Release,
    hold: &tension::Hold,
    rig: &Rig,
    book: &mut Book,
) -> Stroke {
    let Some(track) = track else {
        let reason = format!(
            "needs an encoder or an accelerometer: {}; {}",
            sensors.why_not(Role::ShuttlePosition),
            sensors.why_not(Role::ShuttleSpecificForce)
        );
        motion_absent(&reason, rig, book);
        return Stroke::default();
    };
    if track.consistency > MISFIT {
        book.findings.push(format!(
            "encoder and accelerometer disagree: innovations {:.1} times as large as their noise allows; the motion's uncertainty is widened by that",
            track.consistency.sqrt()
        ));
    }
    if let Some(strain) = track.parted {
        book.findings.push(format!(
            "encoder and accelerometer agree only with an accelerometer scale {strain:.1} times off what its calibration allows, or the rig file's rail is slow: the rail moved under the encoder, so the speed against the ground is the accelerometer's alone"
        ));
    }
    peak::report_sensor(track, book);
    if let Some(alone) = stroke::alone(hold, release, track, rig) {
        motion_absent(&alone, rig, book);
        return Stroke { alone: Some(alone), ..Stroke::default() };
    }
    let crossing = match launch::find(track, release.time_s, rig) {
        Ok(crossing) => crossing,
        Err(reason) => {
            motion_absent(&reason, rig, book);
            return Stroke::default();
        }
    };
    let step = stroke::step(track, sensors.specific_force, release, crossing.time_s);
    let (separation, evidence) = match step.filter(Step::is_up) {
        Some(step) => (launch::at(track, step.time_s, U_STEP_S), left_early(&step)),
        None => (crossing, launch::evidence(&crossing, rig)),
    };
    peak::report(sensors, track, (release.time_s, release.u_s), separation.time_s, rig, book);
    if let Some(together) = stroke::coasted_together(track, &crossing, rig).filter(|_| !step.is_some_and(|s| s.is_up()))
    {
        for name in SEPARATION_NAMES {
            book.absent(name, together.clone());
        }
        return Stroke { step, together: Some(together), ..Stroke::default() };
    }
    if let Some(contradiction) = launch::contradiction(&separation, track, rail_of(rig, hold)) {
        book.findings.push(contradiction.clone());
        for name in SEPARATION_NAMES {
            book.absent(name, contradiction.clone());
        }
        return Stroke { step, contradiction: Some(contradiction), ..Stroke::default() };
    }
    launch::report(&separation, &evidence, track, sensors, rig, book);
    Stroke { separation: Some(separation), step, ..Stroke::default() }
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

fn motion_absent(reason: &str, rig: &Rig, book: &mut Book) {
    for name in SEPARATION_NAMES {
        book.absent(name, reason);
    }
    for name in peak::names(rig) {
        book.absent(&name, reason);
    }
}

fn without_release(rig: &Rig, book: &mut Book) {
    const REASON: &str = "no release was found";
    book.absent("release_time", REASON);
    motion_absent(REASON, rig, book);
    let rest = ["closure_force", "cord_impulse", "moving_mass_by_impulse", "arrest_peak_g", "arrest_distance"];
    for name in rest {
        book.absent(name, REASON);
    }
}

/// Beyond the speed an encoder can follow, its place and speed are plausible and wrong.
fn refuse_lagging_encoder(sensors: &mut Sensors<'_>, release: &Release, book: &mut Book) {
    let (Some(position), Some(force)) = (sensors.position, sensors.specific_force) else { return };
    let Some((beyond_mps, by_mps)) = overspeed::lags_beyond(position, force, release) else { return };
    let reason = format!(
        "channel {}: beyond {beyond_mps:.1} m/s it falls behind the accelerometer, by {by_mps:.1} m/s at the end of the stroke: the encoder or its counter loses counts at that speed, so neither its place nor its speed is used from the release on",
        position.name
    );
    book.findings.push(reason.clone());
    sensors.refuse(Role::ShuttlePosition, reason);
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
