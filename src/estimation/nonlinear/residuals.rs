//! What is to be made small, with its derivatives: exact ones from dual numbers, or central differences of a stated step.

use nalgebra::DMatrix;

use crate::estimation::Dual;

/// Residuals (model less reading, or the other way round) as a function of parameters. A residual that is not finite says
/// that the parameters lie outside the model's domain: the solver steps back.
pub trait Residuals {
    fn n_parameters(&self) -> usize;

    fn n_residuals(&self) -> usize;

    /// The residuals into `into`, which has [`Self::n_residuals`] places.
    fn residuals(&self, parameters: &[f64], into: &mut [f64]);

    /// ∂rᵢ/∂pₖ into row i, column k.
    fn jacobian(&self, parameters: &[f64], into: &mut DMatrix<f64>);
}

/// Residual number i from dual parameters: derivatives are exact, there is no step.
#[derive(Debug, Clone, Copy)]
pub struct Exact<const P: usize, F> {
    n_residuals: usize,
    residual: F,
}

impl<const P: usize, F: Fn(&[Dual<P>; P], usize) -> Dual<P>> Exact<P, F> {
    pub const fn new(n_residuals: usize, residual: F) -> Self {
        Self { n_residuals, residual }
    }

    fn dual(parameters: &[f64]) -> [Dual<P>; P] {
        std::array::from_fn(|k| Dual::parameter(parameters[k], k))
    }
}

impl<const P: usize, F: Fn(&[Dual<P>; P], usize) -> Dual<P>> Residuals for Exact<P, F> {
    fn n_parameters(&self) -> usize {
        P
    }

    fn n_residuals(&self) -> usize {
        self.n_residuals
    }

    fn residuals(&self, parameters: &[f64], into: &mut [f64]) {
        let dual = Self::dual(parameters);
        for (i, residual) in into.iter_mut().enumerate() {
            *residual = (self.residual)(&dual, i).value;
        }
    }

    fn jacobian(&self, parameters: &[f64], into: &mut DMatrix<f64>) {
        let dual = Self::dual(parameters);
        for i in 0..self.n_residuals {
            for (k, slope) in (self.residual)(&dual, i).slopes.into_iter().enumerate() {
                into[(i, k)] = slope;
            }
        }
    }
}

/// Residuals of a function that can't be written with dual numbers, such as a curve through points or an integrated motion.
///
/// Central differences with the step h = ∛ε · max(|p|, scale), ε = 2.2e-16: 6.1e-6 of the parameter, where the error of
/// rounding (ε/h) and of truncation (h²) are about equal (W. H. Press and others, *Numerical Recipes*, 3rd edition, 2007,
/// section 5.7).
#[derive(Debug, Clone)]
pub struct Stepped<F> {
    n_residuals: usize,
    /// Size of each parameter where it comes near zero.
    scales: Vec<f64>,
    residuals: F,
}

impl<F: Fn(&[f64], &mut [f64])> Stepped<F> {
    /// `scales` has one entry a parameter, above zero: the size at which a change of it starts to matter.
    pub const fn new(n_residuals: usize, scales: Vec<f64>, residuals: F) -> Self {
        Self { n_residuals, scales, residuals }
    }
}

impl<F: Fn(&[f64], &mut [f64])> Residuals for Stepped<F> {
    fn n_parameters(&self) -> usize {
        self.scales.len()
    }

    fn n_residuals(&self) -> usize {
        self.n_residuals
    }

    fn residuals(&self, parameters: &[f64], into: &mut [f64]) {
        (self.residuals)(parameters, into);
    }

    fn jacobian(&self, parameters: &[f64], into: &mut DMatrix<f64>) {
        let mut moved = parameters.to_vec();
        let (mut above, mut below) = (vec![0.0; self.n_residuals], vec![0.0; self.n_residuals]);
        for (k, scale) in self.scales.iter().enumerate() {
            let step = f64::EPSILON.cbrt() * parameters[k].abs().max(*scale);
            moved[k] = parameters[k] + step;
            let upper = moved[k];
            (self.residuals)(&moved, &mut above);
            moved[k] = parameters[k] - step;
            let width = upper - moved[k];
            (self.residuals)(&moved, &mut below);
            moved[k] = parameters[k];
            for i in 0..self.n_residuals {
                into[(i, k)] = (above[i] - below[i]) / width;
            }
        }
    }
}
