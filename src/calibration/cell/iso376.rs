//! Relative errors in the manner of ISO 376: reproducibility, repeatability, interpolation, zero, reversibility, creep.
//!
//! Formulas and class limits from memory, not checked against the standard's text.

use crate::estimation::{LinearError, Scatter, least_squares};

/// Deflections of one force step in the standard's series: X1, X2 without turning the cell, X3 and X5 after turning it,
/// X4′ and X6′ on the way back of X3 and X5.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Step {
    pub force_n: f64,
    pub x1: f64,
    pub x2: f64,
    pub x3: f64,
    pub x5: f64,
    pub x4_back: f64,
    pub x6_back: f64,
}

/// Relative errors of a step, percent.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct StepErrors {
    pub force_n: f64,
    pub reproducibility: f64,
    pub repeatability: f64,
    pub interpolation: f64,
    pub reversibility: f64,
}

/// All steps, zero and creep, percent.
#[derive(Debug, Clone, PartialEq)]
pub struct RelativeErrors {
    pub steps: Vec<StepErrors>,
    pub zero: f64,
    pub creep: f64,
}

/// The relative errors of a whole series; interpolation by a cubic through zero.
///
/// # Errors
/// Fewer steps than the cubic needs.
pub fn relative_errors(steps: &[Step], zero_change: f64, creep_change: f64) -> Result<RelativeErrors, LinearError> {
    let mean = |step: &Step| (step.x1 + step.x3 + step.x5) / 3.0;
    let greatest_n = steps.iter().map(|step| step.force_n).fold(0.0, f64::max);
    let row = |force_n: f64| {
        let s = force_n / greatest_n;
        vec![s, s * s, s * s * s]
    };
    let rows: Vec<Vec<f64>> = steps.iter().map(|step| row(step.force_n)).collect();
    let means: Vec<f64> = steps.iter().map(mean).collect();
    let fit = least_squares(&rows, &means, Scatter::Unknown)?;
    let of_step = |step: &Step| {
        let (x_r, x_a) = (mean(step), fit.predict(&row(step.force_n)).0);
        let [least, most] = [f64::min, f64::max].map(|pick| pick(step.x1, pick(step.x3, step.x5)));
        let back = |back: f64, forth: f64| 100.0 * (back - forth).abs() / forth.abs();
        StepErrors {
            force_n: step.force_n,
            reproducibility: 100.0 * (most - least).abs() / x_r.abs(),
            repeatability: 100.0 * (step.x2 - step.x1).abs() / f64::midpoint(step.x1, step.x2).abs(),
            interpolation: 100.0 * (x_r - x_a) / x_a,
            reversibility: f64::midpoint(back(step.x4_back, step.x3), back(step.x6_back, step.x5)),
        }
    };
    let top = steps.iter().max_by(|a, b| a.force_n.total_cmp(&b.force_n)).map_or(f64::NAN, mean);
    Ok(RelativeErrors {
        steps: steps.iter().map(of_step).collect(),
        zero: 100.0 * zero_change / top,
        creep: 100.0 * (creep_change / top).abs(),
    })
}

/// Limits of a class, percent: b, b′, f_c, f_0, v, c and the expanded uncertainty of the applied force (ISO 376:2011,
/// table 2; remembered).
pub const CLASSES: [(&str, [f64; 7]); 4] = [
    ("00", [0.05, 0.025, 0.025, 0.012, 0.07, 0.025, 0.01]),
    ("0.5", [0.10, 0.05, 0.05, 0.025, 0.15, 0.05, 0.02]),
    ("1", [0.20, 0.10, 0.10, 0.050, 0.30, 0.10, 0.05]),
    ("2", [0.40, 0.20, 0.20, 0.10, 0.50, 0.20, 0.10]),
];

impl RelativeErrors {
    /// Greatest of each: b, b′, |f_c|, |f_0|, v, c, percent.
    pub fn greatest(&self) -> [f64; 6] {
        let of = |pick: fn(&StepErrors) -> f64| self.steps.iter().map(pick).map(f64::abs).fold(0.0, f64::max);
        [
            of(|step| step.reproducibility),
            of(|step| step.repeatability),
            of(|step| step.interpolation),
            self.zero.abs(),
            of(|step| step.reversibility),
            self.creep,
        ]
    }

    /// The best class whose every limit holds over all steps, for an expanded uncertainty of the applied force in percent.
    pub fn class(&self, applied_expanded: f64) -> Option<&'static str> {
        let [b, b1, fc, f0, v, c] = self.greatest();
        let found = [b, b1, fc, f0, v, c, applied_expanded];
        let holds = |limits: &[f64; 7]| found.iter().zip(limits).all(|(found, limit)| found <= limit);
        CLASSES.iter().find(|(_, limits)| holds(limits)).map(|(name, _)| *name)
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use crate::calibration::testing::{reference_rows, reference_text};

    /// tests/reference/iso376_example.csv: constructed, not published; formulas from memory.
    fn example() -> (Vec<Step>, RelativeErrors) {
        let steps: Vec<Step> = reference_rows("iso376_example.csv")
            .iter()
            .map(|row| Step {
                force_n: row[0],
                x1: row[1],
                x2: row[2],
                x3: row[3],
                x4_back: row[4],
                x5: row[5],
                x6_back: row[6],
            })
            .collect();
        let errors = relative_errors(&steps, 0.00012, 0.00004 - 0.00010).unwrap();
        (steps, errors)
    }

    #[test]
    fn relative_errors_are_those_of_the_worked_example() {
        let (_, errors) = example();
        for (row, found) in reference_rows("iso376_example.csv").iter().zip(&errors.steps) {
            let found = [found.reproducibility, found.repeatability, found.interpolation, found.reversibility];
            for (found, expected) in found.iter().zip(&row[10..14]) {
                assert!((found - expected).abs() < 1e-9, "{} N: {found} for {expected}", row[0]);
            }
        }
        assert!((errors.zero - 0.005_994_015_974).abs() < 1e-9, "{}", errors.zero);
        assert!((errors.creep - 0.002_997_007_987).abs() < 1e-9, "{}", errors.creep);
    }

    #[test]
    fn classes_are_those_of_the_table_and_the_worst_error_decides() {
        let names = reference_text("iso376_classes.csv");
        let rows: Vec<&str> = names.lines().filter(|line| !line.starts_with('#')).skip(1).collect();
        for ((name, limits), row) in CLASSES.iter().zip(rows) {
            let mut fields = row.split(',');
            assert_eq!(fields.next(), Some(*name));
            assert_eq!(fields.map(|field| field.parse::<f64>().unwrap()).collect::<Vec<_>>(), limits);
        }
        let (_, errors) = example();
        // Reversibility 0.08 % at 100 N is over the 0.07 % of class 00.
        assert_eq!(errors.class(0.01), Some("0.5"));
        assert_eq!(errors.class(0.04), Some("1"));
        assert_eq!(errors.class(1.0), None);
    }
}
