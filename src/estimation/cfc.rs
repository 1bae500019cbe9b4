//! Channel frequency class filters of crash and impact testing.
//!
//! SAE J211-1 and ISO 6487: a second-order Butterworth low-pass run forward and then backward, so that nothing is
//! delayed. A rate below a named number of times the class is refused: [`LEAST_RATE_PER_CLASS`] (SAE J211-1; remembered,
//! not checked against its text) unless the caller sets another. The standards' text on the edges of a record was not at
//! hand: both usual start-up conventions are here, by name.

use std::f64::consts::PI;

use thiserror::Error;

/// Design cut-off of one pass over the class, 2.0775 (SAE J211-1 algorithm; some ISO 6487 texts print 1.25 · 5/3).
const DESIGN_CUTOFF_PER_CLASS: f64 = 2.0775;
/// Usual least number of samples a second over the class.
pub const LEAST_RATE_PER_CLASS: f64 = 10.0;

/// What a pass takes for the samples before its first one.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum StartUp {
    /// Input and output stood at the pass's first sample for ever: no transient on a record that starts off zero.
    Hold,
    /// Zero.
    Zero,
}

#[derive(Debug, Clone, Copy, PartialEq, Error)]
#[non_exhaustive]
pub enum CfcError {
    #[error(
        "CFC {class} needs at least {needed_hz} samples a second (minimum_rate {rule} times the class), the channel has {rate_hz:.1}: use a lower class or a faster channel"
    )]
    RateTooLow { class: u32, rate_hz: f64, needed_hz: f64, rule: f64 },
}

/// `y[t] = a0·x[t] + a1·x[t−1] + a2·x[t−2] + b1·y[t−1] + b2·y[t−2]`, one pass.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct CfcFilter {
    pub a0: f64,
    pub a1: f64,
    pub a2: f64,
    pub b1: f64,
    pub b2: f64,
}

impl CfcFilter {
    /// Filter of a class (60, 180, 600, 1000) at a sampling rate, under the usual rule for it.
    ///
    /// # Errors
    /// [`CfcError::RateTooLow`] below ten samples a second per hertz of class.
    pub fn new(class: u32, rate_hz: f64) -> Result<Self, CfcError> {
        Self::under_rule(class, rate_hz, LEAST_RATE_PER_CLASS)
    }

    /// Filter of a class at a sampling rate of at least `rule` times the class.
    ///
    /// # Errors
    /// [`CfcError::RateTooLow`] below that.
    pub fn under_rule(class: u32, rate_hz: f64, rule: f64) -> Result<Self, CfcError> {
        let needed_hz = rule * f64::from(class);
        // The clock map makes a nominal 600 Hz come out as 599.99: that is no different rate.
        if rate_hz.is_nan() || rate_hz < needed_hz * 0.999 {
            return Err(CfcError::RateTooLow { class, rate_hz, needed_hz, rule });
        }
        Ok(Self::butterworth(f64::from(class) * DESIGN_CUTOFF_PER_CLASS, rate_hz))
    }

    /// Low pass of second order with its −3 dB point, one pass, at `cutoff_hz`, below half the rate.
    pub(crate) fn butterworth(cutoff_hz: f64, rate_hz: f64) -> Self {
        let wa = (PI * cutoff_hz / rate_hz).tan();
        let denominator = 1.0 + 2f64.sqrt() * wa + wa * wa;
        let a0 = wa * wa / denominator;
        Self {
            a0,
            a1: 2.0 * a0,
            a2: a0,
            b1: -2.0 * (wa * wa - 1.0) / denominator,
            b2: (-1.0 + 2f64.sqrt() * wa - wa * wa) / denominator,
        }
    }

    /// Forward and backward pass over evenly spaced samples.
    pub fn two_pass(&self, samples: &[f64], start_up: StartUp) -> Vec<f64> {
        let mut filtered = samples.to_vec();
        self.pass(filtered.iter_mut(), start_up);
        self.pass(filtered.iter_mut().rev(), start_up);
        filtered
    }

