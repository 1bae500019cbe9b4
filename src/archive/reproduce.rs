//! Holds a trial's signals and results against those derived again from its counts, by the rig file it was sealed with.

use super::again::{AgainError, read_again};
use super::derive::result_set;
use super::value_pass::ValueSink;
use crate::calibration::Signal;
use crate::reading::Outcome;
use crate::trial::{ResultEntry, ResultSet, TrialError, TrialFile};

/// Samples compared at once.
const BATCH: usize = 32 * 1024;
/// Values are the same up to rounding: of a part per million millions of the greatest, as another processor may round.
const RELATIVE: f64 = 1e-12;
/// Results are the same up to this part of their standard uncertainty, or of themselves.
const OF_UNCERTAINTY: f64 = 1e-3;
const OF_RESULT: f64 = 1e-9;

/// What came of it.
#[derive(Debug, Default)]
pub(super) struct Reproduced {
    pub(super) derived_again: bool,
    pub(super) findings: Vec<String>,
    pub(super) remarks: Vec<String>,
}

/// Derives everything again and compares.
///
/// # Errors
/// The trial's own texts can't be read; what can't be derived is a finding.
pub(super) fn reproduce(trial: &TrialFile) -> Result<Reproduced, TrialError> {
    let mut reproduced = Reproduced::default();
    let text = trial.texts()?.into_iter().find(|text| text.name == "rig.toml");
    let rig = match text.map(|text| crate::rig::parse(&text.text)) {
        Some(Ok(rig)) => rig,
        Some(Err(error)) => {
            let why = format!("nothing was derived again: this program refuses the rig file of the trial: {error}");
            reproduced.remarks.push(why);
            return Ok(reproduced);
        }
        None => {
            reproduced.remarks.push("nothing was derived again: the trial carries no rig file".to_owned());
            return Ok(reproduced);
        }
    };
    let mut beside = Beside { trial, signals: Vec::new() };
    let reading = match read_again(trial, rig, &mut beside) {
        Ok(reading) => reading,
        Err(AgainError::Trial(error)) => return Err(error),
        Err(error) => {
            reproduced.findings.push(format!("the values can't be derived again: {error}"));
            return Ok(reproduced);
        }
    };
    reproduced.findings.extend(beside.finish()?);
    let mut differences = Vec::new();
    compare_results(&trial.results()?, &result_set(&reading, None), &mut differences);
    let sealed_by = &trial.header().program_version;
    if sealed_by != env!("CARGO_PKG_VERSION") && !differences.is_empty() {
        let n = differences.len();
        let first = &differences[0];
        reproduced.remarks.push(format!(
            "sealed by tautrail {sealed_by}, which read otherwise than this one: {n} results differ, the first: {first}"
        ));
    } else {
        reproduced.findings.append(&mut differences);
    }
    reproduced.derived_again = true;
    Ok(reproduced)
}

/// A signal of the trial beside the one derived again.
struct Compared {
    name: String,
    time_s: Vec<f64>,
    value: Vec<f64>,
    /// Samples compared so far.
    n: usize,
    differs: Option<String>,
}

struct Beside<'t> {
    trial: &'t TrialFile,
    signals: Vec<Compared>,
}

impl ValueSink for Beside<'_> {
    type Open = usize;

    fn begin(&mut self, signal: &Signal) -> Result<usize, TrialError> {
        let (name, n) = (signal.name.clone(), 0);
        self.signals.push(Compared { name, time_s: Vec::new(), value: Vec::new(), n, differs: None });
        self.append(self.signals.len() - 1, &signal.time_s, &signal.value)?;
        Ok(self.signals.len() - 1)
    }

    fn append(&mut self, signal: usize, time_s: &[f64], value: &[f64]) -> Result<(), TrialError> {
        let compared = &mut self.signals[signal];
        compared.time_s.extend_from_slice(time_s);
        compared.value.extend_from_slice(value);
        if compared.value.len() >= BATCH {
            compared.compare(self.trial)?;
        }
        Ok(())
    }
}

