//! What a rig file may say beyond the simplest launcher: unequal cords, gas, tables, further losses, a rail that recoils,
//! stages. Everything here is off where the file is silent.

use super::{CordCard, CordItem, CordPoint, Cords, Given, LossCard, ProofLoad};

#[derive(Debug, Clone, PartialEq, Default)]
pub struct Details {
    /// Of the cords in `[cords]`.
    pub cords: CordDetails,
    /// `[[more_cords]]`: sets that differ from those.
    pub more_cords: Vec<CordGroup>,
    pub gas: Vec<Gas>,
    pub force_tables: Vec<Vec<XForce>>,
    pub losses: MoreLosses,
    pub rail_support: Option<RailSupport>,
    pub payload: PayloadDetails,
    pub brake: BrakeDetails,
    /// Place of a mechanical uncoupling of the payload.
    pub uncoupling_x_m: Option<f64>,
    pub settings: SettingUncertainties,
    pub correlations: Vec<Correlation>,
    pub stages: Vec<Stage>,
    /// `[[cord]]`: the cords on the rig, one by one.
    pub cord_items: Vec<CordItem>,
    /// The static test behind the g limit.
    pub proof_load: Option<ProofLoad>,
    pub reading: ReadingSettings,
    pub inputs: Vec<Input>,
    /// Greatest left/right difference of the anchors over their sum; advice and record only.
    pub asymmetry_limit: Option<f64>,
}

impl Details {
    /// The cards of all cord sets that have one.
    pub fn cards(&self) -> impl Iterator<Item = &CordCard> {
        let groups = self.more_cords.iter().map(|group| &group.details);
        std::iter::once(&self.cords).chain(groups).filter_map(|details| details.card.as_ref())
    }
}

