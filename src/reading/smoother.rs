//! Linear fixed-interval smoothing of a state with scalar measurements.
//!
//! The estimates are those of Rauch, Tung and Striebel, "Maximum likelihood estimates of linear dynamic systems"
//! (AIAA Journal 3, 1965), computed in the modified Bryson–Frazier form (Bierman, "Fixed interval smoothing with
//! discrete measurements", Int. J. Control 18, 1973): no inverse of a predicted covariance is taken, so states that
//! never change (bias, scale) cost no accuracy. Measurements come one by one, so no matrix is inverted at all.

use nalgebra::{SMatrix, SVector};

/// Estimate and covariance at one marked point.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Estimate<const N: usize> {
    pub state: SVector<f64, N>,
    pub covariance: SMatrix<f64, N, N>,
}

/// How far a measurement lay from its prediction, and the variance expected of that distance.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Innovation {
    pub difference: f64,
    pub variance: f64,
}

impl Innovation {
    /// Squared distance over its expected variance: 1 on average when the model holds.
    pub fn normalised_square(&self) -> f64 {
        self.difference * self.difference / self.variance
    }
}

/// A transition matrix `F = I + Σ value·eᵢ·eⱼᵀ`: states hang together only here and there, and products with the few
/// entries cost a tenth of full ones.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Transition<const K: usize>(pub [(usize, usize, f64); K]);

impl<const K: usize> Transition<K> {
    fn ahead<const N: usize>(&self, state: &SVector<f64, N>) -> SVector<f64, N> {
        let mut moved = *state;
        for (i, j, value) in self.0 {
            moved[i] += value * state[j];
        }
        moved
    }

    fn back<const N: usize>(&self, adjoint: &SVector<f64, N>) -> SVector<f64, N> {
        let mut moved = *adjoint;
        for (i, j, value) in self.0 {
            moved[j] += value * adjoint[i];
        }
        moved
    }

    /// `F·P·Fᵀ`
    fn around<const N: usize>(&self, p: &SMatrix<f64, N, N>) -> SMatrix<f64, N, N> {
        let mut right = *p;
        for (i, j, value) in self.0 {
            for row in 0..N {
                right[(row, i)] += value * p[(row, j)];
            }
        }
        let mut both = right;
        for (i, j, value) in self.0 {
            for column in 0..N {
                both[(i, column)] += value * right[(j, column)];
            }
        }
        both
    }

    /// `Fᵀ·Λ·F`
    fn inside<const N: usize>(&self, information: &SMatrix<f64, N, N>) -> SMatrix<f64, N, N> {
        let mut right = *information;
        for (i, j, value) in self.0 {
            for row in 0..N {
                right[(row, j)] += value * information[(row, i)];
            }
        }
        let mut both = right;
        for (i, j, value) in self.0 {
            for column in 0..N {
                both[(j, column)] += value * right[(i, column)];
            }
        }
        both
    }
}

#[derive(Debug, Clone)]
enum Entry<const N: usize, const K: usize> {
    Predicted { transition: Transition<K> },
    Updated { h: SVector<f64, N>, gain: SVector<f64, N>, innovation: Innovation },
    Marked,
}

/// The forward run, remembered for the way back.
#[derive(Debug, Clone)]
pub struct Filter<const N: usize, const K: usize> {
    now: Estimate<N>,
    log: Vec<Entry<N, K>>,
    marks: Vec<Estimate<N>>,
}

impl<const N: usize, const K: usize> Filter<N, K> {
    /// Starts from a prior.
    pub fn new(prior: Estimate<N>, n_points: usize) -> Self {
        Self { now: prior, log: Vec::with_capacity(4 * n_points), marks: Vec::with_capacity(n_points) }
    }

    pub fn now(&self) -> &Estimate<N> {
        &self.now
    }

    /// `x ← F·x`, `P ← F·P·Fᵀ + Q`.
    pub fn predict(&mut self, transition: Transition<K>, process: &SMatrix<f64, N, N>) {
        self.now.state = transition.ahead(&self.now.state);
        self.now.covariance = transition.around(&self.now.covariance) + process;
        self.log.push(Entry::Predicted { transition });
    }

    /// Takes in `z = hᵀ·x + noise`.
    pub fn update(&mut self, h: SVector<f64, N>, z: f64, variance: f64) -> Innovation {
        let ph = self.now.covariance * h;
        let innovation = Innovation { difference: z - h.dot(&self.now.state), variance: h.dot(&ph) + variance };
        let gain = ph / innovation.variance;
        self.now.state += gain * innovation.difference;
        self.now.covariance -= gain * ph.transpose();
        self.log.push(Entry::Updated { h, gain, innovation });
        innovation
    }

