//! Lists the machine's serial ports from directories alone: none is opened.

use std::fs;
use std::path::{Path, PathBuf};

/// A serial port of this machine.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct ListedPort {
    /// The name to give to a rig file: the stable link where there is one.
    pub path: PathBuf,
    /// The node it leads to now, such as `/dev/ttyUSB0`.
    pub node: PathBuf,
    /// The name stays the same after a replug.
    pub stable: bool,
}

/// Ports that a device is behind: stable links first (by id, then by the socket they are plugged into), then nodes
/// that have none.
pub fn list() -> Vec<ListedPort> {
    list_in(Path::new("/dev"), Path::new("/sys/class/tty"))
}

fn list_in(dev: &Path, class: &Path) -> Vec<ListedPort> {
    let mut ports: Vec<ListedPort> = Vec::new();
    for folder in ["by-id", "by-path"] {
        for link in names_in(&dev.join("serial").join(folder)) {
            let Ok(node) = fs::canonicalize(&link) else { continue };
            if !ports.iter().any(|port| port.node == node) {
                ports.push(ListedPort { path: link, node, stable: true });
            }
        }
    }
    for entry in names_in(class).into_iter().filter(|entry| has_hardware(entry)) {
        let node = dev.join(entry.file_name().unwrap_or_default());
        if node.exists() && !ports.iter().any(|port| port.node == node) {
            ports.push(ListedPort { path: node.clone(), node, stable: false });
        }
    }
    ports
}

fn names_in(folder: &Path) -> Vec<PathBuf> {
    let entries = fs::read_dir(folder).into_iter().flatten().flatten();
    let mut paths: Vec<PathBuf> = entries.map(|entry| entry.path()).collect();
    paths.sort();
    paths
}

/// Consoles and ptys have no driver; a serial port that the board could have and has not is of type 0.
fn has_hardware(entry: &Path) -> bool {
    let type_0 = fs::read_to_string(entry.join("type")).is_ok_and(|text| text.trim() == "0");
    entry.join("device/driver").exists() && !type_0
}

#[cfg(test)]
mod tests {
    use super::*;
    use std::os::unix::fs::symlink;

    #[test]
    fn stable_names_come_first_and_no_port_comes_twice() {
        let dir = tempfile::tempdir().unwrap();
        let (dev, class) = (dir.path().join("dev"), dir.path().join("class"));
        fs::create_dir_all(dev.join("serial/by-id")).unwrap();
        fs::create_dir_all(dev.join("serial/by-path")).unwrap();
        for (name, kind) in [("ttyUSB0", "4"), ("ttyACM0", ""), ("ttyS0", "4"), ("ttyS1", "0")] {
            fs::write(dev.join(name), "").unwrap();
            fs::create_dir_all(class.join(name).join("device/driver")).unwrap();
            fs::write(class.join(name).join("type"), kind).unwrap();
        }
        fs::create_dir_all(class.join("tty0")).unwrap();
        symlink(dev.join("ttyUSB0"), dev.join("serial/by-id/usb-winch-if00")).unwrap();
        symlink(dev.join("ttyUSB0"), dev.join("serial/by-path/pci-1:1.0")).unwrap();
        symlink(dev.join("ttyACM0"), dev.join("serial/by-path/pci-2:1.0")).unwrap();
        symlink(dev.join("ttyUSB9"), dev.join("serial/by-id/usb-gone-if00")).unwrap();
        let dev = fs::canonicalize(&dev).unwrap();
        let ports = list_in(&dev, &class);
        let shown: Vec<(&str, bool)> =
            ports.iter().map(|port| (port.path.strip_prefix(&dev).unwrap().to_str().unwrap(), port.stable)).collect();
        let expected = [("serial/by-id/usb-winch-if00", true), ("serial/by-path/pci-2:1.0", true), ("ttyS0", false)];
        assert_eq!(shown, expected);
    }

    #[test]
    fn a_machine_without_ports_lists_none() {
        let nowhere = Path::new("/nonexistent");
        assert_eq!(list_in(nowhere, nowhere), []);
    }
}
