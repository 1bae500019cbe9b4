//! Means, coverage factors, effective degrees of freedom.
//!
//! Quantiles are those of `statrs`, polished by Newton steps to the precision of its distribution functions.

use statrs::distribution::{ChiSquared, Continuous, ContinuousCDF, Normal, StudentsT};

/// Mean and standard deviation in one pass, without the loss of digits of a sum of squares (B. P. Welford,
/// Technometrics 4 (1962) 419-420).
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct RunningMean {
    count: u64,
    mean: f64,
    squares: f64,
}

impl RunningMean {
    pub fn add(&mut self, value: f64) {
        self.count += 1;
        let from_old = value - self.mean;
        self.mean += from_old / self.count as f64;
        self.squares += from_old * (value - self.mean);
    }

    pub fn count(&self) -> u64 {
        self.count
    }

    /// Not a number before the first value.
    pub fn mean(&self) -> f64 {
        if self.count == 0 { f64::NAN } else { self.mean }
    }

    /// With n − 1; not a number for fewer than two values.
    pub fn standard_deviation(&self) -> f64 {
        if self.count < 2 { f64::NAN } else { (self.squares / (self.count as f64 - 1.0)).sqrt() }
    }
}

impl FromIterator<f64> for RunningMean {
    fn from_iter<T: IntoIterator<Item = f64>>(values: T) -> Self {
        let mut running = Self::default();
        values.into_iter().for_each(|value| running.add(value));
        running
    }
}

/// Autocorrelation of neighbours, r₁ (G. E. P. Box, G. M. Jenkins, Time Series Analysis, 1976, equation 2.1.13, as NIST
/// StRD certifies it); not a number for fewer than two values or where all are equal.
pub fn lag1_autocorrelation(values: &[f64]) -> f64 {
    let mean = values.iter().copied().collect::<RunningMean>().mean();
    let squares: f64 = values.iter().map(|value| (value - mean).powi(2)).sum();
    let products: f64 = values.windows(2).map(|pair| (pair[0] - mean) * (pair[1] - mean)).sum();
    products / squares
}

/// One component of an uncertainty: standard uncertainty and degrees of freedom (infinite where it is known well).
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Component {
    pub standard_uncertainty: f64,
    pub degrees_of_freedom: f64,
}

impl Component {
    /// Of a component whose standard uncertainty is itself certain.
    pub fn certain(standard_uncertainty: f64) -> Self {
        Self { standard_uncertainty, degrees_of_freedom: f64::INFINITY }
    }

    /// k·u that covers the stated probability.
    pub fn expanded(&self, probability: f64) -> f64 {
        coverage_factor(probability, self.degrees_of_freedom) * self.standard_uncertainty
    }
}

/// Uncorrelated components together: root of the sum of squares, effective degrees of freedom by Welch and Satterthwaite
/// (JCGM 100:2008, equations 10 and G.2b). Not truncated to a whole number.
pub fn combined(components: &[Component]) -> Component {
    let variance: f64 = components.iter().map(|component| component.standard_uncertainty.powi(2)).sum();
    let fourth: f64 =
        components.iter().map(|component| component.standard_uncertainty.powi(4) / component.degrees_of_freedom).sum();
    let degrees_of_freedom = if fourth > 0.0 { variance.powi(2) / fourth } else { f64::INFINITY };
    Component { standard_uncertainty: variance.sqrt(), degrees_of_freedom }
}

/// Two-sided Student t of a probability (JCGM 100:2008, table G.2): the coverage factor; the normal distribution's for
/// infinite degrees of freedom. Infinite below one degree of freedom or for a probability of one and more: nothing can be
/// covered then.
pub fn coverage_factor(probability: f64, degrees_of_freedom: f64) -> f64 {
    let part = f64::midpoint(1.0, probability);
    let normal = || Normal::standard().inverse_cdf(part);
    if probability.is_nan() || probability >= 1.0 || degrees_of_freedom.is_nan() || degrees_of_freedom < 1.0 {
        return f64::INFINITY;
    }
    if probability <= 0.0 {
        return 0.0;
    }
    if degrees_of_freedom > 1e6 {
        return normal();
    }
    match StudentsT::new(0.0, 1.0, degrees_of_freedom) {
        Ok(student) => polished(student.inverse_cdf(part), part, |t| student.cdf(t), |t| student.pdf(t)),
        Err(_) => f64::INFINITY,
    }
}

/// Quantile of the chi-square distribution; not a number for degrees of freedom of zero or less.
pub fn chi_square_quantile(part: f64, degrees_of_freedom: f64) -> f64 {
    match ChiSquared::new(degrees_of_freedom) {
        Ok(chi) => polished(chi.inverse_cdf(part), part, |x| chi.cdf(x), |x| chi.pdf(x)),
        Err(_) => f64::NAN,
    }
}

/// Newton steps towards the quantile: what an inverse by bisection leaves is far above the rounding of the function itself.
fn polished(start: f64, part: f64, cumulative: impl Fn(f64) -> f64, density: impl Fn(f64) -> f64) -> f64 {
    const STEPS: usize = 4;
    (0..STEPS).fold(start, |at, _| {
        let next = at - (cumulative(at) - part) / density(at);
        if next.is_finite() { next } else { at }
    })
}

#[cfg(test)]
mod tests;