impl Beside<'_> {
    /// What differs, in sentences.
    fn finish(mut self) -> Result<Vec<String>, TrialError> {
        let mut findings = Vec::new();
        let stored = self.trial.signal_names()?;
        for compared in &mut self.signals {
            if !stored.contains(&compared.name) {
                findings.push(format!("signal {} can be derived from the counts and is not there", compared.name));
                continue;
            }
            compared.compare(self.trial)?;
            let n_stored = self.trial.signal_len(&compared.name)?;
            if n_stored != compared.n {
                let (name, n) = (&compared.name, compared.n);
                findings.push(format!("signal {name} has {n_stored} samples, its counts give {n}"));
            }
            findings.extend(compared.differs.take());
        }
        let known: Vec<&String> = self.signals.iter().map(|compared| &compared.name).collect();
        let extra = stored.iter().filter(|name| !known.contains(name));
        findings.extend(extra.map(|name| format!("signal {name} can't be derived from the counts")));
        Ok(findings)
    }
}

impl Compared {
    fn compare(&mut self, trial: &TrialFile) -> Result<(), TrialError> {
        let from = self.n;
        self.n += self.value.len();
        let (derived_s, derived) = (std::mem::take(&mut self.time_s), std::mem::take(&mut self.value));
        if self.differs.is_some() {
            return Ok(());
        }
        let (time_s, value) = match trial.signal_samples(&self.name, from, self.n) {
            Ok(stored) => stored,
            Err(TrialError::NoSuch { .. }) => return Ok(()), // said at the end
            Err(error) => return Err(error),
        };
        for (stored, derived, of) in [(&time_s, &derived_s, "time"), (&value, &derived, "value")] {
            let greatest = derived.iter().fold(0.0_f64, |greatest, value| greatest.max(value.abs()));
            let off = stored.iter().zip(derived).position(|(a, b)| !same(*a, *b, RELATIVE * greatest));
            if let Some(at) = off {
                let (name, sample) = (&self.name, from + at);
                let (a, b) = (stored[at], derived[at]);
                self.differs = Some(format!("signal {name}: {of} {a} of sample {sample}, its counts give {b}"));
                break;
            }
        }
        Ok(())
    }
}

fn same(a: f64, b: f64, within: f64) -> bool {
    (a - b).abs() <= within || a.to_bits() == b.to_bits()
}

fn compare_results(sealed: &ResultSet, derived: &ResultSet, differences: &mut Vec<String>) {
    if sealed.outcome != derived.outcome && sealed.outcome != Outcome::Truncated.word() {
        differences.push(format!("the outcome is {:?}, derived again {:?}", sealed.outcome, derived.outcome));
    }
    let of = |set: &ResultSet, name: &str| set.entries.iter().find(|entry| entry.name == name).cloned();
    for entry in &sealed.entries {
        match of(derived, &entry.name) {
            None => differences.push(format!("result {} is not had when derived again", entry.name)),
            Some(again) if !same_result(entry, &again) => differences.push(format!(
                "result {} is {} ({} {}), derived again {} ({})",
                entry.name,
                entry.value,
                entry.standard_uncertainty,
                entry.unit,
                again.value,
                again.standard_uncertainty
            )),
            Some(_) => {}
        }
    }
    for entry in derived.entries.iter().filter(|entry| of(sealed, &entry.name).is_none()) {
        differences.push(format!("result {} comes out when derived again and is not there", entry.name));
    }
    for instant in &sealed.instants {
        let again = derived.instants.iter().find(|again| again.name == instant.name);
        let within = OF_UNCERTAINTY * instant.standard_uncertainty_s + OF_RESULT * instant.time_s.abs();
        if !again.is_some_and(|again| same(instant.time_s, again.time_s, within)) {
            let again = again.map_or_else(|| "nowhere".to_owned(), |again| format!("{} s", again.time_s));
            differences.push(format!("instant {} is at {} s, derived again {again}", instant.name, instant.time_s));
        }
    }
}

fn same_result(a: &ResultEntry, b: &ResultEntry) -> bool {
    let within = OF_UNCERTAINTY * b.standard_uncertainty + OF_RESULT * b.value.abs();
    a.unit == b.unit
        && same(a.value, b.value, within)
        && same(a.standard_uncertainty, b.standard_uncertainty, within)
        && same(a.low, b.low, within)
        && same(a.high, b.high, within)
}
