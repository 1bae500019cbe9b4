//! What a reading found: numbers with their uncertainty, phases and the outcome.

use serde::Serialize;

/// One share of a result's standard uncertainty, in the result's unit. Shares add in quadrature.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct BudgetTerm {
    /// `calibration`, `noise`, `time`, `place`, `model`, or more exactly in words.
    pub source: String,
    pub standard_uncertainty: f64,
}

/// One derived number.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct ResultRow {
    /// `launch_speed`, `peak_g_cfc60_specific`, `release_time`, …
    pub name: String,
    pub value: f64,
    /// SI unit, or "g" for multiples of 9.80665 m/s².
    pub unit: String,
    pub standard_uncertainty: f64,
    /// Limits of the 95 % coverage interval.
    pub low: f64,
    pub high: f64,
    /// How it was obtained, in words.
    pub method: String,
    /// What the standard uncertainty is made of; the largest share first.
    pub budget: Vec<BudgetTerm>,
}

/// A result that could not be had, and why: never a plausible wrong number.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Absent {
    pub name: String,
    pub reason: String,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
#[non_exhaustive]
pub enum Outcome {
    Launched,
    LetDown,
    HangFire,
    EarlyRelease,
    HookSlip,
    CordFailure,
    PayloadLeftEarly,
    PayloadNotSeparated,
    ArrestOverrun,
    /// Released without a payload: a free pull or a coast-down, to learn the losses from.
    ShuttleAlone,
    Aborted,
    Truncated,
}

impl Outcome {
    /// The word used in trial files, JSON and on screens.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Launched => "launched",
            Self::LetDown => "let-down",
            Self::HangFire => "hang-fire",
            Self::EarlyRelease => "early release",
            Self::HookSlip => "hook slip",
            Self::CordFailure => "cord failure",
            Self::PayloadLeftEarly => "payload left early",
            Self::PayloadNotSeparated => "payload not separated",
            Self::ArrestOverrun => "arrest overrun",
            Self::ShuttleAlone => "shuttle alone",
            Self::Aborted => "aborted",
            Self::Truncated => "truncated",
        }
    }
}

/// An instant the reading located, in trial seconds.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Instant {
    /// `winch_back_start`, `hold_start`, `release`, `separation`, `brake_contact`, `rest`, …
    pub name: String,
    pub time_s: f64,
    pub standard_uncertainty_s: f64,
    /// Where the evidence came from, in words.
    pub evidence: String,
}

/// Smoothed motion of the shuttle from the end of the hold to rest. All columns have the same length.
///
/// Position is in the rail's frame; standard uncertainties include noise and calibration.
#[derive(Debug, Clone, PartialEq, Serialize, Default)]
pub struct Motion {
    pub time_s: Vec<f64>,
    pub x_m: Vec<f64>,
    pub v_mps: Vec<f64>,
    /// Kinematic acceleration along the rail.
    pub a_mps2: Vec<f64>,
    pub u_x_m: Vec<f64>,
    pub u_v_mps: Vec<f64>,
    pub u_a_mps2: Vec<f64>,
    /// Which sensors it rests on, in words.
    pub sensors: String,
}

/// Where the energy went, in joules. Rows of the same names stand in the results with their uncertainty.
#[derive(Debug, Clone, Copy, PartialEq, Serialize)]
pub struct EnergyAudit {
    /// Work of the release line from the zero mark to the hold.
    pub stored_j: f64,
    /// Shuttle and payload at separation.
    pub kinetic_j: f64,
    /// Height of the separation over the zero mark, where the drawing began.
    pub potential_j: f64,
    /// The rest: friction both ways, hysteresis and relaxation, drag, motion left in the cords.
    pub lost_j: f64,
}

/// Whether the trial met what the rig file asks. For advice and record only.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Verdict {
    /// `launch_speed_window`, `peak_g_limit`, `tension_limit`, `planned_draw`, `asymmetry_limit`.
    pub name: String,
    /// What is asked, with its numbers.
    pub asked: String,
    pub decision: Decision,
    /// That what is asked was kept; `None` where the result is absent.
    pub probability: Option<f64>,
    /// What was found, in words.
    pub why: String,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize)]
#[serde(rename_all = "snake_case")]
pub enum Decision {
    Met,
    Missed,
    NotDecidable,
}

impl Decision {
    pub const fn word(self) -> &'static str {
        match self {
            Self::Met => "met",
            Self::Missed => "missed",
            Self::NotDecidable => "not decidable",
        }
    }
}

/// Everything one trial says by itself.
#[derive(Debug, Clone, PartialEq, Serialize)]
pub struct Reading {
    pub outcome: Outcome,
    /// Sentences, each one piece of evidence with its numbers.
    pub outcome_evidence: Vec<String>,
    /// In order of time.
    pub instants: Vec<Instant>,
    pub results: Vec<ResultRow>,
    pub absent: Vec<Absent>,
    pub verdicts: Vec<Verdict>,
    /// Disagreements and oddities that a person should look at.
    pub findings: Vec<String>,
    pub motion: Option<Motion>,
    pub energy: Option<EnergyAudit>,
}

impl ResultRow {
    /// The largest share of the uncertainty and its part of the variance.
    pub fn dominant(&self) -> Option<(&str, f64)> {
        let first = self.budget.first()?;
        let part = (first.standard_uncertainty / self.standard_uncertainty).powi(2);
        part.is_finite().then_some((first.source.as_str(), part))
    }
}

impl Reading {
    pub fn result(&self, name: &str) -> Option<&ResultRow> {
        self.results.iter().find(|row| row.name == name)
    }

    pub fn instant(&self, name: &str) -> Option<&Instant> {
        self.instants.iter().find(|instant| instant.name == name)
    }

    pub fn absence(&self, name: &str) -> Option<&Absent> {
        self.absent.iter().find(|absent| absent.name == name)
    }
}
