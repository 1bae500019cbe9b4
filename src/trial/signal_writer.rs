//! `/signals/<name>`: NXdata groups, each with a value and what a plot needs to know; the axis comes from
//! [`super::signals_writer`].

use hdf5::{Dataset, Group};

use super::attribute::{new_group, put_number, put_text, put_texts};
use super::column::{Column, SAMPLES_PER_CHUNK};
use super::content::DerivedSignal;
use super::error::TrialError;
use crate::calibration::Signal;

pub(super) struct SignalWriter {
    group: Group,
    value: Column<f64>,
    uncertainty: Option<Column<f64>>,
}

impl SignalWriter {
    /// Opens the group of a measured signal and writes all but its samples.
    pub(super) fn measured(signals: &Group, member: &str, signal: &Signal) -> Result<Self, TrialError> {
        let writer = Self::open(signals, member, &signal.name, signal.role.unit(), false)?;
        let at = &writer.group;
        put_text(at, "origin", "measured")?;
        put_text(at, "role", signal.role.word())?;
        put_number(at, "zero_uncertainty", signal.zero_uncertainty)?;
        put_number(at, "scale_relative_uncertainty", signal.scale_relative_uncertainty)?;
        put_number(at, "time_uncertainty_s", signal.time_uncertainty_s)?;
        put_number(at, "nominal_rate_hz", signal.nominal_rate_hz)?;
        put_number(at, "resolution", signal.resolution)?;
        if let Some(bandwidth_hz) = signal.bandwidth_hz {
            put_number(at, "bandwidth_hz", bandwidth_hz)?;
        }
        if let Some((low, high)) = signal.range {
            put_number(at, "range_min", low)?;
            put_number(at, "range_max", high)?;
        }
        Ok(writer)
    }

    /// Opens the group of a derived signal and writes all but its samples.
    pub(super) fn derived(signals: &Group, member: &str, signal: &DerivedSignal) -> Result<Self, TrialError> {
        let writer = Self::open(signals, member, &signal.name, &signal.unit, true)?;
        put_text(&writer.group, "origin", "derived")?;
        put_text(&writer.group, "method", &signal.method)?;
        Ok(writer)
    }

    fn open(signals: &Group, member: &str, name: &str, unit: &str, uncertain: bool) -> Result<Self, TrialError> {
        let group = new_group(signals, member, "NXdata")?;
        put_text(&group, "name", name)?;
        put_text(&group, "signal", "value")?;
        put_texts(&group, "axes", &["time"])?;
        put_number(&group, "time_indices", 0_i32)?;
        let value = Column::create(&group, "value", unit, SAMPLES_PER_CHUNK)?;
        put_text(value.dataset(), "long_name", name)?;
        let uncertainty =
            uncertain.then(|| Column::create(&group, "value_errors", unit, SAMPLES_PER_CHUNK)).transpose()?;
        Ok(Self { group, value, uncertainty })
    }

    pub(super) fn group(&self) -> &Group {
        &self.group
    }

    /// What lies on the time axis.
    pub(super) fn datasets(&self) -> impl Iterator<Item = &Dataset> {
        std::iter::once(self.value.dataset()).chain(self.uncertainty.as_ref().map(Column::dataset))
    }

    pub(super) fn extend(&mut self, value: &[f64]) -> Result<(), TrialError> {
        self.value.extend(value)
    }

    /// Standard uncertainties of a derived signal's values.
    pub(super) fn extend_uncertainty(&mut self, standard_uncertainty: &[f64]) -> Result<(), TrialError> {
        self.uncertainty.as_mut().map_or(Ok(()), |column| column.extend(standard_uncertainty))
    }

    pub(super) fn finish(self) -> Result<(), TrialError> {
        self.value.finish("value")?;
        if let Some(column) = self.uncertainty {
            column.finish("value_errors")?;
        }
        Ok(())
    }
}