/// A cord set of its own.
#[derive(Debug, Clone, PartialEq)]
pub struct CordGroup {
    pub cords: Cords,
    pub zero_mark_x_m: f64,
    pub details: CordDetails,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub struct CordDetails {
    /// While extending; empty where the cord has one branch only.
    pub loading_curve: Vec<CordPoint>,
    /// Elongation over which the tension comes down from the loading to the unloading branch (by a factor e).
    pub gap_width: Option<f64>,
    /// Prony terms: share of the tension that goes, with the time in which it does.
    pub relaxation: Vec<RelaxationTerm>,
    /// Relative change of tension per kelvin above the card's temperature.
    pub tension_per_kelvin: f64,
    pub card_temperature_c: Option<f64>,
    pub temperature_c: Option<f64>,
    /// Relative loss of tension for each tenfold of cycles after the first.
    pub loss_per_tenfold_cycles: f64,
    pub cycles: f64,
    /// x in the run-out from which the cords extend again and pull back.
    pub retension_x_m: Option<f64>,
    /// The curve may be used beyond its last point; every result then says so.
    pub extrapolate: bool,
    /// The card that the curves come from; none where the rig file itself states them.
    pub card: Option<CordCard>,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RelaxationTerm {
    pub share: f64,
    pub time_s: f64,
}

/// A gas cylinder that pulls the shuttle. Pressures are absolute here whatever the file says.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Gas {
    pub charged_pressure_pa: Given,
    pub ambient_pressure_pa: f64,
    /// Over the ambient pressure, on the piston's other side.
    pub back_pressure_pa: f64,
    pub vessel_volume_m3: f64,
    pub dead_volume_m3: f64,
    pub temperature_c: f64,
    pub polytropic_exponent: f64,
    pub piston_area_m2: f64,
    pub travel_ratio: f64,
    pub stroke_m: f64,
    pub hold_s: f64,
    /// Infinite where it is tight.
    pub leak_time_s: f64,
    pub valve: Option<Valve>,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Valve {
    /// Discharge coefficient times area.
    pub area_m2: f64,
    /// Of the line behind it; infinite where it costs nothing.
    pub line_area_m2: f64,
    pub opening_s: f64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct XForce {
    pub x_m: f64,
    pub force_n: f64,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub struct MoreLosses {
    /// Times the load across the rail.
    pub load_coefficient: Option<Given>,
    /// Times the cords' pull.
    pub pull_coefficient: Option<Given>,
    pub viscous_n_per_mps: Option<Given>,
    pub breakaway_n: Option<Given>,
    /// Share of each cord's held tension that relaxed in the hold and does not come back in the stroke.
    pub cord_lag: Option<Given>,
    /// Of one cord, for each m/s at which its end comes in.
    pub cord_viscous_n_per_mps: Option<Given>,
    pub along_x: Vec<XForce>,
    /// Relative standard uncertainty of the loss over x.
    pub along_x_relative_uncertainty: f64,
    /// Names of losses that a fit is to find.
    pub fit: Vec<String>,
    /// The fit whose values stand in this rig; none where the rig file states its losses itself.
    pub card: Option<LossCard>,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RailSupport {
    pub mass_kg: Given,
    pub stiffness_n_per_m: Given,
    pub damping_n_per_mps: f64,
}

#[derive(Debug, Clone, PartialEq, Default)]
pub struct PayloadDetails {
    /// (airspeed m/s, force N).
    pub thrust: Vec<(f64, f64)>,
    pub lift_area_m2: f64,
}

#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct BrakeDetails {
    pub per_metre_n_per_m: f64,
    pub per_speed_n_per_mps: f64,
    pub relative_uncertainty: f64,
}

/// Standard uncertainties of what is set or found on the day.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct SettingUncertainties {
    pub draw_m: f64,
    pub head_wind_mps: f64,
    pub air_density_relative: f64,
    /// From the first pull to the planned draw.
    pub winch_s: f64,
    pub hold_s: f64,
}

#[derive(Debug, Clone, PartialEq)]
pub struct Correlation {
    /// Names of two uncertain inputs, as `tautrail forecast` lists them.
    pub between: [String; 2],
    pub coefficient: f64,
}

/// One step of a build-up: what differs from the rig as described, what opens it.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Stage {
    pub name: String,
    pub cord_count: Option<u32>,
    pub draw_m: Option<f64>,
    pub payload_mass_kg: Option<f64>,
    /// What the stage before must have shown.
    pub gate: String,
    /// To be looked at before it.
    pub inspect: Vec<String>,
}

/// How trials are read: `[reading]`.
#[derive(Debug, Clone, PartialEq)]
pub struct ReadingSettings {
    /// Channel frequency classes that peaks are given in.
    pub classes: Vec<u32>,
    /// Least samples a second over the class.
    pub least_rate_per_class: f64,
    pub start_up: FilterStartUp,
    pub three_ms: ThreeMs,
}

impl Default for ReadingSettings {
    fn default() -> Self {
        Self {
            classes: vec![60, 180, 600, 1000],
            least_rate_per_class: 10.0,
            start_up: FilterStartUp::Hold,
            three_ms: ThreeMs::Contiguous,
        }
    }
}

/// What a filter takes for the samples before its first one.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum FilterStartUp {
    Hold,
    Zero,
}

/// Which 3 ms value is meant.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ThreeMs {
    /// Exceeded for 3 ms without a break.
    Contiguous,
    /// Exceeded for 3 ms in all.
    Cumulative,
}

impl ThreeMs {
    pub const fn word(self) -> &'static str {
        match self {
            Self::Contiguous => "contiguous",
            Self::Cumulative => "cumulative",
        }
    }
}

/// A digital input of a device and what its edges mean.
#[derive(Debug, Clone, PartialEq)]
pub struct Input {
    pub device: String,
    pub number: u8,
    pub meaning: InputMeaning,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum InputMeaning {
    /// Falls when the line lets go.
    Release,
    /// High while the payload's flag passes: rises when the flag's front comes to x.
    BeamGate { x_m: Given, flag_m: Given },
}
