//! Tables: a group with one dataset a column, so that every column has its own unit and texts stay texts everywhere
//! (string fields of compounds come back as bytes in common readers).
//!
//! One list of columns defines both the writing and the reading side of a table.

use hdf5::Group;

use super::digest::DatasetDigest;
use super::error::TrialError;
use super::members::Members;

/// The writer of a table, and what reads it back.
pub(super) trait Table: Sized {
    type Row;
    fn create(group: &Group) -> Result<Self, TrialError>;
    fn push(&mut self, row: &Self::Row) -> Result<(), TrialError>;
    /// Ends the table; `name` is its path within the digested group.
    fn finish(self, name: &str) -> Result<Vec<DatasetDigest>, TrialError>;
    /// All rows; refuses columns of unequal length.
    fn read(members: &Members) -> Result<Vec<Self::Row>, TrialError>;
    /// Digests of the columns as the file holds them now.
    fn digests(members: &Members, name: &str) -> Result<Vec<DatasetDigest>, TrialError>;
}

/// Defines a table from its columns: `field: type, "unit", "name in the file";`.
macro_rules! table {
    ($table:ident of $row:ident { $($field:ident : $kind:ty, $unit:literal, $name:literal;)* }) => {
        pub(super) struct $table {
            $($field: Column<$kind>,)*
        }

        impl Table for $table {
            type Row = $row;

            fn create(group: &Group) -> Result<Self, TrialError> {
                Ok(Self { $($field: Column::create(group, $name, $unit, ROWS_PER_CHUNK)?,)* })
            }

            fn push(&mut self, row: &$row) -> Result<(), TrialError> {
                $(self.$field.push(&row.$field)?;)*
                Ok(())
            }

            fn finish(self, name: &str) -> Result<Vec<DatasetDigest>, TrialError> {
                Ok(vec![$(self.$field.finish(&format!("{name}/{}", $name))?,)*])
            }

            fn read(members: &Members) -> Result<Vec<$row>, TrialError> {
                let lengths = [$((members.column::<$kind>($name)?.len(), $name),)*];
                members.expect_even(&lengths)?;
                $(let mut $field = members.column::<$kind>($name)?.read_all()?.into_iter();)*
                let mut rows = Vec::with_capacity(lengths[0].0);
                while let ($(Some($field),)*) = ($($field.next(),)*) {
                    rows.push($row { $($field,)* });
                }
                Ok(rows)
            }

            fn digests(members: &Members, name: &str) -> Result<Vec<DatasetDigest>, TrialError> {
                Ok(vec![$(members.column::<$kind>($name)?.digest(&format!("{name}/{}", $name))?,)*])
            }
        }
    };
}

pub(super) use table;
