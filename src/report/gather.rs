//! From a sealed trial to its page: reads the file, derives everything again, replays, and fills in the page's data.

use thiserror::Error;

use super::beside::add_replay;
use super::page::{
    DeviceHealth, EnergyBar, EnergyPart, Heading, Inspection, MotionCurve, MotionOverRail, PageLimits, PhaseSpan,
    RailStrip, Trace, TrialPage,
};
use crate::archive::{Amended, AmendedError, edges_of};
use crate::calibration::{self, Signal};
use crate::reading::{Beside, EnergyAudit, Motion, Reading, read_beside};
use crate::replay::replay;
use crate::rig::{Rig, Role};
use crate::trial::{ClockRow, Header, TrialError, TrialFile};

/// In the order of the picture's key.
const TENSIONS: [Role; 2] = [Role::ReleaseLineTension, Role::CordAnchorTension];

/// Why a trial has no page.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum GatherError {
    #[error("the trial file can't be read: {0}")]
    Trial(#[from] TrialError),
    #[error(transparent)]
    Amended(#[from] AmendedError),
}

/// The page of a sealed trial, with results derived again by this program.
///
/// # Errors
/// [`GatherError`]: the file can't be read, or its rig file is not understood. What can't be derived is no error: it is
/// absent on the page with its reason.
pub fn page_of(amended: &Amended) -> Result<TrialPage, GatherError> {
    let trial = &amended.trial;
    let amended_rig = amended.rig()?;
    let signals = amended.signals(&amended_rig)?;
    let rig = amended_rig.rig;
    let beside = Beside { edges: edges_of(trial)?, ..Beside::default() };
    let mut reading = read_beside(&signals, &beside, &rig);
    reading.findings.extend(calibration::said_of(&rig, trial.header().day(), &signals));
    let mut page = page(trial.header(), &rig, &signals, &reading);
    add_replay(&mut page, &replay(&signals, &reading, &rig));
    page.health = trial.device_names()?.iter().map(|name| health(trial, name)).collect::<Result<_, _>>()?;
    page.hashes = hashes(amended)?;
    page.inspections = inspections(amended, &rig)?;
    page.said = said(amended)?;
    page.cautions.extend(amended_rig.changes.iter().map(|change| format!("Amended: {change}.")));
    let wrong = |finding: &String| format!("The amendments are not sound: {finding}.");
    page.cautions.extend(amended.findings.iter().map(wrong));
    Ok(page)
}

/// Conditions, notes and amendments, each with who says it and where.
fn said(amended: &Amended) -> Result<Vec<(String, String)>, GatherError> {
    let mut said = Vec::new();
    for (condition, origin) in amended.conditions()? {
        let value = format!("{} {}", condition.value, crate::units::shown_unit(&condition.unit));
        said.push((format!("{} ({origin}, {})", condition.name, condition.source), value));
    }
    said.extend(amended.notes()?.into_iter().map(|(origin, who, text)| (format!("note ({origin}, {who})"), text)));
    let history = |amendment: &crate::archive::Amendment| {
        let what =
            format!("amendment {:04}, {} by {}", amendment.number, to_the_second(&amendment.written), amendment.person);
        (what, amendment.reason.clone())
    };
    said.extend(amended.chain.iter().map(history));
    Ok(said)
}

/// The page of signals and their reading; health and hashes are left to who has the file.
pub fn page(header: &Header, rig: &Rig, signals: &[Signal], reading: &Reading) -> TrialPage {
    TrialPage {
        heading: heading(header, rig, reading),
        rail: Some(rail(rig, reading)),
        limits: PageLimits {
            tension_n: Some(rig.limits.tension_n),
            peak_g: Some(rig.limits.peak_g),
            launch_speed_mps: Some((rig.plan.launch_speed_min_mps, rig.plan.launch_speed_max_mps)),
        },
        proof_load: proof_load(rig),
        tension: TENSIONS.iter().flat_map(|role| signals.iter().filter(|s| s.role == *role)).map(trace).collect(),
        phases: phases(signals, reading),
        instants: reading.instants.clone(),
        motion: reading.motion.as_ref().map(|motion| motion_over_rail(motion, reading)),
        results: reading.results.clone(),
        absent: reading.absent.clone(),
        verdicts: reading.verdicts.clone(),
        over_time: reading.motion.clone(),
        energy: reading.energy.as_ref().map(|audit| energy(audit, reading)),
        cautions: reading.findings.clone(),
        ..TrialPage::default()
    }
}

fn proof_load(rig: &Rig) -> String {
    let none = || "No proof load is recorded: the g limit is a statement only.".to_owned();
    rig.details.proof_load.as_ref().map_or_else(none, |proof| format!("The g limit rests on a {}.", proof.sentence()))
}

fn heading(header: &Header, rig: &Rig, reading: &Reading) -> Heading {
    let program = env!("CARGO_PKG_VERSION");
    Heading {
        trial_id: header.trial_id.clone(),
        rig: header.rig.clone(),
        payload: rig.payload.name.clone(),
        started: to_the_second(&header.started),
        started_quality: format!("wall clock: {}", header.started_quality),
        outcome: reading.outcome.word().to_owned(),
        outcome_evidence: reading.outcome_evidence.clone(),
        program: format!("Sealed by tautrail {}, derived and drawn by tautrail {program}", header.program_version),
        invented: rig.invented,
    }
}

/// Nobody reads nanoseconds of a wall clock.
fn to_the_second(rfc3339: &str) -> String {
    let Some((seconds, rest)) = rfc3339.split_once('.') else { return rfc3339.to_owned() };
    format!("{seconds}{}", rest.trim_start_matches(|letter: char| letter.is_ascii_digit()))
}

/// Items of the rig file's stages, answered by an amendment, or where a mark of the trial or a note begins with the item and
/// a colon.
fn inspections(amended: &Amended, rig: &Rig) -> Result<Vec<Inspection>, GatherError> {
    let mut said: Vec<String> = amended.trial.events()?.into_iter().map(|event| event.text).collect();
    let notes = amended.notes()?.into_iter();
    said.extend(notes.flat_map(|(_, _, text)| text.lines().map(str::to_owned).collect::<Vec<_>>()));
    let answer = |item: &str| {
        if let Some((answer, origin)) = amended.answer(item) {
            return Some(format!("{answer} ({origin})"));
        }
        said.iter().find_map(|text| {
            let (asked, answer) = text.split_once(':')?;
            asked.trim().eq_ignore_ascii_case(item.trim()).then(|| answer.trim().to_owned())
        })
    };
    let items = rig.details.stages.iter().flat_map(|stage| stage.inspect.iter().map(move |item| (stage, item)));
    Ok(items
        .map(|(stage, item)| Inspection { stage: stage.name.clone(), item: item.clone(), answer: answer(item) })
        .collect())
}

fn rail(rig: &Rig, reading: &Reading) -> RailStrip {
    let result = |name: &str| reading.result(name).map(|row| row.value);
    let rest = reading.motion.as_ref().and_then(|motion| motion.x_m.last().copied());
    RailStrip {
        length_m: rig.rail.length_m,
        incline_deg: rig.incline_deg(),
        zero_mark_x_m: rig.rail.zero_mark_x_m,
        brake_x_m: rig.rail.brake_x_m,
        release_x_m: result("draw").map(|draw_m| rig.rail.zero_mark_x_m - draw_m),
        separation_x_m: result("separation_x"),
        rest_x_m: rest.filter(|_| reading.instant("rest").is_some()),
    }
}

fn trace(signal: &Signal) -> Trace {
    let role = signal.role.word().replace("_tension", "").replace('_', " ");
    Trace {
        name: format!("{} ({role})", signal.name),
        time_s: signal.time_s.clone(),
        value: signal.value.clone(),
        step_s: 1.0 / signal.nominal_rate_hz,
    }
}

/// What follows each instant until the next, from the first sample to the last.
fn phases(signals: &[Signal], reading: &Reading) -> Vec<PhaseSpan> {
    let first = signals.iter().filter_map(|signal| signal.time_s.first()).copied().fold(f64::INFINITY, f64::min);
    let last = signals.iter().filter_map(|signal| signal.time_s.last()).copied().fold(f64::NEG_INFINITY, f64::max);
    let phase = |name: &str| match name {
        "winch_back_start" => Some("winch-back"),
        "hold_start" => Some("hold"),
        "release" => Some("launch"),
        "separation" => Some("run-out"),
        "let_down_start" => Some("let-down"),
        "rest" => Some("rest"),
        "slack" => Some("slack"),
        _ => None,
    };
    let mut starts = vec![("slack", first)];
    starts.extend(reading.instants.iter().filter_map(|instant| Some((phase(&instant.name)?, instant.time_s))));
    let ends = starts.iter().skip(1).map(|start| start.1).chain([last]);
    let span =
        |((name, from_s), to_s): (&(&str, f64), f64)| PhaseSpan { name: (*name).to_owned(), from_s: *from_s, to_s };
    starts.iter().zip(ends).map(span).filter(|phase| phase.to_s > phase.from_s).collect()
}

fn motion_over_rail(motion: &Motion, reading: &Reading) -> MotionOverRail {
    let from = reading.instant("release").map_or(f64::NEG_INFINITY, |release| release.time_s);
    let first = motion.time_s.partition_point(|time_s| *time_s < from);
    let part = |column: &[f64]| column.get(first..).unwrap_or_default().to_vec();
    MotionOverRail {
        measured: MotionCurve {
            x_m: part(&motion.x_m),
            v_mps: part(&motion.v_mps),
            a_mps2: part(&motion.a_mps2),
            u_v_mps: part(&motion.u_v_mps),
            u_a_mps2: part(&motion.u_a_mps2),
        },
        modelled: None,
        separation_x_m: reading.result("separation_x").map(|row| row.value),
        sensors: motion.sensors.clone(),
    }
}

fn energy(audit: &EnergyAudit, reading: &Reading) -> EnergyBar {
    let part = |name: &str, energy_j: f64, row: &str| EnergyPart {
        name: name.to_owned(),
        energy_j,
        standard_uncertainty_j: reading.result(row).map(|row| row.standard_uncertainty),
    };
    EnergyBar {
        total_name: "work of the release line from zero mark to hold".into(),
        total_j: audit.stored_j,
        parts: vec![
            part("shuttle and payload, kinetic at separation", audit.kinetic_j, "kinetic_energy"),
            part("height over the zero mark", audit.potential_j, "potential_energy"),
            part("friction both ways, hysteresis, drag, motion left in the cords", audit.lost_j, "energy_lost"),
        ],
    }
}

fn health(trial: &TrialFile, device: &str) -> Result<DeviceHealth, GatherError> {
    let record = trial.device(device)?;
    let blocks = trial.blocks(device)?;
    let (clock, _) = trial.clock(device)?;
    let mut refused: Vec<(String, u64)> = Vec::new();
    for rejected in &record.rejected {
        match refused.iter_mut().find(|(reason, _)| *reason == rejected.reason) {
            Some((_, n)) => *n += 1,
            None => refused.push((rejected.reason.clone(), 1)),
        }
    }
    refused.sort_by_key(|(_, n)| std::cmp::Reverse(*n));
    if record.rejected_not_kept > 0 {
        refused.push(("not kept".into(), record.rejected_not_kept));
    }
    Ok(DeviceHealth {
        device: device.to_owned(),
        firmware: record.descriptions.last().map_or_else(|| "unknown".to_owned(), |known| known.firmware.clone()),
        n_blocks: blocks.len() as u64,
        n_samples: blocks.iter().map(|block| u64::from(block.n_samples)).sum(),
        n_gaps: record.gaps.len() as u64,
        n_missing: record.gaps.iter().fold(0, |sum, gap| gap.n_missing.saturating_add(sum)),
        refused,
        clock: clock_words(&clock),
    })
}

fn clock_words(pieces: &[ClockRow]) -> String {
    let Some(worst) = pieces.iter().map(|piece| piece.standard_uncertainty_ns).max_by(f64::total_cmp) else {
        return "no map".into();
    };
    let bound = if pieces.iter().all(|piece| piece.two_way) { "two-way timing" } else { "arrivals" };
    format!(
        "{} piece{}, u ≤ {:.0} µs, from {bound}",
        pieces.len(),
        if pieces.len() == 1 { "" } else { "s" },
        worst / 1e3
    )
}

/// Digests as sealed, with a word where the file no longer holds what was sealed.
fn hashes(amended: &Amended) -> Result<Vec<(String, String)>, GatherError> {
    let trial = &amended.trial;
    let mut hashes = vec![("raw, all devices".to_owned(), trial.sealed_raw_digest()?)];
    for digest in trial.raw_digests()? {
        let word = if digest.sealed == digest.found { "" } else { " — THE FILE NO LONGER MATCHES" };
        hashes.push((format!("/raw/{}", digest.device), format!("{}{word}", digest.sealed)));
    }
    hashes.extend(trial.texts_with_digests()?.into_iter().map(|text| (text.text.name, text.sealed)));
    let amendment = |a: &crate::archive::Amendment| (format!("amendment {:04}", a.number), a.sha256.clone());
    hashes.extend(amended.chain.iter().map(amendment));
    Ok(hashes)
}
