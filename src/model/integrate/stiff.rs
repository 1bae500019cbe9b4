//! One step of the Rosenbrock method RODAS, order 4(3), 6 stages, for systems with states that settle much faster than
//! the launch runs: gas behind a wide valve.
//!
//! Source: E. Hairer, G. Wanner, *Solving Ordinary Differential Equations II* (1996), section IV.7 (form with transformed
//! stages) and the code of that book (coefficients; from memory, the test below finds their order). The Jacobian is by
//! forward differences, which costs no accuracy that a step's error estimate does not see.

use super::step::Tolerance;

const GAMMA: f64 = 0.25;
const NODES: [f64; 6] = [0.0, 0.386, 0.21, 0.63, 1.0, 1.0];
const TIME: [f64; 6] = [0.25, -0.1043, 0.1035, -0.036_2, 0.0, 0.0];
const STAGES: [[f64; 5]; 6] = [
    [0.0; 5],
    [1.544, 0.0, 0.0, 0.0, 0.0],
    [0.946_678_528_081_582_6, 0.255_701_169_898_328_4, 0.0, 0.0, 0.0],
    [3.314_825_187_068_521, 2.896_124_015_972_201, 0.998_641_913_997_781_7, 0.0, 0.0],
    [1.221_224_509_226_641, 6.019_134_481_288_629, 12.537_083_329_320_87, -0.687_886_036_105_895, 0.0],
    [1.221_224_509_226_641, 6.019_134_481_288_629, 12.537_083_329_320_87, -0.687_886_036_105_895, 1.0],
];
const CARRIED: [[f64; 5]; 6] = [
    [0.0; 5],
    [-5.6688, 0.0, 0.0, 0.0, 0.0],
    [-2.430_093_356_833_875, -0.206_359_915_709_191_5, 0.0, 0.0, 0.0],
    [-0.107_352_905_815_137_5, -9.594_562_251_023_355, -20.470_286_148_096_16, 0.0, 0.0],
    [7.496_443_313_967_647, -10.246_804_314_643_52, -33.999_903_528_199_05, 11.708_908_932_061_6, 0.0],
    [
        8.083_246_795_921_522,
        -7.981_132_988_064_893,
        -31.521_594_328_743_71,
        16.319_305_431_231_36,
        -6.058_818_238_834_054,
    ],
];

/// Tries a step of `size` from (`start`, `from`), where the slope is `slope`: the state at its end and the estimated error
/// of each component.
pub fn rodas<const N: usize>(
    (start, from, slope): (f64, &[f64; N], &[f64; N]),
    size: f64,
    tolerance: &Tolerance<N>,
    rates: &mut impl FnMut(f64, &[f64; N]) -> [f64; N],
) -> Option<([f64; N], [f64; N])> {
    let n = tolerance.n_used;
    let (mut matrix, time_slope) = differences((start, from, slope), size, tolerance, rates);
    for (i, row) in matrix.iter_mut().enumerate().take(n) {
        row.iter_mut().take(n).for_each(|entry| *entry = -*entry);
        row[i] += 1.0 / (GAMMA * size);
    }
    let order = factorised(&mut matrix, n)?;
    let mut stages = [[0.0; N]; 6];
    let mut at = *from;
    for s in 0..6 {
        at = *from;
        for (j, earlier) in stages.iter().enumerate().take(s) {
            (0..n).for_each(|i| at[i] += STAGES[s][j] * earlier[i]);
        }
        let mut right = if s == 0 { *slope } else { rates(start + NODES[s] * size, &at) };
        for i in 0..n {
            right[i] += size * TIME[s] * time_slope[i];
            right[i] += stages.iter().take(s).enumerate().map(|(j, u)| CARRIED[s][j] * u[i]).sum::<f64>() / size;
        }
        stages[s] = solved(&matrix, &order, right, n);
    }
    let error = stages[5];
    (0..n).for_each(|i| at[i] += error[i]);
    Some((at, error))
}

type Matrix<const N: usize> = [[f64; N]; N];

