//! The tables of a trial: the trial itself, its results, instants, events and conditions.

use jiff::Timestamp;

use super::ExportError;
use super::table::{Column, Data, Table};
use crate::archive::amendment::Amended;
use crate::archive::catalogue::effective;

pub(super) fn of_trial(amended: &Amended, held: bool) -> Result<Vec<Table>, ExportError> {
    let effective = effective(amended)?;
    let header = amended.trial.header();
    let id = || std::iter::repeat(header.trial_id.clone());
    let one = |name, text: &str| Column::text(name, std::iter::once(text.to_owned()));
    let started = header.started.parse::<Timestamp>().ok().and_then(|at| i64::try_from(at.as_nanosecond()).ok());
    let file = amended.path.file_name().unwrap_or_default().to_string_lossy();
    let trials = Table {
        name: "trials",
        columns: vec![
            one("trial_id", &header.trial_id),
            one("file", &file),
            Column { name: "started", unit: None, data: Data::Instant(vec![started]) },
            one("started_quality", &header.started_quality),
            one("outcome", &effective.results.outcome),
            one("series", &header.series),
            one("configuration_hash", &header.configuration_hash),
            one("raw_sha256", &amended.raw_sha256),
            one("program_version", &header.program_version),
            one("cords", &effective.cords.join(" ")),
            Column { name: "n_amendments", unit: None, data: Data::Whole(vec![Some(amended.chain.len() as i64)]) },
            Column { name: "held", unit: None, data: Data::Truth(vec![Some(held)]) },
        ],
    };
    let entries = &effective.results.entries;
    let results = Table {
        name: "results",
        columns: vec![
            Column::text("trial_id", id().take(entries.len())),
            Column::text("name", entries.iter().map(|entry| entry.name.clone())),
            Column::number("value", None, entries.iter().map(|entry| entry.value)),
            Column::number("standard_uncertainty", None, entries.iter().map(|entry| entry.standard_uncertainty)),
            Column::number("low", None, entries.iter().map(|entry| entry.low)),
            Column::number("high", None, entries.iter().map(|entry| entry.high)),
            Column::text("unit", entries.iter().map(|entry| entry.unit.clone())),
            Column::text("method", entries.iter().map(|entry| entry.method.clone())),
        ],
    };
    let instants = &effective.results.instants;
    let instants = Table {
        name: "instants",
        columns: vec![
            Column::text("trial_id", id().take(instants.len())),
            Column::text("name", instants.iter().map(|instant| instant.name.clone())),
            Column::number("time_s", Some("s"), instants.iter().map(|instant| instant.time_s)),
            Column::number("u_time_s", Some("s"), instants.iter().map(|instant| instant.standard_uncertainty_s)),
            Column::text("evidence", instants.iter().map(|instant| instant.evidence.clone())),
        ],
    };
    Ok(vec![trials, results, instants, events(amended)?, conditions(amended)?])
}

fn events(amended: &Amended) -> Result<Table, ExportError> {
    let events = amended.trial.events()?;
    let id = std::iter::repeat_n(amended.trial.header().trial_id.clone(), events.len());
    Ok(Table {
        name: "events",
        columns: vec![
            Column::text("trial_id", id),
            Column::number("time_s", Some("s"), events.iter().map(|event| event.time_s)),
            Column::text("kind", events.iter().map(|event| event.kind.clone())),
            Column::text("source", events.iter().map(|event| event.source.clone())),
            Column::text("person", events.iter().map(|event| event.person.clone())),
            Column::text("text", events.iter().map(|event| event.text.clone())),
        ],
    })
}

fn conditions(amended: &Amended) -> Result<Table, ExportError> {
    let conditions = amended.conditions()?;
    let id = std::iter::repeat_n(amended.trial.header().trial_id.clone(), conditions.len());
    Ok(Table {
        name: "conditions",
        columns: vec![
            Column::text("trial_id", id),
            Column::text("name", conditions.iter().map(|(condition, _)| condition.name.clone())),
            Column::number("value", None, conditions.iter().map(|(condition, _)| condition.value)),
            Column::text("unit", conditions.iter().map(|(condition, _)| condition.unit.clone())),
            Column::text("source", conditions.iter().map(|(condition, _)| condition.source.clone())),
            Column::text("said_in", conditions.iter().map(|(_, origin)| origin.to_string())),
        ],
    })
}
