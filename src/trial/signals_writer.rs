//! `/signals`: all signals of a trial, and the time axes that they share.
//!
//! Signals whose samples were taken at the same instants (channels of one stream with the same delay) have one axis: the
//! dataset is stored once and is a member of each of their groups (a hard link), so that every group stands by itself.
//! A signal that comes to miss samples which the others have gets an axis of its own from the start, by a copy.

use hdf5::Group;

use super::attribute::put_text;
use super::column::{Column, SAMPLES_PER_CHUNK};
use super::content::DerivedSignal;
use super::error::{Doing, TrialError};
use super::scale;
use super::signal_writer::SignalWriter;
use crate::calibration::Signal;
use crate::rig::Role;

/// A measured signal opened for appending.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct OpenSignal(usize);

struct Axis {
    time_s: Column<f64>,
    n: usize,
    /// What was appended last, and where that began.
    last: Vec<f64>,
    last_from: usize,
    /// The signal in whose group the dataset was made.
    owner: usize,
}

struct Written {
    signal: SignalWriter,
    member: String,
    axis: usize,
    n: usize,
}

pub(super) struct SignalsWriter {
    group: Group,
    signals: Vec<Written>,
    axes: Vec<Axis>,
    default: Option<String>,
}

impl SignalsWriter {
    pub(super) fn new(group: Group) -> Self {
        Self { group, signals: Vec::new(), axes: Vec::new(), default: None }
    }

    /// Opens a measured signal with the samples it already has.
    pub(super) fn begin(&mut self, member: String, signal: &Signal) -> Result<OpenSignal, TrialError> {
        let writer = SignalWriter::measured(&self.group, &member, signal)?;
        if self.default.is_none() || signal.role == Role::ReleaseLineTension {
            self.default = Some(member.clone());
        }
        let opened = self.add(member, writer, &signal.time_s)?;
        self.append(opened, &signal.time_s, &signal.value)?;
        Ok(opened)
    }

    /// Writes a derived signal whole.
    pub(super) fn derived(&mut self, member: String, signal: &DerivedSignal) -> Result<(), TrialError> {
        let writer = SignalWriter::derived(&self.group, &member, signal)?;
        let OpenSignal(index) = self.add(member, writer, &signal.time_s)?;
        self.append(OpenSignal(index), &signal.time_s, &signal.value)?;
        self.signals[index].signal.extend_uncertainty(&signal.standard_uncertainty)
    }

    /// Takes the signal in, on an axis that begins with just these times if there is one.
    fn add(&mut self, member: String, signal: SignalWriter, time_s: &[f64]) -> Result<OpenSignal, TrialError> {
        let index = self.signals.len();
        let fits = |axis: &Axis| axis.last_from == 0 && axis.n == time_s.len() && axis.last == time_s;
        let axis = match self.axes.iter().position(fits).filter(|_| !time_s.is_empty()) {
            Some(axis) => axis,
            None => self.new_axis(signal.group(), index)?,
        };
        self.signals.push(Written { signal, member, axis, n: 0 });
        Ok(OpenSignal(index))
    }

    fn new_axis(&mut self, at: &Group, owner: usize) -> Result<usize, TrialError> {
        let time_s = Column::create(at, "time", "s", SAMPLES_PER_CHUNK)?;
        put_text(time_s.dataset(), "long_name", "time since the trial's zero")?;
        self.axes.push(Axis { time_s, n: 0, last: Vec::new(), last_from: 0, owner });
        Ok(self.axes.len() - 1)
    }

    pub(super) fn append(&mut self, signal: OpenSignal, time_s: &[f64], value: &[f64]) -> Result<(), TrialError> {
        let OpenSignal(index) = signal;
        if time_s.len() != value.len() {
            let (found, expected) = (value.len(), time_s.len());
            return Err(TrialError::Uneven { object: self.signals[index].signal.group().name(), found, expected });
        }
        let (n, axis) = (self.signals[index].n, &self.axes[self.signals[index].axis]);
        let follows = n == axis.last_from && n < axis.n && axis.last == time_s;
        if !follows {
            if n < axis.n {
                self.split(index)?;
            }
            self.split_laggards(self.signals[index].axis)?;
            self.axes[self.signals[index].axis].extend(time_s)?;
        }
        self.signals[index].n += time_s.len();
        self.signals[index].signal.extend(value)
    }

    /// Gives every signal of the axis that misses its latest samples an axis of its own.
    fn split_laggards(&mut self, axis: usize) -> Result<(), TrialError> {
        for index in 0..self.signals.len() {
            if self.signals[index].axis == axis && self.signals[index].n < self.axes[axis].n {
                self.split(index)?;
            }
        }
        Ok(())
    }

    fn split(&mut self, index: usize) -> Result<(), TrialError> {
        let from = self.signals[index].axis;
        if self.axes[from].owner == index {
            self.hand_over(from, index)?;
        }
        let at = self.signals[index].signal.group().clone();
        let to = self.new_axis(&at, index)?;
        let n = self.signals[index].n;
        for first in (0..n).step_by(SAMPLES_PER_CHUNK) {
            let part = self.axes[from].time_s.read_back(first, n.min(first + SAMPLES_PER_CHUNK))?;
            self.axes[to].extend(&part)?;
        }
        self.signals[index].axis = to;
        Ok(())
    }

    /// Moves the axis out of the group of the signal that leaves it into that of another one on it.
    fn hand_over(&mut self, axis: usize, leaver: usize) -> Result<(), TrialError> {
        let heir = (0..self.signals.len()).find(|other| *other != leaver && self.signals[*other].axis == axis);
        let Some(heir) = heir else { return Ok(()) };
        let path = |index: usize| format!("{}/time", self.signals[index].member);
        self.group.relink(&path(leaver), &path(heir)).doing("moving the axis", path(leaver))?;
        self.axes[axis].owner = heir;
        Ok(())
    }

    /// Ends every signal, attaches the axes and names the default.
    pub(super) fn finish(mut self) -> Result<(), TrialError> {
        for axis in 0..self.axes.len() {
            self.split_laggards(axis)?;
        }
        for (number, axis) in self.axes.into_iter().enumerate() {
            let on_axis: Vec<&Written> = self.signals.iter().filter(|written| written.axis == number).collect();
            let owner = &self.signals[axis.owner].member;
            for written in on_axis.iter().filter(|written| written.member != *owner) {
                let link = format!("{}/time", written.member);
                self.group.link_hard(&format!("{owner}/time"), &link).doing("linking the axis", link)?;
            }
            let datasets: Vec<_> = on_axis.iter().flat_map(|written| written.signal.datasets()).collect();
            scale::attach(axis.time_s.dataset(), "time", &datasets)?;
            axis.time_s.finish("time")?;
        }
        for written in self.signals {
            written.signal.finish()?;
        }
        match &self.default {
            Some(name) => put_text(&self.group, "default", name),
            None => Ok(()),
        }
    }
}

impl Axis {
    fn extend(&mut self, time_s: &[f64]) -> Result<(), TrialError> {
        self.time_s.extend(time_s)?;
        self.last.clear();
        self.last.extend_from_slice(time_s);
        self.last_from = self.n;
        self.n += time_s.len();
        Ok(())
    }
}
