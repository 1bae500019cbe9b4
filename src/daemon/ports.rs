//! Whether any port could be opened at all: another program that holds all of them makes a start pointless.

use std::path::PathBuf;

use crate::link::{DeviceIdx, LinkWhat, PortError};
use crate::rig::Rig;

/// How the first opening of each port went.
#[derive(Debug)]
pub struct FirstOpenings {
    /// What a port in use is reported as, and whether that was its latest report.
    ports: Vec<(String, bool)>,
    any_opened: bool,
}

impl FirstOpenings {
    pub fn of(rig: &Rig) -> Self {
        let busy = |port: &str| PortError::Busy { path: PathBuf::from(port) }.to_string();
        Self { ports: rig.devices.iter().map(|device| (busy(&device.port), false)).collect(), any_opened: false }
    }

    /// Takes a report; true when by it all ports are in use elsewhere and none was ever opened.
    pub fn all_are_busy(&mut self, device: DeviceIdx, what: &LinkWhat) -> bool {
        match what {
            LinkWhat::Up { .. } => self.any_opened = true,
            LinkWhat::Down { reason } => {
                if let Some((busy, is_busy)) = self.ports.get_mut(usize::from(device.0)) {
                    *is_busy = reason == busy;
                }
            }
            LinkWhat::Bytes(_) | LinkWhat::TimeRequested { .. } | LinkWhat::Note { .. } => return false,
        }
        !self.any_opened && self.ports.iter().all(|(_, is_busy)| *is_busy)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn busy(rig: &Rig, index: usize) -> LinkWhat {
        let path = PathBuf::from(&rig.devices[index].port);
        LinkWhat::Down { reason: PortError::Busy { path }.to_string() }
    }

    #[test]
    fn only_when_every_port_is_in_use_and_none_was_opened() {
        let rig = crate::rig::testing::north_pier();
        let (one, two) = (DeviceIdx(0), DeviceIdx(1));
        let mut openings = FirstOpenings::of(&rig);
        assert!(!openings.all_are_busy(one, &busy(&rig, 0)));
        assert!(openings.all_are_busy(two, &busy(&rig, 1)));
        let mut openings = FirstOpenings::of(&rig);
        assert!(!openings.all_are_busy(one, &LinkWhat::Up { path: "port".to_owned(), baud: 1 }));
        assert!(!openings.all_are_busy(one, &busy(&rig, 0)));
        assert!(!openings.all_are_busy(two, &busy(&rig, 1)), "it was open before");
    }
}
