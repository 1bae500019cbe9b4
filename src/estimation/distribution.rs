//! Distributions from draws, and correlated draws.

use thiserror::Error;

/// A distribution known by its draws (JCGM 101:2008, section 7): sorted.
#[derive(Debug, Clone, PartialEq)]
pub struct Distribution {
    draws: Vec<f64>,
}

impl Distribution {
    /// Of draws in any order; those that are not finite are left out.
    pub fn of(draws: impl IntoIterator<Item = f64>) -> Self {
        let mut draws: Vec<f64> = draws.into_iter().filter(|draw| draw.is_finite()).collect();
        draws.sort_by(f64::total_cmp);
        Self { draws }
    }

    pub fn len(&self) -> usize {
        self.draws.len()
    }

    pub fn is_empty(&self) -> bool {
        self.draws.is_empty()
    }

    pub fn mean(&self) -> f64 {
        self.draws.iter().sum::<f64>() / self.len() as f64
    }

    /// Standard deviation with n − 1 (JCGM 101:2008, equation 17).
    pub fn standard_deviation(&self) -> f64 {
        let mean = self.mean();
        let squares: f64 = self.draws.iter().map(|draw| (draw - mean).powi(2)).sum();
        (squares / (self.len() as f64 - 1.0)).sqrt()
    }

    /// Quantile between 0 and 1, linear between draws (R. J. Hyndman, Y. Fan, The American Statistician 50 (1996) 361-365,
    /// definition 7).
    pub fn quantile(&self, part: f64) -> f64 {
        let Some(last) = self.draws.len().checked_sub(1) else { return f64::NAN };
        let place = part.clamp(0.0, 1.0) * last as f64;
        let (below, share) = (place.floor() as usize, place.fract());
        let above = (below + 1).min(last);
        self.draws[below] + share * (self.draws[above] - self.draws[below])
    }

    /// Probabilistically symmetric 95 % coverage interval (JCGM 101:2008, section 7.7).
    pub fn interval_95(&self) -> (f64, f64) {
        (self.quantile(0.025), self.quantile(0.975))
    }

    /// Share of draws for which `holds`.
    pub fn probability(&self, holds: impl Fn(f64) -> bool) -> f64 {
        self.draws.iter().filter(|draw| holds(**draw)).count() as f64 / self.len() as f64
    }
}

/// The correlations contradict each other: no joint distribution has them.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Error)]
#[error("the correlations contradict each other (row {row} of their matrix can't be met): weaken or remove one")]
pub struct NotPositive {
    pub row: usize,
}

/// Lower triangular root L of a correlation matrix, L Lᵀ: turns independent deviates into correlated ones (JCGM 101:2008,
/// section C.5.2).
#[derive(Debug, Clone, PartialEq)]
pub struct Cholesky {
    rows: Vec<Vec<f64>>,
}

impl Cholesky {
    /// # Errors
    /// [`NotPositive`] where the matrix is no correlation matrix. Full correlation (±1) is allowed.
    pub fn of(correlations: &[Vec<f64>]) -> Result<Self, NotPositive> {
        const ROUNDING: f64 = 1e-12;
        let mut rows: Vec<Vec<f64>> = Vec::with_capacity(correlations.len());
        for (i, row) in correlations.iter().enumerate() {
            let mut root = vec![0.0; i + 1];
            for j in 0..=i {
                let known: f64 =
                    (0..j).map(|k| root[k] * rows.get(j).map_or(root[k], |other: &Vec<f64>| other[k])).sum();
                let rest = row[j] - known;
                root[j] = if i == j {
                    if rest < -ROUNDING {
                        return Err(NotPositive { row: i });
                    }
                    rest.max(0.0).sqrt()
                } else if rows[j][j] > ROUNDING {
                    rest / rows[j][j]
                } else if rest.abs() <= 1e-9 {
                    0.0
                } else {
                    return Err(NotPositive { row: i });
                };
            }
            rows.push(root);
        }
        Ok(Self { rows })
    }

    /// Correlated deviates from independent ones.
    pub fn correlate(&self, independent: &[f64]) -> Vec<f64> {
        self.rows
            .iter()
            .map(|row| row.iter().zip(independent).map(|(weight, deviate)| weight * deviate).sum())
            .collect()
    }
}

#[cfg(test)]
mod tests {
    use super::{Cholesky, Distribution, NotPositive};

    #[test]
    fn quantiles_lie_between_draws_as_numpy_puts_them() {
        // numpy.quantile([1, 2, 3, 4], [0.025, 0.5]) = [1.075, 2.5] (default method, NumPy 2 manual).
        let distribution = Distribution::of([4.0, 2.0, f64::NAN, 1.0, 3.0]);
        assert_eq!(distribution.len(), 4);
        assert!((distribution.quantile(0.025) - 1.075).abs() < 1e-12);
        assert!((distribution.quantile(0.5) - 2.5).abs() < 1e-12);
        assert!((distribution.standard_deviation() - (5.0_f64 / 3.0).sqrt()).abs() < 1e-12);
        assert!((distribution.probability(|draw| draw > 1.5) - 0.75).abs() < 1e-12);
    }

    #[test]
    fn a_correlation_matrix_is_the_square_of_its_root() {
        let matrix = vec![vec![1.0, 0.5, -0.2], vec![0.5, 1.0, 0.3], vec![-0.2, 0.3, 1.0]];
        let root = Cholesky::of(&matrix).unwrap();
        for (i, row) in matrix.iter().enumerate() {
            for (j, entry) in row.iter().enumerate() {
                let product: f64 = (0..=i.min(j)).map(|k| root.rows[i][k] * root.rows[j][k]).sum();
                assert!((product - entry).abs() < 1e-14);
            }
        }
    }

    #[test]
    fn contradicting_correlations_are_refused_and_full_ones_are_not() {
        let full = vec![vec![1.0, -1.0], vec![-1.0, 1.0]];
        assert_eq!(Cholesky::of(&full).unwrap().correlate(&[0.7, 0.3]), [0.7, -0.7]);
        let against = vec![vec![1.0, 0.9, 0.9], vec![0.9, 1.0, -0.9], vec![0.9, -0.9, 1.0]];
        assert_eq!(Cholesky::of(&against), Err(NotPositive { row: 2 }));
    }
}
