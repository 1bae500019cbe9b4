//! A table in memory, whatever it becomes.

/// One column; `None` is a missing value.
#[derive(Debug, Clone, PartialEq)]
pub(super) enum Data {
    Text(Vec<Option<String>>),
    Number(Vec<Option<f64>>),
    Whole(Vec<Option<i64>>),
    Truth(Vec<Option<bool>>),
    /// Nanoseconds since 1970, UTC.
    Instant(Vec<Option<i64>>),
}

#[derive(Debug, Clone, PartialEq)]
pub(super) struct Column {
    pub(super) name: &'static str,
    /// Shown in the header of CSV; the names of columns with one unit for all rows end in it.
    pub(super) unit: Option<&'static str>,
    pub(super) data: Data,
}

#[derive(Debug, Clone, PartialEq)]
pub(super) struct Table {
    pub(super) name: &'static str,
    pub(super) columns: Vec<Column>,
}

impl Column {
    pub(super) fn text(name: &'static str, values: impl Iterator<Item = String>) -> Self {
        Self { name, unit: None, data: Data::Text(values.map(Some).collect()) }
    }

    pub(super) fn number(name: &'static str, unit: Option<&'static str>, values: impl Iterator<Item = f64>) -> Self {
        // Not a number is what a table calls missing.
        let values = values.map(|value| Some(value).filter(|value| !value.is_nan()));
        Self { name, unit, data: Data::Number(values.collect()) }
    }
}

impl Data {
    pub(super) fn len(&self) -> usize {
        match self {
            Self::Text(values) => values.len(),
            Self::Number(values) => values.len(),
            Self::Whole(values) | Self::Instant(values) => values.len(),
            Self::Truth(values) => values.len(),
        }
    }
}
