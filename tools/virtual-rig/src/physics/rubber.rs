//! Force of one rubber cord against its stretch: Ogden's law with his published parameters for Treloar's natural rubber.
//!
//! Source: R. W. Ogden, "Large deformation isotropic elasticity", Proc. R. Soc. Lond. A 326 (1972) 565-584, uniaxial
//! tension: nominal stress `P(λ) = Σ μ_i (λ^(α_i − 1) − λ^(−α_i/2 − 1))` and energy density
//! `W(λ) = Σ μ_i/α_i (λ^α_i + 2 λ^(−α_i/2) − 3)`. A cord carries `A·P`; a slack cord (λ < 1) carries nothing.
//! Force in proportion to absolute temperature: L. R. G. Treloar, "The Physics of Rubber Elasticity" (kinetic theory).

/// μ in Pa and α of the three terms (Ogden 1972).
const OGDEN_TERMS: [(f64, f64); 3] = [(0.63e6, 1.3), (0.0012e6, 5.0), (-0.01e6, -2.0)];

/// Reference temperature of the parameters.
pub const REFERENCE_TEMPERATURE_K: f64 = 293.15;

const TABLE_STRETCH_MAX: f64 = 6.0;
const N_INTERVALS: usize = 4096;

/// Nominal (engineering) stress in Pa at stretch `stretch` (length over free length).
pub fn nominal_stress_pa(stretch: f64) -> f64 {
    OGDEN_TERMS
        .iter()
        .map(|&(mu_pa, alpha)| mu_pa * (stretch.powf(alpha - 1.0) - stretch.powf(-alpha / 2.0 - 1.0)))
        .sum()
}

/// Slope of the nominal stress against stretch, Pa.
pub fn stress_slope_pa(stretch: f64) -> f64 {
    OGDEN_TERMS
        .iter()
        .map(|&(mu_pa, alpha)| {
            let up = (alpha - 1.0) * stretch.powf(alpha - 2.0);
            let down = (-alpha / 2.0 - 1.0) * stretch.powf(-alpha / 2.0 - 2.0);
            mu_pa * (up - down)
        })
        .sum()
}

/// Elastic energy per unstretched volume in J/m³.
pub fn energy_density_j_per_m3(stretch: f64) -> f64 {
    OGDEN_TERMS
        .iter()
        .map(|&(mu_pa, alpha)| mu_pa / alpha * (stretch.powf(alpha) + 2.0 * stretch.powf(-alpha / 2.0) - 3.0))
        .sum()
}

/// How a cord's elastic force depends on its stretch.
#[derive(Debug, Clone)]
pub enum ForceLaw {
    /// Ogden rubber of a given section, tabulated (cubic Hermite: value and slope exact at the knots).
    Rubber(RubberTable),
    /// `force = stiffness · (stretch − 1)`, for checks against closed forms; in N per unit stretch.
    Linear { stiffness_n: f64 },
}

/// Ogden force of one cord on an even grid of stretches from 1 to 6.
#[derive(Debug, Clone)]
pub struct RubberTable {
    scale_m2: f64,
    /// Force and slope·interval at each knot.
    knots: Vec<(f64, f64)>,
}

impl RubberTable {
    fn new(scale_m2: f64) -> Self {
        let interval = (TABLE_STRETCH_MAX - 1.0) / N_INTERVALS as f64;
        let knots = (0..=N_INTERVALS)
            .map(|idx| {
                let stretch = 1.0 + idx as f64 * interval;
                (scale_m2 * nominal_stress_pa(stretch), scale_m2 * stress_slope_pa(stretch) * interval)
            })
            .collect();
        Self { scale_m2, knots }
    }

    fn force_n(&self, stretch: f64) -> f64 {
        let place = (stretch - 1.0) / (TABLE_STRETCH_MAX - 1.0) * N_INTERVALS as f64;
        let idx = place as usize;
        let (Some(&(left_n, left_rise_n)), Some(&(right_n, right_rise_n))) =
            (self.knots.get(idx), self.knots.get(idx + 1))
        else {
            return self.scale_m2 * nominal_stress_pa(stretch);
        };
        let s = place - idx as f64;
        let rise_n = right_n - left_n;
        let a = left_rise_n - rise_n;
        let b = rise_n - right_rise_n;
        left_n + s * (rise_n + (1.0 - s) * (a * (1.0 - s) + b * s))
    }
}

impl ForceLaw {
    /// Rubber cord of cross-section `section_m2`, its force multiplied by `factor` (temperature, cycles, manufacture).
    pub fn rubber(section_m2: f64, factor: f64) -> Self {
        Self::Rubber(RubberTable::new(section_m2 * factor))
    }

    /// The same cord with its force multiplied by `factor`.
    pub fn scaled(&self, factor: f64) -> Self {
        match self {
            Self::Rubber(table) => Self::rubber(table.scale_m2, factor),
            Self::Linear { stiffness_n } => Self::Linear { stiffness_n: stiffness_n * factor },
        }
    }

    /// Elastic force in N at `stretch`; zero when slack.
    pub fn force_n(&self, stretch: f64) -> f64 {
        if stretch <= 1.0 {
            return 0.0;
        }
        match self {
            Self::Rubber(table) => table.force_n(stretch),
            Self::Linear { stiffness_n } => stiffness_n * (stretch - 1.0),
        }
    }

    /// Elastic energy in J per metre of free length at `stretch`; zero when slack.
    pub fn energy_j_per_m(&self, stretch: f64) -> f64 {
        if stretch <= 1.0 {
            return 0.0;
        }
        match self {
            Self::Rubber(table) => table.scale_m2 * energy_density_j_per_m3(stretch),
            Self::Linear { stiffness_n } => 0.5 * stiffness_n * (stretch - 1.0).powi(2),
        }
    }
}
