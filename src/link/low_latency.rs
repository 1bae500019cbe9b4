//! Asks a port's driver to hand bytes over at once.
//!
//! Some USB adapters hold short reads back for 16 ms unless told otherwise. Ports without such a timer refuse the
//! question; that is no fault.

use std::os::fd::AsRawFd;
use std::path::Path;

/// `struct serial_struct` of `<linux/serial.h>`.
#[repr(C)]
#[derive(Debug)]
struct SerialStruct {
    kind: libc::c_int,
    line: libc::c_int,
    port: libc::c_uint,
    irq: libc::c_int,
    flags: libc::c_int,
    xmit_fifo_size: libc::c_int,
    custom_divisor: libc::c_int,
    baud_base: libc::c_int,
    close_delay: libc::c_ushort,
    io_type: libc::c_char,
    reserved_char: libc::c_char,
    hub6: libc::c_int,
    closing_wait: libc::c_ushort,
    closing_wait2: libc::c_ushort,
    iomem_base: *mut libc::c_uchar,
    iomem_reg_shift: libc::c_ushort,
    port_high: libc::c_uint,
    iomap_base: libc::c_ulong,
}

/// `ASYNC_LOW_LATENCY` of `<linux/tty_flags.h>`.
const LOW_LATENCY: libc::c_int = 1 << 13;

/// What is known of how long a port's bytes are held back.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub(super) enum Held {
    /// The driver has no such timer.
    NoTimer,
    /// The timer in force.
    ForMs(u32),
}

impl Held {
    /// A sentence, where there is something to say.
    pub fn sentence(self) -> Option<String> {
        match self {
            Self::NoTimer => None,
            Self::ForMs(ms @ 0..=1) => Some(format!("its adapter hands bytes over within {ms} ms")),
            Self::ForMs(ms) => Some(format!(
                "its adapter holds bytes back for {ms} ms: let this user write its latency_timer (see the udev rules)"
            )),
        }
    }
}

/// Asks for bytes at once, by the driver's flag and by the adapter's timer, and says what is in force.
pub(super) fn ask(port: &impl AsRawFd, path: &Path) -> Held {
    // A port without the flag refuses it; its timer, if it has one, is looked at all the same.
    let _by_flag = set_flag(port);
    latency_timer(path, Path::new("/sys/class/tty")).map_or(Held::NoTimer, |timer| shorten(&timer))
}

/// Sets an adapter's timer to its least, where this user may; what is in force then.
fn shorten(timer: &Path) -> Held {
    if read_ms(timer).is_some_and(|ms| ms > 1) {
        let _refused = std::fs::write(timer, "1");
    }
    read_ms(timer).map_or(Held::NoTimer, Held::ForMs)
}

fn set_flag(port: &impl AsRawFd) -> std::io::Result<()> {
    let mut settings = std::mem::MaybeUninit::<SerialStruct>::zeroed();
    // SAFETY: the kernel fills or reads exactly one `serial_struct`, which `SerialStruct` lays out as the C header does;
    // zeroed, it is valid for every field; the descriptor is open as long as `port` is borrowed.
    let failed = unsafe {
        if libc::ioctl(port.as_raw_fd(), libc::TIOCGSERIAL, settings.as_mut_ptr()) == 0 {
            (*settings.as_mut_ptr()).flags |= LOW_LATENCY;
            libc::ioctl(port.as_raw_fd(), libc::TIOCSSERIAL, settings.as_mut_ptr()) != 0
        } else {
            true
        }
    };
    if failed { Err(std::io::Error::last_os_error()) } else { Ok(()) }
}

/// The adapter's timer in sysfs, where it has one.
fn latency_timer(path: &Path, class: &Path) -> Option<std::path::PathBuf> {
    let real = std::fs::canonicalize(path).ok()?;
    let timer = class.join(real.file_name()?).join("device/latency_timer");
    timer.exists().then_some(timer)
}

fn read_ms(timer: &Path) -> Option<u32> {
    std::fs::read_to_string(timer).ok()?.trim().parse().ok()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_timer_is_shortened_through_a_stable_name_and_what_is_in_force_is_said() {
        let dir = tempfile::tempdir().unwrap();
        let [node, stable, class] = ["ttyUSB0", "by-id", "class"].map(|name| dir.path().join(name));
        std::fs::write(&node, "").unwrap();
        std::os::unix::fs::symlink(&node, &stable).unwrap();
        assert_eq!(latency_timer(&stable, &class), None, "this port's driver has none");
        let device = class.join("ttyUSB0/device");
        std::fs::create_dir_all(&device).unwrap();
        let timer = device.join("latency_timer");
        std::fs::write(&timer, "16\n").unwrap();
        assert_eq!(latency_timer(&stable, &class), Some(timer.clone()));
        assert_eq!(shorten(&timer), Held::ForMs(1));
        assert_eq!(std::fs::read_to_string(&timer).unwrap(), "1");
        assert_eq!(Held::NoTimer.sentence(), None);
        assert!(Held::ForMs(1).sentence().is_some_and(|text| text.contains("within 1 ms")));
        assert!(
            Held::ForMs(16).sentence().is_some_and(|text| text.contains("for 16 ms") && text.contains("udev rules"))
        );
    }
}
