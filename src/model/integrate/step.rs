//! One step of the method of Dormand and Prince, order 8(5,3), and its dense output.
//!
//! Source of the formulas: Hairer, Nørsett, Wanner, *Solving Ordinary Differential Equations I* (1993), section II.5
//! (error estimate of orders 5 and 3 combined), II.6 (dense output), II.4 (step size control).

use super::coefficients as c;

/// What a step may err by: `absolute[i] + relative · |y[i]|` in each component.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Tolerance<const N: usize> {
    pub relative: f64,
    pub absolute: [f64; N],
    /// Components that are really there; the rest is padding.
    pub n_used: usize,
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
    /// Tries a step of `size` from (`start`, `from`), where the slope is `slope`; `rates` is called 12 times.
    #[inline]
    pub fn attempt(
        start: f64,
        from: [f64; N],
        slope: [f64; N],
        size: f64,
        tolerance: &Tolerance<N>,
        rates: &mut impl FnMut(f64, &[f64; N]) -> [f64; N],
    ) -> Self {
        let mut k = [[0.0; N]; 16];
        k[0] = slope;
        macro_rules! stage {
            ($($i:literal $terms:ident),*) => {
                $(k[$i] = rates(start + c::NODES[$i] * size, &advanced(&from, size, combine(&k, &c::$terms)));)*
            };
        }
        stage!(1 STAGE_1, 2 STAGE_2, 3 STAGE_3, 4 STAGE_4, 5 STAGE_5, 6 STAGE_6, 7 STAGE_7, 8 STAGE_8, 9 STAGE_9,
               10 STAGE_10, 11 STAGE_11);
        let to = advanced(&from, size, combine(&k, &c::WEIGHTS));
        k[12] = rates(start + size, &to);
        let error = error_over_tolerance(&k, &from, &to, size, tolerance);
        Self { start, size, from, to, error, stages: k }
    }

    pub fn end(&self) -> f64 {
        self.start + self.size
    }

    /// Slope at the end of the step.
    pub fn slope_at_end(&self) -> [f64; N] {
        self.stages[12]
    }

    /// The polynomial through the step; `rates` is called 3 times.
    pub fn dense(&self, rates: &mut impl FnMut(f64, &[f64; N]) -> [f64; N]) -> Dense<N> {
        let mut k = self.stages;
        let h = self.size;
        k[13] = rates(self.start + c::NODES[13] * h, &advanced(&self.from, h, combine(&k, &c::STAGE_13)));
        k[14] = rates(self.start + c::NODES[14] * h, &advanced(&self.from, h, combine(&k, &c::STAGE_14)));
        k[15] = rates(self.start + c::NODES[15] * h, &advanced(&self.from, h, combine(&k, &c::STAGE_15)));
        let mut terms = [[0.0; N]; 7];
        let tail =
            [combine(&k, &c::DENSE_3), combine(&k, &c::DENSE_4), combine(&k, &c::DENSE_5), combine(&k, &c::DENSE_6)];
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

fn error_over_tolerance<const N: usize>(
    stages: &[[f64; N]; 16],
    from: &[f64; N],
    to: &[f64; N],
    size: f64,
    tolerance: &Tolerance<N>,
) -> f64 {
    let (fifth, third) = (combine(stages, &c::ERROR_5), combine(stages, &c::ERROR_3));
    let (mut sum_5, mut sum_3) = (0.0, 0.0);
    for i in 0..N {
        let scale = tolerance.absolute[i] + tolerance.relative * from[i].abs().max(to[i].abs());
        sum_5 += (fifth[i] / scale).powi(2);
        sum_3 += (third[i] / scale).powi(2);
    }
    if sum_5 == 0.0 {
        return 0.0;
    }
    let error = size.abs() * sum_5 / ((sum_5 + 0.01 * sum_3) * tolerance.n_used as f64).sqrt();
    if error.is_nan() { f64::INFINITY } else { error }
}

/// Factor from this step's size to the next one's, from its error over tolerance.
pub fn next_size(error: f64) -> f64 {
    const SAFETY: f64 = 0.9;
    (SAFETY * error.max(1e-10).powf(-0.125)).clamp(0.2, 8.0)
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
