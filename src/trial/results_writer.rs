//! `/result`: one scalar dataset a derived number, with all that qualifies it as attributes.

use hdf5::Group;

use super::attribute::{new_group, put_number, put_number_dataset, put_numbers, put_text, put_texts};
use super::column::{Column, ROWS_PER_CHUNK};
use super::content::{ResultEntry, ResultSet};
use super::error::TrialError;
use super::names::free_member_name;
use super::schema::{AbsentTable, EVIDENCE, FINDINGS, InstantTable, RESULT_RESERVED};
use super::table::Table;

pub(super) fn write(result: &Group, results: &ResultSet) -> Result<(), TrialError> {
    put_text(result, "outcome", &results.outcome)?;
    let sentences = [(EVIDENCE, &results.outcome_evidence), (FINDINGS, &results.findings)];
    for (name, texts) in sentences {
        let mut column = Column::<String>::create(result, name, "", ROWS_PER_CHUNK)?;
        column.extend(texts)?;
        column.finish(name)?;
    }
    let mut taken: Vec<String> = RESULT_RESERVED.iter().map(|name| (*name).to_owned()).collect();
    for entry in &results.entries {
        let member = free_member_name(&entry.name, |name| taken.iter().any(|other| other == name));
        write_entry(result, &member, entry)?;
        taken.push(member);
    }
    let mut instants = InstantTable::create(&new_group(result, "instants", "NXcollection")?)?;
    results.instants.iter().try_for_each(|row| instants.push(row))?;
    instants.finish("instants")?;
    let mut absent = AbsentTable::create(&new_group(result, "absent", "NXcollection")?)?;
    results.absent.iter().try_for_each(|row| absent.push(row))?;
    absent.finish("absent")?;
    Ok(())
}

fn write_entry(result: &Group, member: &str, entry: &ResultEntry) -> Result<(), TrialError> {
    let dataset = put_number_dataset(result, member, entry.value)?;
    put_text(&dataset, "name", &entry.name)?;
    put_text(&dataset, "units", &entry.unit)?;
    put_number(&dataset, "standard_uncertainty", entry.standard_uncertainty)?;
    put_number(&dataset, "coverage_low", entry.low)?;
    put_number(&dataset, "coverage_high", entry.high)?;
    put_number(&dataset, "coverage_probability", 0.95_f64)?;
    put_text(&dataset, "method", &entry.method)?;
    if !entry.budget.is_empty() {
        let (sources, shares): (Vec<&str>, Vec<f64>) = entry.budget.iter().map(|(s, u)| (s.as_str(), *u)).unzip();
        put_texts(&dataset, "budget_sources", &sources)?;
        put_numbers(&dataset, "budget_standard_uncertainties", &shares)?;
    }
    Ok(())
}
