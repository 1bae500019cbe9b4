//! `--losses FILE`: a loss card in the place of what the rig file says of its losses.

use std::path::{Path, PathBuf};

use tautrail::rig::{LossCard, Rig, Severity};
use thiserror::Error;

#[derive(Debug, Error)]
pub enum LossesFileError {
    #[error("{path}: cannot be read: {source}")]
    Unreadable { path: String, source: std::io::Error },
    #[error("{path} is no loss card that can be used:\n{list}")]
    Refused { path: String, list: String },
    #[error("{path} is of rig {card:?}, this is rig {rig:?}: losses don't travel between rigs")]
    OtherRig { path: String, card: String, rig: String },
}

/// The card in a file.
pub fn read_losses(path: &Path) -> Result<LossCard, LossesFileError> {
    let shown = path.display().to_string();
    let text =
        std::fs::read_to_string(path).map_err(|source| LossesFileError::Unreadable { path: shown.clone(), source })?;
    let (card, findings) = LossCard::read(&shown, &text);
    let wrong = findings.iter().filter(|finding| finding.severity == Severity::Error);
    let list = wrong.map(|finding| format!("{shown}:{finding}")).collect::<Vec<_>>().join("\n");
    card.ok_or(LossesFileError::Refused { path: shown, list })
}

/// Puts the card of a file, where one is named, into a rig.
pub fn put_losses(rig: &mut Rig, path: Option<&PathBuf>) -> Result<(), LossesFileError> {
    let Some(path) = path else { return Ok(()) };
    let card = read_losses(path)?;
    if card.rig != rig.name {
        let path = path.display().to_string();
        return Err(LossesFileError::OtherRig { path, card: card.rig, rig: rig.name.clone() });
    }
    card.put_into(rig);
    Ok(())
}
