//! One step of the methods of Dormand and Prince, order 8(5,3) or 5(4), or of a stiff one, and its dense output.
//!
//! Source of the formulas: Hairer, Nørsett, Wanner, *Solving Ordinary Differential Equations I* (1993), section II.5
//! (error estimate of orders 5 and 3 combined), II.6 (dense output), II.4 (step size control).

use super::coefficients as c;
use super::stiff::rodas;

/// What a step may err by: `absolute[i] + relative · |y[i]|` in each component.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Tolerance<const N: usize> {
    pub relative: f64,
    pub absolute: [f64; N],
    /// Components that are really there; the rest is padding.
    pub n_used: usize,
    /// Of these, the first ones, which the rates depend on; the others only add up.
    pub n_felt: usize,
}

/// Which method takes the steps.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Order {
    /// Order 5(4), 6 evaluations a step: for tolerances of about 1e-6.
    Fifth,
    /// Order 8(5,3), 12 evaluations a step: for finer ones.
    Eighth,
    /// Order 4(3), 7 evaluations and one for each state a step: where some states settle fast.
    Stiff,
}

impl Order {
    /// Factor from a step's size to the next one's, from its error over tolerance.
    pub fn next_size(self, error: f64) -> f64 {
        const SAFETY: f64 = 0.9;
        let exponent = match self {
            Self::Fifth => -0.2,
            Self::Eighth => -0.125,
            Self::Stiff => -0.25,
        };
        (SAFETY * error.max(1e-10).powf(exponent)).clamp(0.2, 8.0)
    }

    pub const fn evaluations(self, n_states: usize) -> u32 {
        match self {
            Self::Fifth => 6,
            Self::Eighth => 12,
            Self::Stiff => 7 + n_states as u32,
        }
    }
}

/// A step that was tried, accepted or not.
#[derive(Debug, Clone)]
pub struct Step<const N: usize> {
    pub start: f64,
    pub size: f64,
    pub from: [f64; N],
    pub to: [f64; N],
    /// Estimated error over tolerance: at most 1 where the step is good.
    pub error: f64,
    order: Order,
    stages: [[f64; N]; 16],
}

#[inline(always)]
fn combine<const N: usize, const T: usize>(stages: &[[f64; N]; 16], terms: &[(usize, f64); T]) -> [f64; N] {
    let mut sum = [0.0; N];
    for &(stage, weight) in terms {
        for i in 0..N {
            sum[i] += weight * stages[stage][i];
        }
    }
    sum
}

#[inline(always)]
fn advanced<const N: usize>(from: &[f64; N], size: f64, slope: [f64; N]) -> [f64; N] {
    let mut to = *from;
    for i in 0..N {
        to[i] += size * slope[i];
    }
    to
}

impl<const N: usize> Step<N> {
    /// Tries a step of `size` from (`start`, `from`), where the slope is `slope`.
    #[inline]
    pub fn attempt(
        order: Order,
        (start, from): (f64, [f64; N]),
        slope: [f64; N],
        size: f64,
        tolerance: &Tolerance<N>,
        rates: &mut impl FnMut(f64, &[f64; N]) -> [f64; N],
    ) -> Self {
        let mut k = [[0.0; N]; 16];
        k[0] = slope;
        let (to, error) = match order {
            Order::Eighth => eighth(&mut k, start, &from, size, tolerance, rates),
            Order::Fifth => fifth(&mut k, start, &from, size, tolerance, rates),
            Order::Stiff => fourth(&mut k, start, &from, size, tolerance, rates),
        };
        Self { start, size, from, to, error, order, stages: k }
    }

    pub fn end(&self) -> f64 {
        self.start + self.size
    }

    /// Slope at the end of the step.
    pub fn slope_at_end(&self) -> [f64; N] {
        self.stages[12]
    }

    /// The polynomial through the step: of degree 7 for order 8 (`rates` is called 3 times), cubic for the others.
    pub fn dense(&self, rates: &mut impl FnMut(f64, &[f64; N]) -> [f64; N]) -> Dense<N> {
        let mut k = self.stages;
        let h = self.size;
        if self.order != Order::Eighth {
            return self.through(&[[0.0; N]; 4]);
        }
        k[13] = rates(self.start + c::NODES[13] * h, &advanced(&self.from, h, combine(&k, &c::STAGE_13)));
        k[14] = rates(self.start + c::NODES[14] * h, &advanced(&self.from, h, combine(&k, &c::STAGE_14)));
        k[15] = rates(self.start + c::NODES[15] * h, &advanced(&self.from, h, combine(&k, &c::STAGE_15)));
        let tail =
            [combine(&k, &c::DENSE_3), combine(&k, &c::DENSE_4), combine(&k, &c::DENSE_5), combine(&k, &c::DENSE_6)];
        self.through(&tail)
    }

    fn through(&self, tail: &[[f64; N]; 4]) -> Dense<N> {
        let (h, k) = (self.size, &self.stages);
        let mut terms = [[0.0; N]; 7];
        for i in 0..N {
            let rise = self.to[i] - self.from[i];
            terms[0][i] = rise;
            terms[1][i] = h * k[0][i] - rise;
            terms[2][i] = 2.0 * rise - h * (k[12][i] + k[0][i]);
            for (j, row) in tail.iter().enumerate() {
                terms[3 + j][i] = h * row[i];
            }
        }
        Dense { start: self.start, size: h, from: self.from, terms }
    }
}

