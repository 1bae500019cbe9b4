//! Gas drive: a reservoir feeds a cylinder through a valve and its line; the piston pushes the shuttle.
//!
//! Both volumes follow one polytrope, `p = p₀ (ρ/ρ₀)^n` (closed vessel: `W = p₀V₀/(n−1)·(1 − (V₀/V₁)^(n−1))`, any
//! thermodynamics textbook). The flow between them is that of a nozzle of ideal gas, choked below the critical pressure
//! ratio (A. H. Shapiro, "The Dynamics and Thermodynamics of Compressible Fluid Flow", 1953, ch. 4; the same form in
//! ISO 6358): `ṁ = C A p₁/√(R T₁) · Ψ(p₂/p₁)`.

const GAS_CONSTANT_J_PER_KG_K: f64 = 287.05;
/// Ratio of specific heats of air.
const GAMMA: f64 = 1.4;
/// Above this pressure ratio the flow goes straight to nothing, so that its slope stays finite.
const NEARLY_EQUAL: f64 = 0.999;

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct GasDrive {
    pub reservoir_m3: f64,
    /// Absolute, at the end of charging.
    pub charge_pa: f64,
    pub ambient_pa: f64,
    pub temperature_k: f64,
    pub polytropic_exponent: f64,
    pub piston_area_m2: f64,
    pub dead_volume_m3: f64,
    /// The piston pushes up to here, then its ports open.
    pub stroke_m: f64,
    /// Over this distance the ports let the pressure go.
    pub venting_m: f64,
    /// Flow coefficient times area of valve and line, fully open.
    pub valve_area_m2: f64,
    pub valve_opening_s: f64,
    /// Share of the reservoir's gas lost per second while charged.
    pub leak_per_s: f64,
    /// Pressure ahead of the piston per squared speed, Pa s²/m².
    pub back_pressure_pa_s2_per_m2: f64,
}

/// Gas in both volumes, kg.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct GasState {
    pub reservoir_kg: f64,
    pub cylinder_kg: f64,
}

impl GasDrive {
    fn charge_density(&self) -> f64 {
        self.charge_pa / (GAS_CONSTANT_J_PER_KG_K * self.temperature_k)
    }

    fn pressure_pa(&self, density: f64) -> f64 {
        self.charge_pa * (density / self.charge_density()).powf(self.polytropic_exponent)
    }

    fn density_at(&self, pressure_pa: f64) -> f64 {
        self.charge_density() * (pressure_pa / self.charge_pa).powf(1.0 / self.polytropic_exponent)
    }

    pub fn cylinder_m3(&self, x_m: f64) -> f64 {
        self.dead_volume_m3 + self.piston_area_m2 * x_m.clamp(0.0, self.stroke_m)
    }

    /// Reservoir at `pressure_pa`, cylinder at ambient pressure.
    pub fn charged_to(&self, pressure_pa: f64) -> GasState {
        GasState {
            reservoir_kg: self.density_at(pressure_pa) * self.reservoir_m3,
            cylinder_kg: self.density_at(self.ambient_pa) * self.dead_volume_m3,
        }
    }

    /// Reservoir and cylinder joined at the charge pressure.
    pub fn filled(&self) -> GasState {
        let density = self.charge_density();
        GasState { reservoir_kg: density * self.reservoir_m3, cylinder_kg: density * self.dead_volume_m3 }
    }

    pub fn reservoir_pa(&self, state: &GasState) -> f64 {
        self.pressure_pa(state.reservoir_kg / self.reservoir_m3)
    }

    pub fn cylinder_pa(&self, state: &GasState, x_m: f64) -> f64 {
        self.pressure_pa(state.cylinder_kg / self.cylinder_m3(x_m))
    }

    /// Mass flow from reservoir to cylinder in kg/s with the valve open by `open` (0 to 1).
    pub fn flow_kg_per_s(&self, state: &GasState, x_m: f64, open: f64) -> f64 {
        let (reservoir_pa, cylinder_pa) = (self.reservoir_pa(state), self.cylinder_pa(state, x_m));
        let (up_pa, down_pa, sign, up_density) = if reservoir_pa >= cylinder_pa {
            (reservoir_pa, cylinder_pa, 1.0, state.reservoir_kg / self.reservoir_m3)
        } else {
            (cylinder_pa, reservoir_pa, -1.0, state.cylinder_kg / self.cylinder_m3(x_m))
        };
        // p/√(RT) = √(pρ)
        sign * open * self.valve_area_m2 * (up_pa * up_density).sqrt() * nozzle(down_pa / up_pa)
    }

    /// Net force of the piston on the shuttle at `x_m` and speed `v_mps`, N.
    pub fn force_n(&self, state: &GasState, x_m: f64, v_mps: f64) -> f64 {
        let vented = ((x_m - self.stroke_m) / self.venting_m).clamp(0.0, 1.0);
        let behind_pa = self.cylinder_pa(state, x_m) - self.ambient_pa;
        let ahead_pa = self.back_pressure_pa_s2_per_m2 * v_mps * v_mps.abs();
        self.piston_area_m2 * (behind_pa - ahead_pa) * (1.0 - vented)
    }
}

/// Nozzle function Ψ of the pressure ratio; the greatest, critical value when choked.
fn nozzle(ratio: f64) -> f64 {
    let critical = (2.0 / (GAMMA + 1.0)).powf(GAMMA / (GAMMA - 1.0));
    let psi = |ratio: f64| {
        let terms = ratio.powf(2.0 / GAMMA) - ratio.powf((GAMMA + 1.0) / GAMMA);
        (2.0 * GAMMA / (GAMMA - 1.0) * terms.max(0.0)).sqrt()
    };
    if ratio > NEARLY_EQUAL {
        psi(NEARLY_EQUAL) * (1.0 - ratio) / (1.0 - NEARLY_EQUAL)
    } else {
        psi(ratio.max(critical))
    }
}
