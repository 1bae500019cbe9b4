//! Numbers that carry their exact derivatives with respect to `P` parameters: forward-mode differentiation.
//!
//! W. K. Clifford's dual numbers with `P` infinitesimal parts (A. Griewank, A. Walther, *Evaluating Derivatives*, 2nd
//! edition, 2008, chapter 3). A fit that takes its derivatives from these needs no difference step, and so cannot choose
//! a bad one.

use std::ops::{Add, Div, Mul, Neg, Sub};

/// A value and its slope in each parameter.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Dual<const P: usize> {
    pub value: f64,
    pub slopes: [f64; P],
}

impl<const P: usize> Dual<P> {
    pub const fn constant(value: f64) -> Self {
        Self { value, slopes: [0.0; P] }
    }

    /// Parameter number `place` itself.
    pub fn parameter(value: f64, place: usize) -> Self {
        let slopes = std::array::from_fn(|k| if k == place { 1.0 } else { 0.0 });
        Self { value, slopes }
    }

    /// f(self), where f has this value and slope here.
    fn chained(self, value: f64, slope: f64) -> Self {
        Self { value, slopes: self.slopes.map(|own| own * slope) }
    }

    /// f(self, other), where f has this value and these slopes in the two.
    fn joined(self, other: Self, value: f64, [by_self, by_other]: [f64; 2]) -> Self {
        Self { value, slopes: std::array::from_fn(|k| by_self * self.slopes[k] + by_other * other.slopes[k]) }
    }

    pub fn exp(self) -> Self {
        let value = self.value.exp();
        self.chained(value, value)
    }

    /// e^self − 1 without loss near zero.
    pub fn exp_m1(self) -> Self {
        self.chained(self.value.exp_m1(), self.value.exp())
    }

    pub fn ln(self) -> Self {
        self.chained(self.value.ln(), 1.0 / self.value)
    }

    pub fn sqrt(self) -> Self {
        let value = self.value.sqrt();
        self.chained(value, 0.5 / value)
    }

    pub fn sin(self) -> Self {
        self.chained(self.value.sin(), self.value.cos())
    }

    pub fn cos(self) -> Self {
        self.chained(self.value.cos(), -self.value.sin())
    }

    pub fn atan(self) -> Self {
        self.chained(self.value.atan(), 1.0 / (1.0 + self.value * self.value))
    }

    pub fn powi(self, power: i32) -> Self {
        self.chained(self.value.powi(power), f64::from(power) * self.value.powi(power - 1))
    }

    /// self to the power of another dual; NaN where self is negative.
    pub fn powd(self, power: Self) -> Self {
        (self.ln() * power).exp()
    }
}

impl<const P: usize> Add for Dual<P> {
    type Output = Self;

    fn add(self, other: Self) -> Self {
        self.joined(other, self.value + other.value, [1.0, 1.0])
    }
}

impl<const P: usize> Sub for Dual<P> {
    type Output = Self;

    fn sub(self, other: Self) -> Self {
        self.joined(other, self.value - other.value, [1.0, -1.0])
    }
}

impl<const P: usize> Mul for Dual<P> {
    type Output = Self;

    fn mul(self, other: Self) -> Self {
        self.joined(other, self.value * other.value, [other.value, self.value])
    }
}

impl<const P: usize> Div for Dual<P> {
    type Output = Self;

    fn div(self, other: Self) -> Self {
        let value = self.value / other.value;
        self.joined(other, value, [1.0 / other.value, -value / other.value])
    }
}

impl<const P: usize> Neg for Dual<P> {
    type Output = Self;

    fn neg(self) -> Self {
        Self { value: -self.value, slopes: self.slopes.map(|slope| -slope) }
    }
}

impl<const P: usize> Add<f64> for Dual<P> {
    type Output = Self;

    fn add(self, other: f64) -> Self {
        Self { value: self.value + other, ..self }
    }
}

impl<const P: usize> Sub<f64> for Dual<P> {
    type Output = Self;

    fn sub(self, other: f64) -> Self {
        Self { value: self.value - other, ..self }
    }
}

impl<const P: usize> Mul<f64> for Dual<P> {
    type Output = Self;

    fn mul(self, other: f64) -> Self {
        self.chained(self.value * other, other)
    }
}

impl<const P: usize> Div<f64> for Dual<P> {
    type Output = Self;

    fn div(self, other: f64) -> Self {
        self.chained(self.value / other, 1.0 / other)
    }
}

#[cfg(test)]
mod tests {
    use super::Dual;

    /// Every operation against a complex-step-like check: central differences of the same expression in plain numbers.
    #[test]
    fn slopes_agree_with_central_differences() {
        fn of(a: f64, b: f64) -> f64 {
            (a * b).exp() / (b + 2.0).ln() - (a - b).sin() * b.cos() + (a * a + 1.0).sqrt() * (b / 3.0).atan()
                - (a + 2.0).powf(b)
                + (a / b).exp_m1()
                + (-b).powi(3)
        }
        let (a, b) = (0.7, 1.3);
        let (x, y) = (Dual::<2>::parameter(a, 0), Dual::<2>::parameter(b, 1));
        let found = (x * y).exp() / (y + 2.0).ln() - (x - y).sin() * y.cos() + (x * x + 1.0).sqrt() * (y / 3.0).atan()
            - (x + 2.0).powd(y)
            + (x / y).exp_m1()
            + (-y).powi(3);
        assert!((found.value - of(a, b)).abs() < 1e-14);
        let h = 1e-6;
        let expected = [(of(a + h, b) - of(a - h, b)) / (2.0 * h), (of(a, b + h) - of(a, b - h)) / (2.0 * h)];
        for (slope, expected) in found.slopes.iter().zip(expected) {
            assert!((slope - expected).abs() < 1e-8, "{slope} against {expected}");
        }
    }
}
