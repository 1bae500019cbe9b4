//! What a trial's page shows, as plain data: whoever has a reading and a replay fills it in.

use crate::reading::{Absent, Instant, Motion, ResultRow, Verdict};

/// Everything on the page of one trial. Empty lists and `None` are shown as what they are: not there.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct TrialPage {
    pub heading: Heading,
    /// The rail to scale; `None` where the rig file could not be read.
    pub rail: Option<RailStrip>,
    pub limits: PageLimits,
    /// What the g limit rests on, in words.
    pub proof_load: String,
    /// Tension signals over the whole trial.
    pub tension: Vec<Trace>,
    pub phases: Vec<PhaseSpan>,
    pub instants: Vec<Instant>,
    pub motion: Option<MotionOverRail>,
    /// The smoothed motion, over trial time.
    pub over_time: Option<Motion>,
    pub residuals: Vec<ResidualTrace>,
    /// What the replay's residuals amount to, in words.
    pub residual_sentence: String,
    pub results: Vec<ResultRow>,
    pub absent: Vec<Absent>,
    /// For advice and record only.
    pub verdicts: Vec<Verdict>,
    /// What the rig file's stages ask to be looked at.
    pub inspections: Vec<Inspection>,
    pub energy: Option<EnergyBar>,
    pub health: Vec<DeviceHealth>,
    /// Conditions, notes and amendments: what, with who says it, and the words.
    pub said: Vec<(String, String)>,
    /// Name of a raw group or text, and its SHA-256.
    pub hashes: Vec<(String, String)>,
    /// Oddities that a person should look at, and what the evidence can't tell.
    pub cautions: Vec<String>,
}

/// What the trial was.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct Heading {
    pub trial_id: String,
    pub rig: String,
    pub payload: String,
    /// RFC 3339.
    pub started: String,
    /// Whether the wall clock was ever set, in words.
    pub started_quality: String,
    pub outcome: String,
    /// Sentences, each one piece of evidence.
    pub outcome_evidence: Vec<String>,
    pub program: String,
    /// Set for rehearsals: said at the top that all of it is invented.
    pub invented: bool,
}

/// Limits and plan, for advice and record only.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub struct PageLimits {
    pub tension_n: Option<f64>,
    pub peak_g: Option<f64>,
    pub launch_speed_mps: Option<(f64, f64)>,
}

/// One thing to be looked at before a stage, and what was answered.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Inspection {
    pub stage: String,
    pub item: String,
    /// `None` while nobody has answered.
    pub answer: Option<String>,
}

/// Places along the rail, in metres of x.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct RailStrip {
    pub length_m: f64,
    pub incline_deg: f64,
    pub zero_mark_x_m: f64,
    pub brake_x_m: f64,
    pub release_x_m: Option<f64>,
    pub separation_x_m: Option<f64>,
    pub rest_x_m: Option<f64>,
}

/// A signal over trial time. Steps of more than a few `step_s` are gaps: the line is broken there.
#[derive(Debug, Clone, PartialEq)]
pub struct Trace {
    pub name: String,
    pub time_s: Vec<f64>,
    pub value: Vec<f64>,
    /// Nominal time between samples.
    pub step_s: f64,
}

#[derive(Debug, Clone, PartialEq)]
pub struct PhaseSpan {
    pub name: String,
    pub from_s: f64,
    pub to_s: f64,
}

/// Speed and acceleration against the rail coordinate.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct MotionOverRail {
    pub measured: MotionCurve,
    /// `None` where no replay could be made.
    pub modelled: Option<MotionCurve>,
    pub separation_x_m: Option<f64>,
    /// What the measured motion rests on, in words.
    pub sensors: String,
}

/// Columns of the same length; standard uncertainties may be empty where there are none.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct MotionCurve {
    pub x_m: Vec<f64>,
    pub v_mps: Vec<f64>,
    /// Kinematic acceleration along the rail.
    pub a_mps2: Vec<f64>,
    pub u_v_mps: Vec<f64>,
    pub u_a_mps2: Vec<f64>,
}

/// Measured minus modelled, over trial time.
#[derive(Debug, Clone, PartialEq)]
pub struct ResidualTrace {
    /// In words: "velocity", "release line tension".
    pub quantity: String,
    pub unit: String,
    pub time_s: Vec<f64>,
    pub residual: Vec<f64>,
    /// Standard uncertainty of each residual, empty where unknown.
    pub uncertainty: Vec<f64>,
    pub step_s: f64,
    pub bias: f64,
    pub rms: f64,
    /// Largest in magnitude, with its sign, and where it stands.
    pub largest: f64,
    pub largest_at_s: f64,
    pub largest_at_x_m: Option<f64>,
}

/// Where the energy went.
#[derive(Debug, Clone, PartialEq, Default)]
pub struct EnergyBar {
    /// "work of the release line, winch-back".
    pub total_name: String,
    pub total_j: f64,
    /// Parts that should add up to the total; what is left is shown as unaccounted.
    pub parts: Vec<EnergyPart>,
}

#[derive(Debug, Clone, PartialEq)]
pub struct EnergyPart {
    pub name: String,
    pub energy_j: f64,
    pub standard_uncertainty_j: Option<f64>,
}

/// What was received and what was not.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct DeviceHealth {
    pub device: String,
    pub firmware: String,
    pub n_blocks: u64,
    pub n_samples: u64,
    pub n_gaps: u64,
    pub n_missing: u64,
    /// Frames refused, and why, most frequent first.
    pub refused: Vec<(String, u64)>,
    pub clock: String,
}
