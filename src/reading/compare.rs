//! Readings side by side: which results differ by more than their uncertainties allow.
//!
//! Each trial is compared with the first by z = difference over the root of the sum of the squared standard uncertainties
//! (two-sided normal test; JCGM 100:2008, G.1.3 for the factor). Calibration errors that two trials share would make z too
//! small, never too large: what is called different is different.

use statrs::function::erf::erfc;

use super::result::Reading;

/// One trial's value of a result against the first trial's.
#[derive(Debug, Clone, PartialEq)]
pub struct Compared {
    pub value: f64,
    pub standard_uncertainty: f64,
    /// Against the first trial; `None` for the first itself and where the first lacks the result.
    pub difference: Option<Difference>,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Difference {
    pub difference: f64,
    pub standard_uncertainty: f64,
    /// Chance of at least this difference between equal trials.
    pub p: f64,
}

/// Chance under which a difference is called one.
pub const SIGNIFICANT: f64 = 0.05;

/// A result over all trials, in their order; `None` where it is absent.
#[derive(Debug, Clone, PartialEq)]
pub struct ComparedRow {
    pub name: String,
    pub unit: String,
    pub trials: Vec<Option<Compared>>,
}

/// Every result that at least one trial has, in the order of the first that has it.
pub fn compare(readings: &[Reading]) -> Vec<ComparedRow> {
    let mut names: Vec<(&str, &str)> = Vec::new();
    for row in readings.iter().flat_map(|reading| &reading.results) {
        if !names.iter().any(|(name, _)| *name == row.name) && row.name != "release_time" {
            names.push((&row.name, &row.unit));
        }
    }
    let row = |(name, unit): (&str, &str)| {
        let first = readings.first().and_then(|reading| reading.result(name));
        let compared = |(idx, reading): (usize, &Reading)| {
            let row = reading.result(name)?;
            let difference = first.filter(|_| idx > 0).map(|first| {
                let difference = row.value - first.value;
                let u = row.standard_uncertainty.hypot(first.standard_uncertainty);
                let p = if u > 0.0 { erfc(difference.abs() / u / std::f64::consts::SQRT_2) } else { 1.0 };
                Difference { difference, standard_uncertainty: u, p }
            });
            Some(Compared { value: row.value, standard_uncertainty: row.standard_uncertainty, difference })
        };
        ComparedRow {
            name: name.to_owned(),
            unit: unit.to_owned(),
            trials: readings.iter().enumerate().map(compared).collect(),
        }
    };
    names.into_iter().map(row).collect()
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::reading::read;
    use crate::reading::synthetic::{Trial, play};

    // Standard normal table: P(|z| > 1.96) = 0.05.
    #[test]
    fn the_same_trial_does_not_differ_and_a_heavier_payload_does() {
        let reading = |trial: &Trial| read(&play(trial).signals, &trial.rig);
        let plain = reading(&Trial::nominal(1));
        let heavier = reading(&Trial { payload_kg: 7.0, ..Trial::nominal(1) });
        let rows = compare(&[plain.clone(), plain.clone(), heavier]);
        let speed = rows.iter().find(|row| row.name == "launch_speed").unwrap();
        let p = |idx: usize| speed.trials[idx].as_ref().unwrap().difference.unwrap().p;
        assert!(speed.trials[0].as_ref().unwrap().difference.is_none());
        assert!(p(1) > 0.99 && p(2) < 1e-6, "{} {}", p(1), p(2));
        let first = plain.result("launch_speed").unwrap();
        let mut shifted = plain.clone();
        let u = 2f64.sqrt() * first.standard_uncertainty;
        shifted.results.iter_mut().filter(|row| row.name == "launch_speed").for_each(|row| row.value += 1.959_964 * u);
        let rows = compare(&[plain, shifted]);
        let speed = rows.iter().find(|row| row.name == "launch_speed").unwrap();
        assert!((speed.trials[1].as_ref().unwrap().difference.unwrap().p - 0.05).abs() < 1e-6);
    }
}
