//! The example firmware, cross-built and running on an emulated Cortex-M3 board whose serial port is a pty.
//!
//! Needs Debian's gcc-arm-none-eabi and qemu-system-arm. Where they are missing the tests fail and say so.

use std::io::{BufRead, BufReader};
use std::path::{Path, PathBuf};
use std::process::{Child, Command, Output, Stdio};
use std::sync::OnceLock;

const PACKAGES: &str =
    "install the emulated board's packages: apt-get install --no-install-recommends gcc-arm-none-eabi qemu-system-arm";
/// Where the firmware looks for the number of its boot.
const BOOT_NUMBER_AT: u32 = 0x203F_FFF0;

/// A powered board. Dropped, its power is cut.
pub struct Board {
    emulator: Child,
    /// Its serial port.
    pub port: PathBuf,
}

/// The firmware, built once a test run.
fn firmware() -> &'static Path {
    static FIRMWARE: OnceLock<PathBuf> = OnceLock::new();
    FIRMWARE.get_or_init(|| {
        let build = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/firmware/cortex-m3/build");
        let image = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join("bench-node.elf");
        let built = output(Command::new(build).arg(&image));
        assert!(built.status.success(), "{}\n{PACKAGES}", String::from_utf8_lossy(&built.stderr));
        image
    })
}

fn output(command: &mut Command) -> Output {
    command.output().unwrap_or_else(|error| panic!("{command:?} cannot be started: {error}"))
}

impl Board {
    /// Gives a board power; it boots at once.
    pub fn boot(boot_number: u32) -> Self {
        let mut emulator = Command::new("qemu-system-arm")
            .args(["-machine", "mps2-an385", "-display", "none", "-monitor", "none", "-serial", "pty"])
            .arg("-kernel")
            .arg(firmware())
            .arg("-device")
            .arg(format!("loader,addr={BOOT_NUMBER_AT:#x},data={boot_number:#x},data-len=4"))
            .stdin(Stdio::null())
            .stdout(Stdio::piped())
            .stderr(Stdio::inherit())
            .spawn()
            .unwrap_or_else(|error| panic!("qemu-system-arm cannot be started ({error}): {PACKAGES}"));
        let mut said = String::new();
        BufReader::new(emulator.stdout.take().unwrap()).read_line(&mut said).unwrap();
        let port = said.split_whitespace().find(|word| word.starts_with("/dev/pts/"));
        let port = port.unwrap_or_else(|| panic!("the emulator names no serial port: {said:?}"));
        Self { port: port.into(), emulator }
    }
}

impl Drop for Board {
    fn drop(&mut self) {
        // Ended already, most likely.
        let _ = self.emulator.kill();
        let _ = self.emulator.wait();
    }
}
