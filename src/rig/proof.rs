//! The proof-load record: a static test of the airframe, and the g limit that follows from it.
//!
//! Masses spread over the structure stand for the inertia of the mass that the structure carries: n = (masses ± own mass) /
//! accelerated mass, in multiples of the acceleration of free fall; the limit is n over the margin. Nothing here says that
//! the airframe may fly: structural sign-off is licensed practice.

use jiff::civil::Date;

use super::document::{Findings, Section};

/// Said wherever the limit of a proof load is shown.
pub const PROOF_CAUTION: &str = "structural sign-off is licensed practice";

/// How the structure's own weight acted in the test.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum OwnWeight {
    /// With the masses.
    Adds,
    /// Against them.
    CountsAgainst,
    /// It was borne elsewhere.
    NotCounted,
}

impl OwnWeight {
    const ALL: [(Self, &'static str); 3] =
        [(Self::Adds, "adds"), (Self::CountsAgainst, "counts against"), (Self::NotCounted, "not counted")];
}

/// A static test.
#[derive(Debug, Clone, PartialEq)]
pub struct ProofLoad {
    /// What was loaded.
    pub structure: String,
    pub masses_kg: f64,
    /// How the masses lay.
    pub spread: String,
    pub structure_mass_kg: f64,
    pub own_weight: OwnWeight,
    /// Mass whose inertia the test stands for.
    pub accelerated_mass_kg: f64,
    /// Which way the load acted on the airframe.
    pub direction: String,
    /// Proven load over the limit, 1 or more.
    pub margin: f64,
    pub date: Option<Date>,
    pub inspector: String,
}

impl ProofLoad {
    /// Multiples of free fall that the test stood for.
    pub fn proven_g(&self) -> f64 {
        let own_kg = match self.own_weight {
            OwnWeight::Adds => self.structure_mass_kg,
            OwnWeight::CountsAgainst => -self.structure_mass_kg,
            OwnWeight::NotCounted => 0.0,
        };
        (self.masses_kg + own_kg) / self.accelerated_mass_kg
    }

    /// The proven load over the margin.
    pub fn limit_g(&self) -> f64 {
        self.proven_g() / self.margin
    }

    /// What is to be said where a limit is above the proven one.
    pub fn exceeded(&self, peak_g: f64) -> Option<String> {
        let (limit_g, structure) = (self.limit_g(), &self.structure);
        (peak_g > limit_g).then(|| {
            format!(
                "{peak_g:.2} g is above {limit_g:.2} g, what the proof load of {structure} allows with its margin; {PROOF_CAUTION}"
            )
        })
    }

    /// The test as one sentence, with the caution.
    pub fn sentence(&self) -> String {
        let date = self.date.map_or_else(|| "undated".to_owned(), |date| date.to_string());
        format!(
            "proof load {date} by {}: {:.1} kg {} on {} stand for {:.2} g {} on {:.2} kg; limit {:.2} g with a margin of {:.2}; \
             {PROOF_CAUTION}",
            self.inspector,
            self.masses_kg,
            self.spread,
            self.structure,
            self.proven_g(),
            self.direction,
            self.accelerated_mass_kg,
            self.limit_g(),
            self.margin
        )
    }
}

pub(super) fn proof_load(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Option<ProofLoad> {
    let mut table = root.optional_section(findings, "proof_load")?;
    let own_weight = own_weight(&mut table, findings);
    let structure_mass_kg = table.optional_quantity(findings, "structure_mass", "kg", 0.0..=500.0);
    if own_weight != OwnWeight::NotCounted && structure_mass_kg.is_none() {
        findings.error("proof_load.structure_mass", "is missing, its weight counts by own_weight");
    }
    let proof = ProofLoad {
        structure: table.text(findings, "structure"),
        masses_kg: table.quantity(findings, "masses", "kg", 0.01..=10_000.0),
        spread: table.text(findings, "spread"),
        structure_mass_kg: structure_mass_kg.unwrap_or(0.0),
        own_weight,
        accelerated_mass_kg: table.quantity(findings, "accelerated_mass", "kg", 0.01..=500.0),
        direction: table.text(findings, "direction"),
        margin: table.number(findings, "margin", 1.0..=10.0),
        date: table.date(findings, "date"),
        inspector: table.text(findings, "inspector"),
    };
    table.finish(findings);
    if proof.proven_g() <= 0.0 {
        findings.error("proof_load.masses", "do not outweigh the structure's own mass: nothing was proven");
    }
    if !proof.direction.is_empty() && proof.direction != "aft" {
        let message =
            format!("acted {:?}; a launch loads the airframe aft, so this test says nothing about it", proof.direction);
        findings.caution("proof_load.direction", message);
    }
    Some(proof)
}

/// What the plan's limit says against the proven one.
pub(super) fn against_limit(proof: &ProofLoad, peak_g: f64, findings: &mut Findings<'_>) {
    if let Some(message) = proof.exceeded(peak_g) {
        findings.caution("limits.peak_g", message);
    }
}

fn own_weight(table: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> OwnWeight {
    let word = table.text(findings, "own_weight");
    let known = OwnWeight::ALL.into_iter().find(|(_, name)| *name == word);
    if known.is_none() && !word.is_empty() {
        let all = OwnWeight::ALL.map(|(_, name)| name).join(", ");
        findings.error(&table.key("own_weight"), format!("{word:?} is not known, the structure's own weight: {all}"));
    }
    known.map_or(OwnWeight::NotCounted, |(own, _)| own)
}
