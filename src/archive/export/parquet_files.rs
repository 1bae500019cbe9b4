//! Parquet, one dataset for a fleet: `OUT/<table>/rig=<name>/date=<day>/<trial>.parquet`, the layout that SQL engines call
//! hive partitioning. Rig and date stand in the path and nowhere else; a trial whose wall clock was never set has the
//! date `__HIVE_DEFAULT_PARTITION__`, which engines read as null. Characters of a rig's name that a path or an engine could
//! take for something else are percent-encoded.

use std::fs::{self, File};
use std::path::{Path, PathBuf};
use std::sync::Arc;

use parquet::basic::Compression;
use parquet::data_type::{BoolType, ByteArray, ByteArrayType, DoubleType, Int64Type};
use parquet::errors::Result as ParquetResult;
use parquet::file::properties::WriterProperties;
use parquet::file::writer::SerializedFileWriter;
use parquet::schema::parser::parse_message_type;

use super::ExportError;
use super::table::{Column, Data, Table};
use crate::archive::amendment::Amended;
use crate::archive::numbered::{new_part, stem_of};

/// What engines read as no value.
const NO_VALUE: &str = "__HIVE_DEFAULT_PARTITION__";
/// Rows written at once of a signal.
const SIGNAL_ROWS: usize = 128 * 1024;

pub(super) fn write(
    amended: &Amended,
    tables: &[Table],
    out: &Path,
    signals: bool,
) -> Result<Vec<PathBuf>, ExportError> {
    let header = amended.trial.header();
    let rig = if header.rig.is_empty() { NO_VALUE.to_owned() } else { encoded(&header.rig) };
    let date = header.day().map_or_else(|| NO_VALUE.to_owned(), |day| day.to_string());
    let place = |table: &str| out.join(table).join(format!("rig={rig}")).join(format!("date={date}"));
    let name = format!("{}.parquet", stem_of(&amended.path));
    let mut written = Vec::new();
    for table in tables {
        let mut file = ParquetFile::create(&place(table.name), &name, table)?;
        file.append(table)?;
        written.push(file.finish()?);
    }
    if signals {
        written.push(write_signals(amended, &place("signals"), &name)?);
    }
    Ok(written)
}

/// All signals of a trial, a row a sample.
fn write_signals(amended: &Amended, dir: &Path, name: &str) -> Result<PathBuf, ExportError> {
    let rig = amended.rig()?;
    let trial_id = &amended.trial.header().trial_id;
    let mut file = ParquetFile::create(dir, name, &signal_rows(trial_id, "", "", &[], &[], &[]))?;
    let mut append = |name: &str, unit: &str, time_s: &[f64], value: &[f64], u: &[f64]| {
        for from in (0..time_s.len()).step_by(SIGNAL_ROWS) {
            let part =
                |values: &'_ [f64]| values[from.min(values.len())..(from + SIGNAL_ROWS).min(values.len())].to_vec();
            file.append(&signal_rows(trial_id, name, unit, &part(time_s), &part(value), &part(u)))?;
        }
        Ok::<(), ExportError>(())
    };
    for signal in amended.signals(&rig)? {
        append(&signal.name, signal.role.unit(), &signal.time_s, &signal.value, &[])?;
    }
    for name in amended.trial.derived_names()? {
        let signal = amended.trial.derived(&name)?;
        append(&signal.name, &signal.unit, &signal.time_s, &signal.value, &signal.standard_uncertainty)?;
    }
    file.finish()
}

fn signal_rows(trial_id: &str, name: &str, unit: &str, time_s: &[f64], value: &[f64], u: &[f64]) -> Table {
    let n = time_s.len();
    let all = |column, text: &str| Column::text(column, std::iter::repeat_n(text.to_owned(), n));
    let u = (0..n).map(|at| u.get(at).copied().unwrap_or(f64::NAN));
    Table {
        name: "signals",
        columns: vec![
            all("trial_id", trial_id),
            all("signal", name),
            all("unit", unit),
            Column::number("time_s", Some("s"), time_s.iter().copied()),
            Column::number("value", None, value.iter().copied()),
            Column::number("standard_uncertainty", None, u),
        ],
    }
}

