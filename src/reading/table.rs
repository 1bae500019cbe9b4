//! Tables of numbers as people export them: CSV with one row of column names.
//!
//! Commas, semicolons or tabs; lines that begin with `#` and empty lines are left out. No other text is understood and none
//! causes a panic.

use thiserror::Error;

/// Fewer rows than this say nothing of a motion.
const LEAST_ROWS: usize = 5;
/// More rows are no table that a person exported.
const MOST_ROWS: usize = 2_000_000;

#[derive(Debug, Clone, PartialEq, Error)]
#[non_exhaustive]
pub enum TableError {
    #[error("has no row of column names")]
    Empty,
    #[error("has no column {name}")]
    NoColumn { name: &'static str },
    #[error("line {line}: {found:?} in column {column} is no number")]
    NotANumber { line: usize, column: String, found: String },
    #[error("line {line}: has {found} cells, the names are {named}")]
    Cells { line: usize, found: usize, named: usize },
    #[error("line {line}: {column} does not advance, {next} follows {before}")]
    NotRising { line: usize, column: &'static str, before: f64, next: f64 },
    #[error("has {found} rows, at least {LEAST_ROWS} are needed")]
    TooShort { found: usize },
    #[error("has more than {MOST_ROWS} rows")]
    TooLong,
    #[error("has frame numbers but no times: give the frame rate with --frame-rate")]
    NoFrameRate,
    #[error(
        "a frame takes {found_ms:.3} ms by the table's times, {stated_ms:.3} ms at {rate_hz} frames a second: one of them is wrong"
    )]
    Contradiction { found_ms: f64, stated_ms: f64, rate_hz: f64 },
}

/// Columns of numbers by name.
#[derive(Debug, Clone, PartialEq)]
pub(super) struct Table {
    names: Vec<String>,
    rows: Vec<(usize, Vec<f64>)>,
}

impl Table {
    pub(super) fn parse(text: &str) -> Result<Self, TableError> {
        let lines = text.trim_start_matches('\u{feff}').lines().enumerate().map(|(idx, line)| (idx + 1, line.trim()));
        let mut lines = lines.filter(|(_, line)| !line.is_empty() && !line.starts_with('#'));
        let (_, head) = lines.next().ok_or(TableError::Empty)?;
        let separator = [';', '\t'].into_iter().find(|letter| head.contains(*letter)).unwrap_or(',');
        let names: Vec<String> = head.split(separator).map(|name| name.trim().trim_matches('"').to_owned()).collect();
        let mut rows = Vec::new();
        for (line, text) in lines {
            let cells: Vec<&str> = text.split(separator).map(str::trim).collect();
            if cells.len() != names.len() {
                return Err(TableError::Cells { line, found: cells.len(), named: names.len() });
            }
            let number = |(cell, name): (&&str, &String)| {
                cell.parse::<f64>().ok().filter(|number| number.is_finite()).ok_or_else(|| TableError::NotANumber {
                    line,
                    column: name.clone(),
                    found: (*cell).to_owned(),
                })
            };
            rows.push((line, cells.iter().zip(&names).map(number).collect::<Result<Vec<f64>, _>>()?));
            if rows.len() > MOST_ROWS {
                return Err(TableError::TooLong);
            }
        }
        if rows.len() < LEAST_ROWS {
            return Err(TableError::TooShort { found: rows.len() });
        }
        Ok(Self { names, rows })
    }

    pub(super) fn has(&self, name: &str) -> bool {
        self.names.iter().any(|known| known == name)
    }

    pub(super) fn optional(&self, name: &'static str) -> Result<Option<Vec<f64>>, TableError> {
        if self.has(name) { self.column(name).map(Some) } else { Ok(None) }
    }

    pub(super) fn column(&self, name: &'static str) -> Result<Vec<f64>, TableError> {
        let place = self.names.iter().position(|known| known == name).ok_or(TableError::NoColumn { name })?;
        Ok(self.rows.iter().map(|(_, row)| row[place]).collect())
    }

    /// A column that must rise from row to row.
    pub(super) fn rising(&self, name: &'static str) -> Result<Vec<f64>, TableError> {
        let column = self.column(name)?;
        match column.windows(2).position(|pair| pair[1] <= pair[0]) {
            Some(idx) => Err(TableError::NotRising {
                line: self.rows[idx + 1].0,
                column: name,
                before: column[idx],
                next: column[idx + 1],
            }),
            None => Ok(column),
        }
    }
}

#[cfg(test)]
mod tests {
    use proptest::prelude::*;

    use super::*;

    #[test]
    fn a_wrong_cell_is_named_with_its_line() {
        let text = "# a recorder\ntime_s;speed_mps\n0;0\n0.1;1\n0.2;x\n0.3;3\n0.4;4\n";
        let error = Table::parse(text).unwrap_err().to_string();
        assert!(error.contains("line 5") && error.contains("speed_mps") && error.contains("\"x\""), "{error}");
        let falling = Table::parse("time_s,v\n0,0\n1,0\n0.5,0\n2,0\n3,0\n").unwrap();
        assert!(falling.rising("time_s").unwrap_err().to_string().contains("line 4"));
    }

    proptest! {
        #[test]
        fn no_text_panics(text in ".{0,400}") {
            let _ = Table::parse(&text);
        }

        #[test]
        fn what_was_written_is_read(rows in prop::collection::vec((-1e6..1e6f64, -1e6..1e6f64), 5..40)) {
            let body: Vec<String> = rows.iter().map(|(a, b)| format!("{a},{b}")).collect();
            let table = Table::parse(&format!("a,b\n{}", body.join("\n"))).unwrap();
            prop_assert_eq!(table.column("b").unwrap(), rows.iter().map(|row| row.1).collect::<Vec<_>>());
        }
    }
}
