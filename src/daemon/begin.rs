//! Begins the journal of a run: goes on with the one found, or starts a new one, and takes charge of what was there.

use std::path::Path;
use std::sync::Arc;

use crate::journal::{DeviceAtOpen, Disk, Journal, Origin, Settings, Start};

use super::error::DaemonError;
use super::found::{Found, Present};
use super::machine::identifier;

/// Opens the first segment of this run in `journal_dir`. `unknown` are the rig's devices, none of which was heard yet.
///
/// # Errors
/// When the segment cannot be made, or a new journal finds no random numbers for its name.
pub fn begin_journal(
    found: &Found,
    disk: &Arc<dyn Disk>,
    journal_dir: &Path,
    present: Present<'_>,
    unknown: Vec<DeviceAtOpen>,
    settings: Settings,
    now_ns: i64,
) -> Result<Journal, DaemonError> {
    let (journal_id, start, devices) = match &found.resumed {
        Some(resumed) => (resumed.journal_id.clone(), resumed.start.clone(), resumed.devices.clone()),
        None => {
            let journal_id = identifier(found.next_journal_number)
                .map_err(|source| DaemonError::Machine { what: "random numbers", source })?;
            (journal_id, Start::fresh(), unknown)
        }
    };
    let origin = Origin {
        journal_id,
        program_version: env!("CARGO_PKG_VERSION").to_owned(),
        kernel_boot_id: present.kernel_boot_id.to_owned(),
        rig_text: present.rig_text.to_owned(),
        devices,
    };
    let mut journal = Journal::begin(Arc::clone(disk), journal_dir, origin, start, settings, now_ns)?;
    for (segment, end_seq) in &found.segments {
        journal.adopt(segment, *end_seq);
    }
    for path in &found.never_begun {
        journal.forget(path.clone());
    }
    Ok(journal)
}