#[inline(always)]
fn eighth<const N: usize>(
    k: &mut [[f64; N]; 16],
    start: f64,
    from: &[f64; N],
    size: f64,
    tolerance: &Tolerance<N>,
    rates: &mut impl FnMut(f64, &[f64; N]) -> [f64; N],
) -> ([f64; N], f64) {
    macro_rules! stage {
        ($($i:literal $terms:ident),*) => {
            $(k[$i] = rates(start + c::NODES[$i] * size, &advanced(from, size, combine(k, &c::$terms)));)*
        };
    }
    stage!(1 STAGE_1, 2 STAGE_2, 3 STAGE_3, 4 STAGE_4, 5 STAGE_5, 6 STAGE_6, 7 STAGE_7, 8 STAGE_8, 9 STAGE_9,
           10 STAGE_10, 11 STAGE_11);
    let to = advanced(from, size, combine(k, &c::WEIGHTS));
    k[12] = rates(start + size, &to);
    let (fifth, third) = (combine(k, &c::ERROR_5), combine(k, &c::ERROR_3));
    let (sum_5, sum_3) = (squares(&fifth, from, &to, tolerance), squares(&third, from, &to, tolerance));
    if sum_5 == 0.0 {
        return (to, 0.0);
    }
    let error = size.abs() * sum_5 / ((sum_5 + 0.01 * sum_3) * tolerance.n_used as f64).sqrt();
    (to, if error.is_nan() { f64::INFINITY } else { error })
}

/// The pair of J. R. Dormand and P. J. Prince, J. Comput. Appl. Math. 6 (1980) 19-26.
#[inline(always)]
fn fifth<const N: usize>(
    k: &mut [[f64; N]; 16],
    start: f64,
    from: &[f64; N],
    size: f64,
    tolerance: &Tolerance<N>,
    rates: &mut impl FnMut(f64, &[f64; N]) -> [f64; N],
) -> ([f64; N], f64) {
    macro_rules! stage {
        ($($i:literal at $node:expr, $terms:expr;)*) => {
            $(k[$i] = rates(start + $node * size, &advanced(from, size, combine(k, &$terms)));)*
        };
    }
    stage! {
        1 at 0.2, [(0, 0.2)];
        2 at 0.3, [(0, 3.0 / 40.0), (1, 9.0 / 40.0)];
        3 at 0.8, [(0, 44.0 / 45.0), (1, -56.0 / 15.0), (2, 32.0 / 9.0)];
        4 at 8.0 / 9.0, [(0, 19372.0 / 6561.0), (1, -25360.0 / 2187.0), (2, 64448.0 / 6561.0), (3, -212.0 / 729.0)];
        5 at 1.0, [(0, 9017.0 / 3168.0), (1, -355.0 / 33.0), (2, 46732.0 / 5247.0), (3, 49.0 / 176.0),
                   (4, -5103.0 / 18656.0)];
    }
    let weights = [(0, 35.0 / 384.0), (2, 500.0 / 1113.0), (3, 125.0 / 192.0), (4, -2187.0 / 6784.0), (5, 11.0 / 84.0)];
    let to = advanced(from, size, combine(k, &weights));
    k[12] = rates(start + size, &to);
    let difference = [
        (0, 71.0 / 57600.0),
        (2, -71.0 / 16695.0),
        (3, 71.0 / 1920.0),
        (4, -17253.0 / 339_200.0),
        (5, 22.0 / 525.0),
        (12, -1.0 / 40.0),
    ];
    let sum = squares(&combine(k, &difference), from, &to, tolerance);
    let error = size.abs() * (sum / tolerance.n_used as f64).sqrt();
    (to, if error.is_nan() { f64::INFINITY } else { error })
}

#[inline(never)]
fn fourth<const N: usize>(
    k: &mut [[f64; N]; 16],
    start: f64,
    from: &[f64; N],
    size: f64,
    tolerance: &Tolerance<N>,
    rates: &mut impl FnMut(f64, &[f64; N]) -> [f64; N],
) -> ([f64; N], f64) {
    let Some((to, off)) = rodas((start, from, &k[0]), size, tolerance, rates) else { return (*from, f64::INFINITY) };
    k[12] = rates(start + size, &to);
    let error = (squares(&off, from, &to, tolerance) / tolerance.n_used as f64).sqrt();
    (to, if error.is_nan() { f64::INFINITY } else { error })
}

/// Sum of squares of an error over its tolerance.
#[inline(always)]
fn squares<const N: usize>(error: &[f64; N], from: &[f64; N], to: &[f64; N], tolerance: &Tolerance<N>) -> f64 {
    let mut sum = 0.0;
    for i in 0..N {
        let scale = tolerance.absolute[i] + tolerance.relative * from[i].abs().max(to[i].abs());
        sum += (error[i] / scale).powi(2);
    }
    sum
}

/// The solution inside one step, as a polynomial of degree 7.
#[derive(Debug, Clone, PartialEq)]
pub struct Dense<const N: usize> {
    pub start: f64,
    pub size: f64,
    from: [f64; N],
    terms: [[f64; N]; 7],
}

impl<const N: usize> Dense<N> {
    pub fn end(&self) -> f64 {
        self.start + self.size
    }

    pub fn at(&self, s: f64) -> [f64; N] {
        let part = (s - self.start) / self.size;
        std::array::from_fn(|i| {
            let rise = self.terms.iter().enumerate().rev().fold(0.0, |sum, (j, term)| {
                let factor = if j % 2 == 0 { part } else { 1.0 - part };
                (sum + term[i]) * factor
            });
            self.from[i] + rise
        })
    }
}
