//! A CSV of cord readings: one header row that names columns with their units, `#` for comments.
//!
//! `serial, cycle, branch, time [s], weight [kg], length [m]`: `weight` is what hangs on the cord, `force` what a cell
//! reads (N, kN, kgf, lbf; "kg" is refused); one of `length` (between the marks), `extension` or `elongation`. `cycle`,
//! `time`, `temperature` and `note` may be left out.

use super::cord_sheet::{Conversion, CordBranch, CordReading};
use crate::units::{self, Dimension};

/// A reading as written.
#[derive(Debug, Clone, Default)]
pub(super) struct Row {
    pub(super) line: usize,
    pub(super) serial: String,
    pub(super) cycle: u32,
    pub(super) branch: String,
    pub(super) time_s: Option<f64>,
    pub(super) force_n: Option<f64>,
    pub(super) weight_kg: Option<f64>,
    pub(super) length_m: Option<f64>,
    pub(super) extension_m: Option<f64>,
    pub(super) elongation: Option<f64>,
    pub(super) temperature_c: Option<f64>,
    pub(super) note: String,
}

impl Row {
    pub(super) fn reading(self, conversion: Conversion) -> Result<CordReading, String> {
        let word = self.branch.trim().to_lowercase();
        let branch = CordBranch::ALL.into_iter().find(|branch| branch.word() == word);
        let branch = branch.ok_or_else(|| format!("branch {:?} is not known: load, hold or unload", self.branch))?;
        let tension_n = match (self.force_n, self.weight_kg) {
            (Some(force_n), None) => force_n,
            (None, Some(weight_kg)) if conversion.newtons_per_kg.is_nan() => {
                return Err(format!(
                    "{weight_kg} kg of weights need gravity, or latitude and altitude, to become a force"
                ));
            }
            (None, Some(weight_kg)) => weight_kg * conversion.newtons_per_kg,
            (None, None) => return Err("has neither force nor weight".into()),
            (Some(_), Some(_)) => return Err("has both force and weight: give one".into()),
        };
        let elongation = match (self.length_m, self.extension_m, self.elongation) {
            (Some(length_m), None, None) => length_m / conversion.free_length_m - 1.0,
            (None, Some(extension_m), None) => extension_m / conversion.free_length_m,
            (None, None, Some(elongation)) => elongation,
            (None, None, None) => return Err("has no length, extension or elongation".into()),
            _ => return Err("has more than one of length, extension and elongation: give one".into()),
        };
        if self.serial.trim().is_empty() {
            return Err("has no serial: which cord is it?".into());
        }
        Ok(CordReading {
            line: self.line,
            serial: self.serial.trim().to_owned(),
            cycle: self.cycle.max(1),
            branch,
            time_s: self.time_s,
            tension_n,
            elongation,
            temperature_c: self.temperature_c,
            note: self.note,
        })
    }
}

