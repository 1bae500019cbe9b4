//! `/signals/<name>`: NXdata groups, each with a value, its own time axis and what a plot needs to know.

use hdf5::Group;

use super::attribute::{new_group, put_number, put_text, put_texts};
use super::column::{Column, SAMPLES_PER_CHUNK};
use super::content::DerivedSignal;
use super::error::TrialError;
use super::scale;
use crate::calibration::Signal;

pub(super) struct SignalWriter {
    group: Group,
    time_s: Column<f64>,
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

    /// Writes a derived signal whole.
    pub(super) fn derived(signals: &Group, member: &str, signal: &DerivedSignal) -> Result<(), TrialError> {
        let mut writer = Self::open(signals, member, &signal.name, &signal.unit, true)?;
        put_text(&writer.group, "origin", "derived")?;
        put_text(&writer.group, "method", &signal.method)?;
        writer.append(&signal.time_s, &signal.value)?;
        if let Some(uncertainty) = &mut writer.uncertainty {
            uncertainty.extend(&signal.standard_uncertainty)?;
        }
        writer.finish()
    }

    fn open(signals: &Group, member: &str, name: &str, unit: &str, uncertain: bool) -> Result<Self, TrialError> {
        let group = new_group(signals, member, "NXdata")?;
        put_text(&group, "name", name)?;
        put_text(&group, "signal", "value")?;
        put_texts(&group, "axes", &["time"])?;
        put_number(&group, "time_indices", 0_i32)?;
        let time_s = Column::create(&group, "time", "s", SAMPLES_PER_CHUNK)?;
        put_text(time_s.dataset(), "long_name", "time since the trial's zero")?;
        let value = Column::create(&group, "value", unit, SAMPLES_PER_CHUNK)?;
        put_text(value.dataset(), "long_name", name)?;
        let uncertainty =
            uncertain.then(|| Column::create(&group, "value_errors", unit, SAMPLES_PER_CHUNK)).transpose()?;
        Ok(Self { group, time_s, value, uncertainty })
    }

    pub(super) fn append(&mut self, time_s: &[f64], value: &[f64]) -> Result<(), TrialError> {
        if time_s.len() != value.len() {
            let (found, expected) = (value.len(), time_s.len());
            return Err(TrialError::Uneven { object: self.value.dataset().name(), found, expected });
        }
        self.time_s.extend(time_s)?;
        self.value.extend(value)
    }

    pub(super) fn finish(self) -> Result<(), TrialError> {
        let (time, value) = (self.time_s.dataset().clone(), self.value.dataset().clone());
        let errors = self.uncertainty.as_ref().map(|column| column.dataset().clone());
        let on_axis: Vec<_> = std::iter::once(&value).chain(&errors).collect();
        scale::attach(&time, "time", &on_axis)?;
        self.time_s.finish("time")?;
        self.value.finish("value")?;
        if let Some(column) = self.uncertainty {
            column.finish("value_errors")?;
        }
        Ok(())
    }
}
