//! Where one device is recorded: the rehearsal's rig with all its channels on that device.

use std::path::{Path, PathBuf};
use std::process::Command;

use crate::daemon_process::Daemon;

/// A directory with the rig file, its one port and the trials.
pub struct Place {
    device: &'static str,
    dir: tempfile::TempDir,
}

impl Place {
    pub fn new(device: &'static str) -> Self {
        let dir = tempfile::tempdir().unwrap();
        std::fs::write(dir.path().join("rig.toml"), rig_text(device)).unwrap();
        std::fs::create_dir(dir.path().join("ports")).unwrap();
        Self { device, dir }
    }

    fn port(&self) -> PathBuf {
        self.dir.path().join("ports").join(self.device)
    }

    pub fn plug_in(&self, port: &Path) {
        std::os::unix::fs::symlink(port, self.port()).unwrap();
    }

    /// Before the far end goes: the kernel gives a free pty's number to whoever asks next.
    pub fn unplug(&self) {
        std::fs::remove_file(self.port()).unwrap();
    }

    pub fn start_daemon(&self) -> Daemon {
        let (rig, trials) = (self.dir.path().join("rig.toml"), self.dir.path().join("trials"));
        let mut command = Command::new(env!("CARGO_BIN_EXE_tautrail"));
        Daemon::start(command.arg("--json").arg("daemon").arg(rig).arg("--dir").arg(trials))
    }

    /// The only sealed trial there is.
    pub fn trial(&self) -> PathBuf {
        let listed = std::fs::read_dir(self.dir.path().join("trials")).unwrap().map(|entry| entry.unwrap().path());
        let files: Vec<_> = listed.filter(|path| path.extension().is_some_and(|extension| extension == "h5")).collect();
        let [file] = &files[..] else { panic!("one trial file: {files:?}") };
        file.clone()
    }
}

/// The rehearsal's rig with all four channels on the one board (invented data).
fn rig_text(device: &str) -> String {
    let rig = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal/north-pier.toml");
    let text = tautrail::rig::read_joined(&rig).unwrap();
    let (before, second_device) = text.split_once("[[device]]\nname = \"shuttle-node\"").expect("its second device");
    let (_, channels) = second_device.split_once("[[channel]]").expect("its channels");
    let text = format!("{before}[[channel]]{channels}");
    text.replace("winch-node", device).replace("shuttle-node", device)
}
