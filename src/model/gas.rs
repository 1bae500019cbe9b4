//! Gas as an energy source: a charged volume behind a piston, straight or through a valve. All pressures absolute.
//!
//! Straight (the vessel opens fully at release): p V^n = const.
//!
//! Through a valve: the vessel follows p = p₀ (m/m₀)^n, T = T₀ (m/m₀)^(n−1); the flow through the effective area is that
//! of an ideal nozzle, choked below the critical ratio (ISO 6358-1:2013, annex; B. W. Andersen, *The Analysis and Design
//! of Pneumatic Systems*, 1967, section 2.2; from memory); the cylinder obeys dp/dt = (n/V)(R T ṁ − p dV/dt)
//! (Andersen, section 4.2, with the polytropic exponent in place of κ). Near equal pressures, above 98 % of the upstream
//! one, the flow is taken as proportional to the difference (laminar part in the sense of ISO 6358).

/// Specific gas constant of air, J/(kg K) (ISO 2533:1975).
const AIR_R: f64 = 287.052_87;
/// Ratio of specific heats of air.
const KAPPA: f64 = 1.4;
/// Pressure ratio above which the flow is linear.
const LAMINAR_FROM: f64 = 0.98;

/// A gas cylinder pulling the shuttle.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct GasSource {
    /// Absolute, when the vessel was charged and had its surroundings' temperature again.
    pub charged_pressure_pa: f64,
    /// Absolute, of the surroundings: what leaks leak to and what the piston's other side sees.
    pub ambient_pressure_pa: f64,
    /// Of the piston's other side over the ambient pressure while it moves.
    pub back_pressure_pa: f64,
    pub vessel_volume_m3: f64,
    /// Between vessel or valve and piston at the start.
    pub dead_volume_m3: f64,
    pub temperature_k: f64,
    /// 1 isothermal, 1.4 adiabatic air.
    pub polytropic_exponent: f64,
    pub piston_area_m2: f64,
    /// Piston travel per metre of shuttle travel.
    pub travel_ratio: f64,
    /// Of the piston; at its end the cylinder vents and pulls no more.
    pub stroke_m: f64,
    /// Time from charging to release.
    pub hold_s: f64,
    /// Of the leak: the overpressure falls by a factor e. Infinite where it is tight.
    pub leak_time_s: f64,
    pub path: GasPath,
}

/// From vessel to cylinder.
#[derive(Debug, Clone, Copy, PartialEq)]
pub enum GasPath {
    /// Vessel and cylinder are one volume.
    Straight,
    /// Effective flow areas (discharge coefficient times area) in series; the valve opens evenly over a time.
    Valve { valve_area_m2: f64, line_area_m2: f64, opening_s: f64 },
}

/// State of a valve's vessel and cylinder.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct GasState {
    /// Mass left in the vessel over the mass at release.
    pub vessel_part: f64,
    pub cylinder_pa: f64,
}

impl GasSource {
    /// Absolute pressure at release, after leaking.
    pub fn release_pressure_pa(&self) -> f64 {
        let over_pa = self.charged_pressure_pa - self.ambient_pressure_pa;
        self.ambient_pressure_pa + over_pa * (-self.hold_s / self.leak_time_s).exp()
    }

    pub fn has_valve(&self) -> bool {
        matches!(self.path, GasPath::Valve { .. })
    }

    pub fn opening_s(&self) -> f64 {
        match self.path {
            GasPath::Straight => 0.0,
            GasPath::Valve { opening_s, .. } => opening_s,
        }
    }

    /// State at release: the cylinder at ambient pressure.
    pub fn at_release(&self) -> GasState {
        GasState { vessel_part: 1.0, cylinder_pa: self.ambient_pressure_pa }
    }

    /// Shuttle travel at which the piston's stroke ends.
    pub fn travel_m(&self) -> f64 {
        self.stroke_m / self.travel_ratio
    }

    /// Pull at the shuttle, N, at a cylinder pressure.
    #[inline]
    pub fn pull_n(&self, cylinder_pa: f64) -> f64 {
        self.travel_ratio * self.piston_area_m2 * (cylinder_pa - self.ambient_pressure_pa - self.back_pressure_pa)
    }

    /// Cylinder pressure without valve after the shuttle has travelled.
    #[inline]
    pub fn straight_pressure_pa(&self, travelled_m: f64) -> f64 {
        let start_m3 = self.vessel_volume_m3 + self.dead_volume_m3;
        let now_m3 = start_m3 + self.piston_area_m2 * self.travel_ratio * travelled_m;
        self.release_pressure_pa() * (start_m3 / now_m3).powf(self.polytropic_exponent)
    }

    /// Rates of a valve's vessel and cylinder at a time since release.
    #[inline]
    pub fn rates(&self, t_s: f64, travelled_m: f64, v_mps: f64, state: GasState) -> GasState {
        let n = self.polytropic_exponent;
        let release_pa = self.release_pressure_pa();
        let part = state.vessel_part.max(1e-6);
        let vessel_pa = release_pa * part.powf(n);
        let vessel_k = self.temperature_k * part.powf(n - 1.0);
        let area_m2 = self.flow_area_m2(t_s);
        let (flow_kg_per_s, upstream_k) = if vessel_pa >= state.cylinder_pa {
            (nozzle_flow_kg_per_s(area_m2, vessel_pa, vessel_k, state.cylinder_pa), vessel_k)
        } else {
            (-nozzle_flow_kg_per_s(area_m2, state.cylinder_pa, self.temperature_k, vessel_pa), self.temperature_k)
        };
        let release_kg = release_pa * self.vessel_volume_m3 / (AIR_R * self.temperature_k);
        let swept_m3_per_m = self.piston_area_m2 * self.travel_ratio;
        let volume_m3 = self.dead_volume_m3 + swept_m3_per_m * travelled_m;
        let cylinder_pa_per_s =
            n / volume_m3 * (AIR_R * upstream_k * flow_kg_per_s - state.cylinder_pa * swept_m3_per_m * v_mps);
        GasState { vessel_part: -flow_kg_per_s / release_kg, cylinder_pa: cylinder_pa_per_s }
    }

    /// Effective area of valve and line in series, 1/A² = 1/A₁² + 1/A₂².
    fn flow_area_m2(&self, t_s: f64) -> f64 {
        let GasPath::Valve { valve_area_m2, line_area_m2, opening_s } = self.path else { return 0.0 };
        let open = if opening_s > 0.0 { (t_s / opening_s).clamp(0.0, 1.0) } else { 1.0 };
        let valve_m2 = valve_area_m2 * open;
        valve_m2 * line_area_m2 / valve_m2.hypot(line_area_m2)
    }
}

/// Mass flow of air through an effective area, from upstream state to downstream pressure.
fn nozzle_flow_kg_per_s(area_m2: f64, upstream_pa: f64, upstream_k: f64, downstream_pa: f64) -> f64 {
    let ratio = downstream_pa / upstream_pa;
    let critical = (2.0 / (KAPPA + 1.0)).powf(KAPPA / (KAPPA - 1.0));
    let r = ratio.clamp(critical, LAMINAR_FROM);
    let factor = 2.0 * KAPPA / (KAPPA - 1.0) * (r.powf(2.0 / KAPPA) - r.powf((KAPPA + 1.0) / KAPPA));
    let laminar = if ratio > LAMINAR_FROM { (1.0 - ratio).max(0.0) / (1.0 - LAMINAR_FROM) } else { 1.0 };
    laminar * area_m2 * upstream_pa * (factor / (AIR_R * upstream_k)).sqrt()
}
