//! Measured minus modelled, of one quantity, over time and x, and what it comes to.

use serde::Serialize;

/// Residuals of one quantity in the power stroke. Columns have the same length, in order of time.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Residuals {
    /// `acceleration`, `velocity`, `position`, `anchor tension`.
    pub quantity: String,
    pub unit: String,
    /// Trial seconds.
    pub time_s: Vec<f64>,
    /// Measured place of the shuttle.
    pub x_m: Vec<f64>,
    pub measured: Vec<f64>,
    pub modelled: Vec<f64>,
    pub residual: Vec<f64>,
    /// Standard uncertainty of each residual: measurement, model inputs and alignment.
    pub u: Vec<f64>,
    pub bias: f64,
    pub rms: f64,
    /// Largest in magnitude, with its sign, and where it stands.
    pub max: f64,
    pub max_at_s: f64,
    pub max_at_x_m: f64,
    /// Mean square of residual over its uncertainty: about 1 or less where the model holds (residuals of one launch move
    /// together, so this is no test statistic).
    pub mean_normalised_square: f64,
    /// Lag-one autocorrelation of the residuals: near 1 where a slow misfit outweighs noise.
    pub autocorrelation: f64,
    /// By part of the stroke: the first third of the way, the middle, the last.
    pub by_third: [Third; 3],
}

/// A third of the way from the first place to the last.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct Third {
    pub from_x_m: f64,
    pub to_x_m: f64,
    pub n: usize,
    /// Not a number where the third holds no residual.
    pub bias: f64,
    pub rms: f64,
}

/// One quantity's two sides over a common grid.
pub(super) struct Sides {
    pub quantity: &'static str,
    pub unit: &'static str,
    pub time_s: Vec<f64>,
    pub x_m: Vec<f64>,
    pub measured: Vec<f64>,
    pub modelled: Vec<f64>,
    pub u: Vec<f64>,
}

impl Residuals {
    /// `None` where there is nothing to compare.
    pub(super) fn of(sides: Sides) -> Option<Self> {
        let residual: Vec<f64> = sides.measured.iter().zip(&sides.modelled).map(|(a, b)| a - b).collect();
        let n = residual.len() as f64;
        let largest = (0..residual.len()).max_by(|&a, &b| residual[a].abs().total_cmp(&residual[b].abs()))?;
        let bias = residual.iter().sum::<f64>() / n;
        let normalised = residual.iter().zip(&sides.u).map(|(r, u)| (r / u).powi(2));
        Some(Self {
            quantity: sides.quantity.to_owned(),
            unit: sides.unit.to_owned(),
            bias,
            rms: (residual.iter().map(|r| r * r).sum::<f64>() / n).sqrt(),
            max: residual[largest],
            max_at_s: sides.time_s[largest],
            max_at_x_m: sides.x_m[largest],
            mean_normalised_square: normalised.sum::<f64>() / n,
            autocorrelation: autocorrelation(&residual, bias),
            by_third: by_third(&sides.x_m, &residual),
            time_s: sides.time_s,
            x_m: sides.x_m,
            measured: sides.measured,
            modelled: sides.modelled,
            residual,
            u: sides.u,
        })
    }

    /// Where the residual is greatest against its own uncertainty: that says more than its size, for the uncertainty is
    /// not the same all along.
    pub(super) fn worst_idx(&self) -> Option<usize> {
        (0..self.residual.len()).max_by(|&a, &b| self.over_u(a).total_cmp(&self.over_u(b)))
    }

    /// The greatest of the residuals over their own standard uncertainties.
    pub fn max_over_u(&self) -> f64 {
        self.worst_idx().map_or(f64::NAN, |idx| self.over_u(idx))
    }

    fn over_u(&self, idx: usize) -> f64 {
        self.residual[idx].abs() / self.u[idx]
    }
}

fn by_third(x_m: &[f64], residual: &[f64]) -> [Third; 3] {
    let (from, to) = (x_m.first().copied().unwrap_or(f64::NAN), x_m.last().copied().unwrap_or(f64::NAN));
    std::array::from_fn(|part| {
        let at = |thirds: usize| from + (to - from) * thirds as f64 / 3.0;
        let (from_x_m, to_x_m) = (at(part), at(part + 1));
        let inside = |x: f64| x >= from_x_m && (x < to_x_m || part == 2);
        let values: Vec<f64> = x_m.iter().zip(residual).filter(|(x, _)| inside(**x)).map(|(_, r)| *r).collect();
        let n = values.len();
        let mean = |of: &dyn Fn(f64) -> f64| values.iter().map(|r| of(*r)).sum::<f64>() / n as f64;
        Third { from_x_m, to_x_m, n, bias: mean(&|r| r), rms: mean(&|r| r * r).sqrt() }
    })
}

fn autocorrelation(residual: &[f64], bias: f64) -> f64 {
    let square: f64 = residual.iter().map(|r| (r - bias).powi(2)).sum();
    let product: f64 = residual.windows(2).map(|pair| (pair[0] - bias) * (pair[1] - bias)).sum();
    if square > 0.0 { product / square } else { 0.0 }
}
