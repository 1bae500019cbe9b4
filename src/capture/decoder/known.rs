//! The descriptions of a device's present boot by which its blocks may be unpacked.
//!
//! Several, because firmware that queues its blocks may describe a change before the last blocks of the old description
//! have left.

use crate::capture::sample::{DeviceDescription, StreamDescription};

/// Descriptions of one boot that blocks may name.
pub const N_DESCRIPTIONS: usize = 4;

/// Oldest first; the last one is in force.
#[derive(Debug, Default)]
pub(super) struct KnownDescriptions {
    known: Vec<Known>,
}

#[derive(Debug)]
struct Known {
    description: DeviceDescription,
    /// Came before a sign that the device may have started again.
    stale: bool,
}

impl KnownDescriptions {
    pub(super) fn in_force(&self) -> Option<&DeviceDescription> {
        self.known.last().map(|known| &known.description)
    }

    /// Takes a description; true where it differs from the one in force.
    pub(super) fn take(&mut self, description: DeviceDescription) -> bool {
        if let Some(last) = self.known.last_mut().filter(|last| last.description == description) {
            last.stale = false;
            return false;
        }
        self.known.retain(|known| known.description.description_id != description.description_id);
        if self.known.len() == N_DESCRIPTIONS {
            self.known.remove(0);
        }
        self.known.push(Known { description, stale: false });
        true
    }

    pub(super) fn named(&self, description_id: u16) -> Option<&DeviceDescription> {
        let mut all = self.known.iter().map(|known| &known.description);
        all.find(|description| description.description_id == description_id)
    }

    pub(super) fn clear(&mut self) {
        self.known.clear();
    }

    /// The device may have started again.
    pub(super) fn doubt(&mut self) {
        self.known.iter_mut().for_each(|known| known.stale = true);
    }

    /// The device did start again: what it said since then holds for the new boot. Gives those descriptions.
    pub(super) fn move_to_boot(&mut self, boot_id: u32, keep_stale: bool) -> Vec<DeviceDescription> {
        self.known.retain(|known| keep_stale || !known.stale);
        self.known.iter_mut().for_each(|known| known.description.boot_id = boot_id);
        self.known.iter().map(|known| known.description.clone()).collect()
    }

    /// Ids as people read them: "55811" or "55810, 55811"; "none".
    pub(super) fn ids(&self) -> String {
        if self.known.is_empty() {
            return "none".to_owned();
        }
        let ids = self.known.iter().map(|known| known.description.description_id.to_string());
        ids.collect::<Vec<_>>().join(", ")
    }
}

/// The stream of that number.
pub(super) fn stream_of(description: &DeviceDescription, stream: u8) -> Option<&StreamDescription> {
    description.streams.iter().find(|described| described.stream == stream)
}