    /// Asks for the smoothed estimate here.
    pub fn mark(&mut self) {
        self.marks.push(self.now);
        self.log.push(Entry::Marked);
    }

    /// The way back: smoothed estimates at all marks, in order of time.
    pub fn smooth(self) -> Vec<Estimate<N>> {
        self.way_back(true)
    }

    /// Smoothed states alone; the covariances stay the filter's.
    pub fn smooth_states(self) -> Vec<Estimate<N>> {
        self.way_back(false)
    }

    fn way_back(mut self, with_covariance: bool) -> Vec<Estimate<N>> {
        let mut adjoint = SVector::<f64, N>::zeros();
        let mut information = SMatrix::<f64, N, N>::zeros();
        let mut marks = std::mem::take(&mut self.marks);
        let mut n_left = marks.len();
        for entry in self.log.iter().rev() {
            match entry {
                Entry::Marked => {
                    n_left -= 1;
                    let filtered = &mut marks[n_left];
                    let p = filtered.covariance;
                    filtered.state -= p * adjoint;
                    if with_covariance {
                        filtered.covariance = p - p * information * p;
                    }
                }
                Entry::Predicted { transition } => {
                    adjoint = transition.back(&adjoint);
                    if with_covariance {
                        information = transition.inside(&information);
                    }
                }
                Entry::Updated { h, gain, innovation } => {
                    // (I − K·hᵀ)ᵀ on the left: a − h·(K·a); the same on both sides of the information.
                    let step = innovation.difference / innovation.variance + gain.dot(&adjoint);
                    adjoint -= h * step;
                    if !with_covariance {
                        continue;
                    }
                    let along = information * gain;
                    let both = gain.dot(&along) + 1.0 / innovation.variance;
                    information += h * h.transpose() * both - h * along.transpose() - along * h.transpose();
                }
            }
        }
        marks
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    /// Constant acceleration with white jerk, as the reference file's header gives it.
    fn reference_run(table: &[Vec<f64>]) -> (Vec<Estimate<3>>, Vec<Estimate<3>>) {
        let (dt, q) = (0.01_f64, 20_000.0);
        let f = Transition([(0, 1, dt), (0, 2, dt * dt / 2.0), (1, 2, dt)]);
        let process = SMatrix::<f64, 3, 3>::new(
            dt.powi(5) / 20.0,
            dt.powi(4) / 8.0,
            dt.powi(3) / 6.0,
            dt.powi(4) / 8.0,
            dt.powi(3) / 3.0,
            dt.powi(2) / 2.0,
            dt.powi(3) / 6.0,
            dt.powi(2) / 2.0,
            dt,
        ) * q;
        let prior = Estimate {
            state: SVector::zeros(),
            covariance: SMatrix::from_diagonal(&SVector::<f64, 3>::new(1e-2, 1.0, 1e4)),
        };
        let mut filter = Filter::new(prior, table.len());
        let mut filtered = Vec::new();
        for (k, row) in table.iter().enumerate() {
            if k > 0 {
                filter.predict(f, &process);
            }
            filter.update(SVector::<f64, 3>::new(1.0, 0.0, 0.0), row[2], 1e-6);
            filter.mark();
            filtered.push(*filter.now());
        }
        (filtered, filter.smooth())
    }

    // Rauch, Tung and Striebel 1965 (method); filterpy 2.0.0, confirmed by batch least squares: see the file.
    #[test]
    fn smoothed_states_and_variances_are_those_of_an_independent_smoother() {
        let text = include_str!("../../tests/reference/rts_constant_acceleration.csv");
        let table: Vec<Vec<f64>> = text
            .lines()
            .filter(|line| !line.starts_with('#'))
            .skip(1)
            .map(|line| line.split(',').map(|cell| cell.parse().unwrap()).collect())
            .collect();
        let (filtered, smoothed) = reference_run(&table);
        assert!(table.len() > 30);
        for (k, row) in table.iter().enumerate() {
            let tolerances = [1e-9, 1e-7, 1e-5];
            for i in 0..3 {
                let (f, s) = (filtered[k].state[i], smoothed[k].state[i]);
                assert!((f - row[3 + i]).abs() < tolerances[i], "filtered {k},{i}: {f} for {}", row[3 + i]);
                assert!((s - row[6 + i]).abs() < tolerances[i], "smoothed {k},{i}: {s} for {}", row[6 + i]);
                let variance = smoothed[k].covariance[(i, i)];
                assert!((variance / row[9 + i] - 1.0).abs() < 1e-8, "variance {k},{i}: {variance} for {}", row[9 + i]);
            }
        }
    }
}
