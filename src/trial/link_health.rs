//! How a device's link did over the trial, as attributes of `/raw/<device>`.

use std::collections::BTreeMap;

use hdf5::Group;

use super::attribute::{get_optional_number, get_text, put_number, put_text};
use super::error::TrialError;

/// What came over a link, what was refused and why, what is missing. Counted over the trial's range.
#[derive(Debug, Clone, Default, PartialEq)]
pub struct LinkHealth {
    pub n_reads: u64,
    pub n_bytes: u64,
    /// Refusals by reason; those beyond the cap of `rejected` are counted here too.
    pub refused: BTreeMap<String, u64>,
    /// Frames that the sequence numbers show to be lost; 0 in files written before they were counted.
    pub n_lost_frames: u64,
    pub n_gaps: u64,
    pub n_missing_samples: u64,
    /// Longest time between two reads while the link was up.
    pub longest_stall_s: f64,
    pub n_link_losses: u64,
}

pub(super) fn write(group: &Group, health: &LinkHealth) -> Result<(), TrialError> {
    put_number(group, "link_reads", health.n_reads)?;
    put_number(group, "link_bytes", health.n_bytes)?;
    put_text(group, "link_refused", &serde_json::json!(health.refused).to_string())?;
    put_number(group, "link_lost_frames", health.n_lost_frames)?;
    put_number(group, "link_gaps", health.n_gaps)?;
    put_number(group, "link_missing_samples", health.n_missing_samples)?;
    put_number(group, "link_longest_stall_s", health.longest_stall_s)?;
    put_number(group, "link_losses", health.n_link_losses)
}

/// `None` in files that were written before there was any.
pub(super) fn read(group: &Group) -> Result<Option<LinkHealth>, TrialError> {
    let Some(n_reads) = get_optional_number(group, "link_reads")? else { return Ok(None) };
    let count = |name| get_optional_number(group, name).map(Option::unwrap_or_default);
    Ok(Some(LinkHealth {
        n_reads,
        n_bytes: count("link_bytes")?,
        refused: serde_json::from_str(&get_text(group, "link_refused")?).unwrap_or_default(),
        n_lost_frames: count("link_lost_frames")?,
        n_gaps: count("link_gaps")?,
        n_missing_samples: count("link_missing_samples")?,
        longest_stall_s: get_optional_number(group, "link_longest_stall_s")?.unwrap_or_default(),
        n_link_losses: count("link_losses")?,
    }))
}
