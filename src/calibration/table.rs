//! Bench readings as CSV: a header row with the columns' names, `#` begins a comment.

use thiserror::Error;

use crate::rig::SheetReading;

const COLUMNS: [&str; 9] = ["run", "rotation_deg", "direction", "load", "counts", "sd", "n", "held_s", "excitation_v"];

/// What is wrong with a table, and where.
#[derive(Debug, Clone, PartialEq, Eq, Error)]
#[non_exhaustive]
pub enum TableError {
    #[error("the table has no header row; its columns are: {}", COLUMNS.join(", "))]
    Empty,
    #[error("line {line}: column {name:?} is not known, known: {}", COLUMNS.join(", "))]
    UnknownColumn { line: usize, name: String },
    #[error("line {line}: column {name:?} stands twice")]
    TwiceColumn { line: usize, name: String },
    #[error("line {line}: there is no column {name:?}, which every table needs")]
    MissingColumn { line: usize, name: &'static str },
    #[error("line {line}: has {found} fields, the header has {wanted}")]
    Fields { line: usize, found: usize, wanted: usize },
    #[error("line {line}: {name}: {text:?} is no number")]
    NoNumber { line: usize, name: String, text: String },
}

/// Readings of a CSV text, each with its line.
///
/// # Errors
/// [`TableError`] names line and column.
pub fn readings_from_csv(text: &str) -> Result<Vec<SheetReading>, TableError> {
    let mut lines = text
        .lines()
        .enumerate()
        .map(|(index, line)| (index + 1, line.trim()))
        .filter(|(_, line)| !line.is_empty() && !line.starts_with('#'));
    let (header_line, header) = lines.next().ok_or(TableError::Empty)?;
    let columns = columns(header_line, header)?;
    lines.map(|(line, text)| reading(line, text, &columns)).collect()
}

fn columns(line: usize, header: &str) -> Result<Vec<&str>, TableError> {
    let mut columns: Vec<&str> = Vec::new();
    for name in header.split(',').map(str::trim) {
        if !COLUMNS.contains(&name) {
            return Err(TableError::UnknownColumn { line, name: name.to_owned() });
        }
        if columns.contains(&name) {
            return Err(TableError::TwiceColumn { line, name: name.to_owned() });
        }
        columns.push(name);
    }
    for name in ["direction", "counts"] {
        if !columns.contains(&name) {
            return Err(TableError::MissingColumn { line, name });
        }
    }
    Ok(columns)
}

fn reading(line: usize, text: &str, columns: &[&str]) -> Result<SheetReading, TableError> {
    let fields: Vec<&str> = text.split(',').map(str::trim).collect();
    if fields.len() != columns.len() {
        return Err(TableError::Fields { line, found: fields.len(), wanted: columns.len() });
    }
    let mut reading = SheetReading { place: format!("line {line}"), ..SheetReading::default() };
    for (name, field) in columns.iter().zip(fields) {
        let number = || {
            let wrong = || TableError::NoNumber { line, name: (*name).to_owned(), text: field.to_owned() };
            field.parse::<f64>().map_err(|_| wrong())
        };
        let optional = || if field.is_empty() { Ok(None) } else { number().map(Some) };
        match *name {
            "run" => field.clone_into(&mut reading.run),
            "rotation_deg" => reading.rotation_deg = optional()?,
            "direction" => field.clone_into(&mut reading.direction),
            "load" => field.clone_into(&mut reading.load),
            "counts" => reading.counts = number()?,
            "sd" => reading.sd_counts = optional()?,
            "n" => reading.n = optional()?,
            "held_s" => reading.held_s = optional()?,
            _ => reading.excitation_v = optional()?,
        }
    }
    Ok(reading)
}

/// The readings as CSV, as [`readings_from_csv`] takes them.
pub fn readings_to_csv(readings: &[SheetReading]) -> String {
    let mut text = COLUMNS.join(",");
    text.push('\n');
    for reading in readings {
        let optional = |value: Option<f64>| value.map(|value| value.to_string()).unwrap_or_default();
        let fields = [
            reading.run.clone(),
            optional(reading.rotation_deg),
            reading.direction.clone(),
            reading.load.clone(),
            reading.counts.to_string(),
            optional(reading.sd_counts),
            optional(reading.n),
            optional(reading.held_s),
            optional(reading.excitation_v),
        ];
        text.push_str(&fields.join(","));
        text.push('\n');
    }
    text
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    #[test]
    fn a_table_is_read_with_its_lines() {
        let text = "# invented\nrun,direction,load,counts,sd\n1,up,0,12000.5,\n\n1, up, A+B, 2e4,3.5\n";
        let readings = readings_from_csv(text).unwrap();
        assert_eq!(readings[0].place, "line 3");
        assert_eq!(readings[1].place, "line 5");
        assert_eq!((readings[1].load.as_str(), readings[1].counts, readings[1].sd_counts), ("A+B", 2e4, Some(3.5)));
        assert_eq!(readings[0].sd_counts, None);
    }

    #[test]
    fn what_is_wrong_in_a_table_is_told_with_its_line() {
        let said = |text: &str| readings_from_csv(text).expect_err("must be refused").to_string();
        assert!(said("# nothing\n").starts_with("the table has no header row"));
        assert!(said("run,weight,counts\n").starts_with("line 1: column \"weight\" is not known, known: run"));
        assert_eq!(said("run,direction,run,counts"), "line 1: column \"run\" stands twice");
        assert_eq!(said("run,direction"), "line 1: there is no column \"counts\", which every table needs");
        assert_eq!(said("direction,counts\nup\n"), "line 2: has 1 fields, the header has 2");
        assert_eq!(said("direction,counts\nup,twelve\n"), "line 2: counts: \"twelve\" is no number");
    }

    proptest! {
        #[test]
        fn what_is_written_is_read_again(
            rows in prop::collection::vec(("[a-z0-9]{0,4}", "[A-Z+]{0,5}", -1e7..1e7f64, prop::option::of(0.0..1e3f64)), 0..8),
        ) {
            let readings: Vec<SheetReading> = rows
                .into_iter()
                .enumerate()
                .map(|(index, (run, load, counts, held_s))| SheetReading {
                    place: format!("line {}", index + 2),
                    run, load, counts, held_s,
                    direction: "up".to_owned(),
                    ..SheetReading::default()
                })
                .collect();
            prop_assert_eq!(readings_from_csv(&readings_to_csv(&readings)).unwrap(), readings);
        }

        #[test]
        fn no_table_makes_it_panic(text in "(run|direction|counts|load|,|\n|[0-9.e-]{1,4}|\\PC){0,60}") {
            let _ = readings_from_csv(&text);
        }
    }
}
