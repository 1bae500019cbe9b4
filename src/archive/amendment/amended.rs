//! A trial with what was said of it later: the sealed file and its amendments as one.
//!
//! The latest word holds: of two conditions of a name, two answers to an item, two texts of a name the later one counts.
//! Notes add up. Amendments from the first one on that does not fit the chain are left out, and said to be.

use std::path::{Path, PathBuf};

use thiserror::Error;

use super::super::again::{AgainError, in_force, signals_again};
use super::chain::{Amendment, amendments, amendments_up_to_the_first_bad, chain_findings};
use crate::calibration::Signal;
use crate::rig::{Attached, Rig, RigError, join, parse, take_apart};
use crate::trial::{CarriedText, Condition, TrialError, TrialFile};

/// The rig file's name among the texts of a trial.
const RIG_TEXT: &str = "rig.toml";

/// Where something is from.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Origin {
    Sealed,
    Amendment(u32),
}

impl std::fmt::Display for Origin {
    fn fmt(&self, f: &mut std::fmt::Formatter<'_>) -> std::fmt::Result {
        match self {
            Self::Sealed => write!(f, "sealed"),
            Self::Amendment(number) => write!(f, "amendment {number:04}"),
        }
    }
}

/// Why a trial can't be read with its amendments.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum AmendedError {
    #[error(transparent)]
    Trial(#[from] TrialError),
    #[error(transparent)]
    Again(#[from] AgainError),
    #[error("the trial carries no rig file {RIG_TEXT:?}: nothing says what its signals mean")]
    NoRig,
    #[error("the rig file inside the trial can't be used: {0}")]
    Rig(#[from] RigError),
}

/// A trial file and its amendments.
#[derive(Debug)]
pub struct Amended {
    pub path: PathBuf,
    pub trial: TrialFile,
    /// Digest over all raw groups, as sealed.
    pub raw_sha256: String,
    /// The amendments that are sound, by number.
    pub chain: Vec<Amendment>,
    /// What is wrong with the amendments, in sentences.
    pub findings: Vec<String>,
}

/// The rig file that holds for a trial.
#[derive(Debug, Clone)]
pub struct AmendedRig {
    pub rig: Rig,
    /// A record or the rig file itself was corrected: values have to be derived again from counts.
    pub records_corrected: bool,
    /// What amendments changed of it, in words.
    pub changes: Vec<String>,
}

impl Amended {
    /// Opens a trial and reads its amendments.
    ///
    /// # Errors
    /// The trial's own. What is wrong with amendments is among [`Amended::findings`].
    pub fn open(path: &Path) -> Result<Self, TrialError> {
        let trial = TrialFile::open(path)?;
        let raw_sha256 = trial.sealed_raw_digest()?;
        let (mut chain, mut findings) = match amendments(path) {
            Ok(chain) => (chain, Vec::new()),
            Err(error) => (amendments_up_to_the_first_bad(path), vec![error.to_string()]),
        };
        let trial_id = &trial.header().trial_id;
        findings.extend(chain_findings(&chain, trial_id, &raw_sha256));
        let sound = (0..chain.len()).find(|n| !chain_findings(&chain[..=*n], trial_id, &raw_sha256).is_empty());
        if let Some(n) = sound {
            findings.push(format!("amendments from {:04} on are left out", chain[n].number));
            chain.truncate(n);
        }
        Ok(Self { path: path.to_owned(), trial, raw_sha256, chain, findings })
    }

    /// Conditions of the trial, by name, with where each is from.
    ///
    /// # Errors
    /// [`TrialError`].
    pub fn conditions(&self) -> Result<Vec<(Condition, Origin)>, TrialError> {
        let mut conditions: Vec<(Condition, Origin)> =
            self.trial.conditions()?.into_iter().map(|condition| (condition, Origin::Sealed)).collect();
        for amendment in &self.chain {
            for said in &amendment.conditions {
                conditions.retain(|(known, _)| known.name != said.name);
                let (name, value, unit) = (said.name.clone(), said.value, said.unit.clone());
                let condition = Condition { name, value, unit, source: amendment.person.clone() };
                conditions.push((condition, Origin::Amendment(amendment.number)));
            }
        }
        conditions.sort_by(|a, b| a.0.name.cmp(&b.0.name));
        Ok(conditions)
    }

    /// Notes, the sealed ones first: where from, who, what.
    ///
    /// # Errors
    /// [`TrialError`].
    pub fn notes(&self) -> Result<Vec<(Origin, String, String)>, TrialError> {
        let sealed = self.trial.notes()?.into_iter().map(|note| (Origin::Sealed, note.name, note.text));
        let later = self.chain.iter().flat_map(|amendment| {
            let note = |text: &String| (Origin::Amendment(amendment.number), amendment.person.clone(), text.clone());
            amendment.notes.iter().map(|said| note(&said.text)).collect::<Vec<_>>()
        });
        Ok(sealed.chain(later).collect())
    }

    /// The latest answer to an inspection item, with where it is from.
    pub fn answer(&self, item: &str) -> Option<(&str, Origin)> {
        let asked = |known: &str| known.trim().eq_ignore_ascii_case(item.trim());
        self.chain.iter().rev().find_map(|amendment| {
            let answer = amendment.answers.iter().rfind(|answer| asked(&answer.item))?;
            Some((answer.answer.as_str(), Origin::Amendment(amendment.number)))
        })
    }

    /// The texts that hold: each name once, as sealed or as corrected last.
    ///
    /// # Errors
    /// [`TrialError`].
    pub fn texts(&self) -> Result<Vec<CarriedText>, TrialError> {
        let mut texts: Vec<CarriedText> = Vec::new();
        for text in self.trial.texts()? {
            // A second text of a name came with a daemon started anew; values use the first.
            if !texts.iter().any(|known| known.name == text.name) {
                texts.push(text);
            }
        }
        for record in self.chain.iter().flat_map(|amendment| &amendment.records) {
            if let Some(text) = texts.iter_mut().find(|text| text.name == record.name) {
                text.text.clone_from(&record.text);
            }
        }
        Ok(texts)
    }

    /// The rig file that holds: with corrected records, and with the conditions that were said later.
    ///
    /// # Errors
    /// [`AmendedError`]: there is none, or it is refused.
    pub fn rig(&self) -> Result<AmendedRig, AmendedError> {
        let mut changes = Vec::new();
        for amendment in &self.chain {
            let corrected = |name: &str| format!("{name} as corrected by amendment {:04}", amendment.number);
            changes.extend(amendment.records.iter().map(|record| corrected(&record.name)));
        }
        let records_corrected = !changes.is_empty();
        let text = if records_corrected {
            joined(&self.texts()?)
        } else {
            self.trial.texts()?.into_iter().find(|text| text.name == RIG_TEXT).map(|text| text.text)
        };
        let mut rig = parse(&text.ok_or(AmendedError::NoRig)?)?;
        for (condition, from) in self.conditions()? {
            if from != Origin::Sealed && apply(&mut rig, &condition) {
                changes.push(format!("{} {} {} by {from}", condition.name, condition.value, condition.unit));
            }
        }
        Ok(AmendedRig { rig, records_corrected, changes })
    }

    /// The measured signals by the rig file that holds: as sealed, or derived again from counts where a record was
    /// corrected.
    ///
    /// # Errors
    /// [`AmendedError`].
    pub fn signals(&self, rig: &AmendedRig) -> Result<Vec<Signal>, AmendedError> {
        if rig.records_corrected {
            return Ok(signals_again(&self.trial, rig.rig.clone())?);
        }
        Ok(self.trial.signals()?)
    }

    /// The rig file as it held on the trial's day, with the zeros that were in force.
    ///
    /// # Errors
    /// [`TrialError`].
    pub fn rig_in_force(&self, rig: Rig) -> Result<Rig, TrialError> {
        Ok(in_force(&self.trial, rig)?.0)
    }
}

/// Conditions that enter results. Others are kept and shown.
fn apply(rig: &mut Rig, condition: &Condition) -> bool {
    match (condition.name.as_str(), condition.unit.as_str()) {
        ("air_density", "kg/m^3") => rig.site.air_density_kg_per_m3 = condition.value,
        ("head_wind", "m/s") => rig.site.head_wind_mps = condition.value,
        _ => return false,
    }
    true
}

/// The rig file's own text with the other texts behind it, as sealing found them; `None` without a rig file.
pub(super) fn joined(texts: &[CarriedText]) -> Option<String> {
    let rig = texts.iter().find(|text| text.name == RIG_TEXT)?;
    let (own, _) = take_apart(&rig.text);
    let attached: Vec<Attached> = texts
        .iter()
        .filter(|text| text.name != RIG_TEXT)
        .map(|text| Attached { name: text.name.clone(), text: text.text.clone() })
        .collect();
    Some(join(own, &attached))
}