/// Jacobian and slope against time, by forward differences.
fn differences<const N: usize>(
    (start, from, slope): (f64, &[f64; N], &[f64; N]),
    size: f64,
    tolerance: &Tolerance<N>,
    rates: &mut impl FnMut(f64, &[f64; N]) -> [f64; N],
) -> (Matrix<N>, [f64; N]) {
    let root = f64::EPSILON.sqrt();
    let mut jacobian = [[0.0; N]; N];
    for j in 0..tolerance.n_felt {
        let by = root * from[j].abs().max(tolerance.absolute[j] / tolerance.relative);
        let mut moved = *from;
        moved[j] += by;
        let (there, by) = (rates(start, &moved), moved[j] - from[j]);
        (0..tolerance.n_used).for_each(|i| jacobian[i][j] = (there[i] - slope[i]) / by);
    }
    let by = root * start.abs().max(size.abs());
    let there = rates(start + by, from);
    (jacobian, std::array::from_fn(|i| (there[i] - slope[i]) / by))
}

/// Gaussian elimination with row exchange, in place; the order of the rows, none for a singular matrix.
fn factorised<const N: usize>(matrix: &mut Matrix<N>, n: usize) -> Option<[usize; N]> {
    let mut order: [usize; N] = std::array::from_fn(|i| i);
    for column in 0..n {
        let pivot = (column..n).max_by(|a, b| matrix[*a][column].abs().total_cmp(&matrix[*b][column].abs()))?;
        if matrix[pivot][column] == 0.0 || !matrix[pivot][column].is_finite() {
            return None;
        }
        matrix.swap(column, pivot);
        order.swap(column, pivot);
        for row in column + 1..n {
            let factor = matrix[row][column] / matrix[column][column];
            matrix[row][column] = factor;
            (column + 1..n).for_each(|k| matrix[row][k] -= factor * matrix[column][k]);
        }
    }
    Some(order)
}

fn solved<const N: usize>(matrix: &Matrix<N>, order: &[usize; N], right: [f64; N], n: usize) -> [f64; N] {
    let mut x = [0.0; N];
    for row in 0..n {
        x[row] = right[order[row]] - (0..row).map(|k| matrix[row][k] * x[k]).sum::<f64>();
    }
    for row in (0..n).rev() {
        let known: f64 = (row + 1..n).map(|k| matrix[row][k] * x[k]).sum();
        x[row] = (x[row] - known) / matrix[row][row];
    }
    x
}

#[cfg(test)]
mod tests {
    use super::{Tolerance, rodas};

    /// Prothero and Robinson's problem, Math. Comp. 28 (1974) 145-162: y' = λ (y − cos t) − sin t, y = cos t.
    fn error_after_one_second(lambda: f64, n_steps: u32) -> f64 {
        let tolerance = Tolerance { relative: 1e-6, absolute: [1e-6; 2], n_used: 2, n_felt: 2 };
        let mut rates = |t: f64, y: &[f64; 2]| [lambda * (y[0] - t.cos()) - t.sin(), y[0] * y[1]];
        let (size, mut y) = (1.0 / f64::from(n_steps), [1.0, 1.0]);
        for k in 0..n_steps {
            let start = f64::from(k) * size;
            let slope = rates(start, &y);
            y = rodas((start, &y, &slope), size, &tolerance, &mut rates).unwrap().0;
        }
        // y₂' = y₁ y₂ gives exp(sin t).
        (y[0] - 1.0_f64.cos()).abs().max((y[1] - 1.0_f64.sin().exp()).abs())
    }

    #[test]
    fn the_method_is_of_order_four() {
        let (coarse, fine) = (error_after_one_second(-1.0, 10), error_after_one_second(-1.0, 20));
        assert!((12.0..24.0).contains(&(coarse / fine)), "{coarse:e} {fine:e}");
    }

    #[test]
    fn a_state_that_settles_in_a_microsecond_does_not_shorten_the_steps() {
        let error = error_after_one_second(-1e6, 20);
        assert!(error < 1e-5, "{error:e}");
    }
}
