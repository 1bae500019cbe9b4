//! A value with its uncertainty.

/// Two-sided 95 % of a normal distribution.
const COVERAGE_FACTOR: f64 = 1.959_963_984_540_054;

/// A value with its standard uncertainty and 95 % interval.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Interval {
    pub value: f64,
    pub standard_uncertainty: f64,
    pub low: f64,
    pub high: f64,
}

impl Interval {
    pub fn normal(value: f64, standard_uncertainty: f64) -> Self {
        let half = COVERAGE_FACTOR * standard_uncertainty;
        Self { value, standard_uncertainty, low: value - half, high: value + half }
    }

    /// The same in another unit.
    pub fn times(self, factor: f64) -> Self {
        Self::normal(self.value * factor, self.standard_uncertainty * factor)
    }
}
