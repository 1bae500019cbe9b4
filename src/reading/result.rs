//! What a reading found: numbers with their uncertainty, phases and the outcome.

/// One derived number.
#[derive(Debug, Clone, PartialEq)]
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
}

/// A result that could not be had, and why: never a plausible wrong number.
#[derive(Debug, Clone, PartialEq)]
pub struct Absent {
    pub name: String,
    pub reason: String,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
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
    Aborted,
    Truncated,
}

/// An instant the reading located, in trial seconds.
#[derive(Debug, Clone, PartialEq)]
pub struct Instant {
    /// `winch_back_start`, `hold_start`, `release`, `separation`, `brake_contact`, `rest`, …
    pub name: String,
    pub time_s: f64,
    pub standard_uncertainty_s: f64,
    /// Where the evidence came from, in words.
    pub evidence: String,
}
