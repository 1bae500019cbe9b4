//! CSV as RFC 4180 has it: commas, quotes doubled, records ended by CRLF, one header line; units stand in the header.
//! Numbers are written so that they come back bit for bit; a missing value is an empty field.

use std::fs;
use std::path::{Path, PathBuf};

use jiff::Timestamp;

use super::ExportError;
use super::table::{Data, Table};
use crate::archive::amendment::Amended;
use crate::archive::numbered::{new_part, stem_of};

pub(super) fn write(
    amended: &Amended,
    tables: &[Table],
    out: &Path,
    signals: bool,
) -> Result<Vec<PathBuf>, ExportError> {
    let dir = out.join(stem_of(&amended.path));
    fs::create_dir_all(&dir).map_err(|source| ExportError::Io { path: dir.clone(), source })?;
    let mut written = Vec::new();
    for table in tables {
        let name = if table.name == "trials" { "trial" } else { table.name };
        let head = table.columns.iter().map(|column| match column.unit {
            Some(unit) => format!("{} [{unit}]", column.name.trim_end_matches("_s")),
            None => column.name.to_owned(),
        });
        let n_rows = table.columns.first().map_or(0, |column| column.data.len());
        let rows = (0..n_rows).map(|row| table.columns.iter().map(|column| field(&column.data, row)).collect());
        written.push(write_file(&dir, &format!("{name}.csv"), head.collect(), rows)?);
    }
    if signals {
        written.extend(write_signals(amended, &dir)?);
    }
    Ok(written)
}

fn field(data: &Data, row: usize) -> String {
    let instant =
        |ns: i64| Timestamp::from_nanosecond(i128::from(ns)).map_or_else(|_| String::new(), |at| at.to_string());
    let shown = match data {
        Data::Text(values) => values[row].clone(),
        Data::Number(values) => values[row].map(|value| value.to_string()),
        Data::Whole(values) => values[row].map(|value| value.to_string()),
        Data::Truth(values) => values[row].map(|value| value.to_string()),
        Data::Instant(values) => values[row].map(instant),
    };
    shown.unwrap_or_default()
}

/// A file a signal: time, value, and for a derived one its standard uncertainty.
fn write_signals(amended: &Amended, dir: &Path) -> Result<Vec<PathBuf>, ExportError> {
    let mut written = Vec::new();
    let rig = amended.rig()?;
    let mut taken = std::collections::BTreeSet::new();
    for signal in amended.signals(&rig)? {
        let head = vec!["time [s]".to_owned(), format!("{} [{}]", signal.name, signal.role.unit())];
        let rows =
            signal.time_s.iter().zip(&signal.value).map(|(time_s, value)| vec![time_s.to_string(), value.to_string()]);
        written.push(write_file(dir, &file_name(&signal.name, &mut taken), head, rows)?);
    }
    for name in amended.trial.derived_names()? {
        let signal = amended.trial.derived(&name)?;
        let unit = &signal.unit;
        let head = vec!["time [s]".to_owned(), format!("{name} [{unit}]"), format!("standard uncertainty [{unit}]")];
        let rows = signal.time_s.iter().zip(&signal.value).zip(&signal.standard_uncertainty);
        let rows = rows.map(|((time_s, value), u)| vec![time_s.to_string(), value.to_string(), u.to_string()]);
        written.push(write_file(dir, &file_name(&name, &mut taken), head, rows)?);
    }
    Ok(written)
}

/// A file name from a signal's name, which came from outside: nothing in it can lead anywhere.
fn file_name(signal: &str, taken: &mut std::collections::BTreeSet<String>) -> String {
    let plain = |c: char| if c.is_alphanumeric() || c == '-' || c == '_' { c } else { '_' };
    let stem: String = signal.chars().take(80).map(plain).collect();
    let mut name = format!("signal-{stem}.csv");
    let mut k = 1;
    while !taken.insert(name.to_lowercase()) {
        k += 1;
        name = format!("signal-{stem}-{k}.csv");
    }
    name
}

fn write_file(
    dir: &Path,
    name: &str,
    head: Vec<String>,
    rows: impl Iterator<Item = Vec<String>>,
) -> Result<PathBuf, ExportError> {
    let path = dir.join(name);
    let io = |source| ExportError::Io { path: path.clone(), source };
    let (part, file) = new_part(dir, name).map_err(io)?;
    let written = (|| {
        let mut to = csv::WriterBuilder::new().terminator(csv::Terminator::CRLF).from_writer(file);
        to.write_record(&head)?;
        for row in rows {
            to.write_record(&row)?;
        }
        to.flush()?;
        Ok(fs::rename(&part, &path)?)
    })();
    if let Err(source) = written {
        let _ = fs::remove_file(&part);
        return Err(ExportError::Csv { path, source });
    }
    Ok(path)
}

#[cfg(test)]
mod tests {
    use super::file_name;

    #[test]
    fn no_signal_names_a_file_elsewhere_or_twice() {
        let mut taken = std::collections::BTreeSet::new();
        assert_eq!(file_name("../../etc/x", &mut taken), "signal-______etc_x.csv");
        assert_eq!(file_name("line", &mut taken), "signal-line.csv");
        assert_eq!(file_name("Line", &mut taken), "signal-Line-2.csv");
        assert_eq!(file_name("", &mut taken), "signal-.csv");
    }
}