/// A column: what it is and the unit of its cells.
#[derive(Debug, Clone, Copy, PartialEq)]
enum Column {
    Serial,
    Cycle,
    Branch,
    Note,
    Quantity(Quantity, &'static str),
}

#[derive(Debug, Clone, Copy, PartialEq)]
enum Quantity {
    Time,
    Force,
    Weight,
    Length,
    Extension,
    Elongation,
    Temperature,
}

impl Quantity {
    const ALL: [(Self, &'static str); 7] = [
        (Self::Time, "time"),
        (Self::Force, "force"),
        (Self::Weight, "weight"),
        (Self::Length, "length"),
        (Self::Extension, "extension"),
        (Self::Elongation, "elongation"),
        (Self::Temperature, "temperature"),
    ];

    const fn dimension(self) -> Dimension {
        match self {
            Self::Time => Dimension::Duration,
            Self::Force => Dimension::Force,
            Self::Weight => Dimension::Mass,
            Self::Length | Self::Extension => Dimension::Length,
            Self::Elongation => Dimension::Ratio,
            Self::Temperature => Dimension::Temperature,
        }
    }
}

/// The readings of a CSV with what is wrong in it, each with its line.
pub(super) fn read(csv: &str, conversion: Conversion) -> (Vec<CordReading>, Vec<String>) {
    let mut lines = csv
        .lines()
        .enumerate()
        .map(|(index, line)| (index + 1, line.trim()))
        .filter(|(_, line)| !line.is_empty() && !line.starts_with('#'));
    let Some((header_line, header)) = lines.next() else { return (Vec::new(), vec!["has no header row".into()]) };
    let columns: Result<Vec<Column>, String> = header.split(',').map(column).collect();
    let columns = match columns {
        Ok(columns) => columns,
        Err(message) => return (Vec::new(), vec![format!("line {header_line}: {message}")]),
    };
    let (mut readings, mut wrong) = (Vec::new(), Vec::new());
    for (line, text) in lines {
        match row(line, text, &columns).and_then(|row| row.reading(conversion)) {
            Ok(reading) => readings.push(reading),
            Err(message) => wrong.push(format!("line {line}: {message}")),
        }
    }
    (readings, wrong)
}

fn column(heading: &str) -> Result<Column, String> {
    let heading = heading.trim();
    let (name, unit) = match heading.split_once('[') {
        Some((name, rest)) => (name.trim().to_lowercase(), rest.trim_end_matches(']').trim()),
        None => (heading.to_lowercase(), ""),
    };
    match name.as_str() {
        "serial" => return Ok(Column::Serial),
        "cycle" => return Ok(Column::Cycle),
        "branch" => return Ok(Column::Branch),
        "note" => return Ok(Column::Note),
        _ => {}
    }
    let Some((quantity, known)) = Quantity::ALL.into_iter().find(|(_, known)| *known == name) else {
        let all = Quantity::ALL.map(|(_, name)| name).join(", ");
        return Err(format!("column {heading:?} is not known: serial, cycle, branch, note, {all}"));
    };
    let dimension = quantity.dimension();
    if unit.is_empty() {
        return Err(format!("column {heading:?} has no unit, write it as \"{known} [{}]\"", example(dimension)));
    }
    units::parse(&format!("1 {unit}"), dimension).map_err(|error| format!("column {heading:?}: {error}"))?;
    let symbol = dimension.units().map(|unit| unit.symbol).find(|symbol| *symbol == unit);
    symbol
        .map(|symbol| Column::Quantity(quantity, symbol))
        .ok_or_else(|| format!("column {heading:?} has no usable unit"))
}

fn example(dimension: Dimension) -> &'static str {
    dimension.units().next().map_or("unit", |unit| unit.symbol)
}

fn row(line: usize, text: &str, columns: &[Column]) -> Result<Row, String> {
    let cells: Vec<&str> = text.splitn(columns.len(), ',').map(str::trim).collect();
    let last_is_note = columns.last() == Some(&Column::Note);
    if cells.len() != columns.len() || (!last_is_note && cells.last().is_some_and(|cell| cell.contains(','))) {
        let found = text.split(',').count();
        return Err(format!("has {found} cells, the header has {} columns", columns.len()));
    }
    let mut row = Row { line, cycle: 1, ..Row::default() };
    for (cell, column) in cells.into_iter().zip(columns) {
        match column {
            Column::Serial => cell.clone_into(&mut row.serial),
            Column::Branch => cell.clone_into(&mut row.branch),
            Column::Note => cell.clone_into(&mut row.note),
            Column::Cycle => {
                row.cycle = cell.parse().map_err(|_| format!("cycle {cell:?} is no whole number from 1"))?;
            }
            Column::Quantity(..) if cell.is_empty() => {}
            Column::Quantity(quantity, unit) => {
                let value =
                    units::parse(&format!("{cell} {unit}"), quantity.dimension()).map_err(|error| error.to_string())?;
                *row.place(*quantity) = Some(value);
            }
        }
    }
    Ok(row)
}

impl Row {
    fn place(&mut self, quantity: Quantity) -> &mut Option<f64> {
        match quantity {
            Quantity::Time => &mut self.time_s,
            Quantity::Force => &mut self.force_n,
            Quantity::Weight => &mut self.weight_kg,
            Quantity::Length => &mut self.length_m,
            Quantity::Extension => &mut self.extension_m,
            Quantity::Elongation => &mut self.elongation,
            Quantity::Temperature => &mut self.temperature_c,
        }
    }
}