    fn pass<'a>(&self, samples: impl Iterator<Item = &'a mut f64>, start_up: StartUp) {
        let mut state: Option<[f64; 4]> = None;
        for sample in samples {
            let x = *sample;
            let [x1, x2, y1, y2] = state.unwrap_or(match start_up {
                StartUp::Hold => [x; 4],
                StartUp::Zero => [0.0; 4],
            });
            let y = self.a0 * x + self.a1 * x1 + self.a2 * x2 + self.b1 * y1 + self.b2 * y2;
            state = Some([x, x1, y, y1]);
            *sample = y;
        }
    }

    /// Gain of both passes at a frequency: the squared magnitude of one.
    pub fn two_pass_gain(&self, frequency_hz: f64, rate_hz: f64) -> f64 {
        let w = 2.0 * PI * frequency_hz / rate_hz;
        let square = |terms: [f64; 3]| {
            let re = terms[0] + terms[1] * w.cos() + terms[2] * (2.0 * w).cos();
            let im = terms[1] * w.sin() + terms[2] * (2.0 * w).sin();
            re * re + im * im
        };
        square([self.a0, self.a1, self.a2]) / square([1.0, -self.b1, -self.b2])
    }

    /// Standard deviation out of both passes for white noise of unit standard deviation in.
    ///
    /// From the squared impulse response of the two passes (Parseval).
    pub fn noise_gain(&self) -> f64 {
        const REACH: usize = 4096;
        let mut impulse = vec![0.0; 2 * REACH + 1];
        impulse[REACH] = 1.0;
        self.two_pass(&impulse, StartUp::Zero).iter().map(|y| y * y).sum::<f64>().sqrt()
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Rows of a reference file: comment lines and the header left out.
    fn rows(text: &str) -> Vec<Vec<&str>> {
        text.lines().filter(|line| !line.starts_with('#')).skip(1).map(|line| line.split(',').collect()).collect()
    }

    // SAE J211-1 / ISO 6487 algorithm; values equal scipy.signal.butter(2, 2.0775·CFC, fs) to 1e-15.
    #[test]
    fn coefficients_are_those_of_the_standard_s_algorithm() {
        let table = rows(include_str!("../../tests/reference/cfc_coefficients.csv"));
        assert!(table.len() > 10);
        for row in table {
            let number = |i: usize| row[i].parse::<f64>().unwrap();
            let filter = CfcFilter::new(number(1) as u32, number(0)).unwrap();
            let pairs = [(filter.a0, 4), (filter.a1, 5), (filter.a2, 6), (filter.b1, 7), (filter.b2, 8)]
                .map(|(a, i)| (a, number(i)));
            for (found, wanted) in pairs {
                assert!((found - wanted).abs() < 1e-14, "{found} for {wanted} in {row:?}");
            }
        }
    }

    // Constructed signal; both conventions from scipy (lfilter twice; filtfilt without padding).
    #[test]
    fn a_signal_comes_out_sample_by_sample_as_scipy_filters_it() {
        let table = rows(include_str!("../../tests/reference/cfc180_10khz_signal.csv"));
        let column = |i: usize| table.iter().map(|row| row[i].parse::<f64>().unwrap()).collect::<Vec<_>>();
        let filter = CfcFilter::new(180, 10_000.0).unwrap();
        for (start_up, wanted) in [(StartUp::Zero, column(2)), (StartUp::Hold, column(3))] {
            let found = filter.two_pass(&column(1), start_up);
            for (k, (a, b)) in found.iter().zip(&wanted).enumerate() {
                assert!((a - b).abs() < 1e-10, "{start_up:?} sample {k}: {a} for {b}");
            }
        }
    }

    // SAE J211-1 / ISO 6487 class table, from memory, see the file: at the least rate a class is taken, just under it not.
    #[test]
    fn the_least_rate_of_each_class_is_the_table_s() {
        let table: toml::Table = include_str!("../../tests/reference/cfc_limits.toml").parse().unwrap();
        let number = |class: &toml::Value, key: &str| class[key].as_integer().unwrap();
        let classes = table["class"].as_array().unwrap();
        assert_eq!(classes.len(), 4);
        for class in classes {
            let (cfc, least_hz) = (number(class, "cfc") as u32, number(class, "min_fs_hz") as f64);
            assert!(CfcFilter::new(cfc, least_hz).is_ok());
            assert!(CfcFilter::new(cfc, 0.99 * least_hz).is_err());
            assert!(CfcFilter::under_rule(cfc, 0.99 * least_hz, 8.0).is_ok());
        }
    }

    // SAE J211-1 / ISO 6487 algorithm: gains recomputed from the coefficients, see the file.
    #[test]
    fn both_passes_damp_as_the_table_says() {
        let table = rows(include_str!("../../tests/reference/cfc_two_pass_gain.csv"));
        assert!(table.len() > 10);
        let mut n_gains = 0;
        for row in &table {
            let number = |i: usize| row[i].parse::<f64>().unwrap();
            let filter = CfcFilter::new(number(1) as u32, number(0)).unwrap();
            let gain = filter.two_pass_gain(number(2), number(0));
            // Frequencies of stated gains are printed to ten digits only, which is 1e-9 of gain; elsewhere the file's
            // 1e-12 and as much again for rounding, where coefficients nearly cancel at low frequencies.
            let tolerance = if row[3].starts_with("two-pass") { 1e-9 } else { 2e-12 };
            assert!((gain - number(4)).abs() < tolerance, "{gain} in {row:?}");
            n_gains += 1;
        }
        assert_eq!(n_gains, table.len());
    }

    #[test]
    fn a_rate_under_ten_times_the_class_is_refused_with_both_numbers() {
        let error = CfcFilter::new(180, 1_000.0).unwrap_err();
        assert!(error.to_string().contains("1800") && error.to_string().contains("1000"), "{error}");
    }

    // Two-pass gain squared integrates to an equivalent noise bandwidth near 102 Hz: by Parseval's theorem.
    #[test]
    fn white_noise_comes_out_as_parseval_says() {
        let filter = CfcFilter::new(60, 10_000.0).unwrap();
        let n = 200_000;
        let mean_square: f64 = (0..n)
            .map(|k| {
                let w = PI * (k as f64 + 0.5) / n as f64;
                let wa = (PI * 60.0 * DESIGN_CUTOFF_PER_CLASS / 10_000.0).tan();
                let warped = (w / 2.0).tan() / wa;
                (1.0 / (1.0 + warped.powi(4))).powi(2)
            })
            .sum::<f64>()
            / n as f64;
        assert!((filter.noise_gain() - mean_square.sqrt()).abs() < 1e-6);
    }
}