/// Letters, digits, `-` and `_` as they are, all else as `%XX`.
fn encoded(name: &str) -> String {
    let plain = |byte: u8| byte.is_ascii_alphanumeric() || byte == b'-' || byte == b'_';
    name.bytes().map(|byte| if plain(byte) { char::from(byte).to_string() } else { format!("%{byte:02X}") }).collect()
}

/// One file, under a hidden name until it is whole.
struct ParquetFile {
    writer: SerializedFileWriter<File>,
    part: PathBuf,
    path: PathBuf,
}

impl ParquetFile {
    fn create(dir: &Path, name: &str, like: &Table) -> Result<Self, ExportError> {
        let path = dir.join(name);
        let io = |source| ExportError::Io { path: path.clone(), source };
        fs::create_dir_all(dir).map_err(io)?;
        let (part, file) = new_part(dir, name).map_err(io)?;
        let properties = WriterProperties::builder().set_compression(Compression::SNAPPY).build();
        let opened = parse_message_type(&schema(like))
            .and_then(|schema| SerializedFileWriter::new(file, Arc::new(schema), Arc::new(properties)));
        match opened {
            Ok(writer) => Ok(Self { writer, part, path }),
            Err(source) => {
                let _ = fs::remove_file(&part);
                Err(ExportError::Parquet { path, source })
            }
        }
    }

    fn append(&mut self, table: &Table) -> Result<(), ExportError> {
        let appended = self.append_group(table);
        appended.map_err(|source| {
            let _ = fs::remove_file(&self.part);
            ExportError::Parquet { path: self.path.clone(), source }
        })
    }

    fn append_group(&mut self, table: &Table) -> ParquetResult<()> {
        let mut group = self.writer.next_row_group()?;
        for column in &table.columns {
            let Some(mut to) = group.next_column()? else { break };
            match &column.data {
                Data::Text(values) => {
                    let (values, levels) = present(values, |text| ByteArray::from(text.as_str()));
                    to.typed::<ByteArrayType>().write_batch(&values, Some(&levels), None)?;
                }
                Data::Number(values) => {
                    let (values, levels) = present(values, |value| *value);
                    to.typed::<DoubleType>().write_batch(&values, Some(&levels), None)?;
                }
                Data::Whole(values) | Data::Instant(values) => {
                    let (values, levels) = present(values, |value| *value);
                    to.typed::<Int64Type>().write_batch(&values, Some(&levels), None)?;
                }
                Data::Truth(values) => {
                    let (values, levels) = present(values, |value| *value);
                    to.typed::<BoolType>().write_batch(&values, Some(&levels), None)?;
                }
            }
            to.close()?;
        }
        group.close()?;
        Ok(())
    }

    fn finish(self) -> Result<PathBuf, ExportError> {
        let Self { writer, part, path } = self;
        if let Err(source) = writer.close() {
            let _ = fs::remove_file(&part);
            return Err(ExportError::Parquet { path, source });
        }
        fs::rename(&part, &path).map_err(|source| ExportError::Io { path: path.clone(), source })?;
        Ok(path)
    }
}

/// The values that are there, and for each row whether it has one (its definition level).
fn present<T, V>(values: &[Option<T>], as_stored: impl Fn(&T) -> V) -> (Vec<V>, Vec<i16>) {
    let levels = values.iter().map(|value| i16::from(value.is_some())).collect();
    (values.iter().flatten().map(as_stored).collect(), levels)
}

fn schema(table: &Table) -> String {
    let column = |column: &Column| {
        let (kind, more) = match column.data {
            Data::Text(_) => ("BYTE_ARRAY", " (STRING)"),
            Data::Number(_) => ("DOUBLE", ""),
            Data::Whole(_) => ("INT64", ""),
            Data::Truth(_) => ("BOOLEAN", ""),
            Data::Instant(_) => ("INT64", " (TIMESTAMP(NANOS,true))"),
        };
        format!("  OPTIONAL {kind} {}{more};\n", column.name)
    };
    format!("message {} {{\n{}}}", table.name, table.columns.iter().map(column).collect::<String>())
}

#[cfg(test)]
mod tests {
    use super::encoded;

    #[test]
    fn no_rig_name_leads_out_of_its_partition() {
        assert_eq!(encoded("north-pier"), "north-pier");
        assert_eq!(encoded("../a b=ö"), "%2E%2E%2Fa%20b%3D%C3%B6");
    }
}
