//! What a port's driver counted as lost before any program could read it.

use std::os::fd::AsRawFd;

/// `struct serial_icounter_struct` of `<linux/serial.h>`.
#[repr(C)]
#[derive(Debug, Default)]
struct Counters {
    line_changes: [libc::c_int; 4],
    received: libc::c_int,
    sent: libc::c_int,
    frame: libc::c_int,
    overrun: libc::c_int,
    parity: libc::c_int,
    breaks: libc::c_int,
    buffer_overrun: libc::c_int,
    reserved: [libc::c_int; 9],
}

/// Since the driver was loaded; they wrap.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub(super) struct Overruns {
    /// Bytes that found the adapter's own buffer full.
    pub hardware: i32,
    /// Bytes that found the kernel's buffer full.
    pub kernel: i32,
    /// Bytes with a wrong stop bit: a wrong baud rate, or noise.
    pub framing: i32,
    pub parity: i32,
}

/// `None` where the driver counts nothing.
pub(super) fn read(port: &impl AsRawFd) -> Option<Overruns> {
    let mut counters = Counters::default();
    // SAFETY: the kernel fills exactly one `serial_icounter_struct`, which `Counters` lays out as the C header does (twenty
    // ints); the descriptor is open as long as `port` is borrowed.
    let failed = unsafe { libc::ioctl(port.as_raw_fd(), libc::TIOCGICOUNT, &raw mut counters) != 0 };
    let Counters { overrun, buffer_overrun, frame, parity, .. } = counters;
    (!failed).then_some(Overruns { hardware: overrun, kernel: buffer_overrun, framing: frame, parity })
}

impl Overruns {
    /// A sentence on what was counted since `before`, if anything was.
    pub fn since(self, before: Self) -> Option<String> {
        let more = |now: i32, before: i32| now.wrapping_sub(before).max(0);
        let counts = [
            (more(self.hardware, before.hardware), "found the adapter's buffer full"),
            (more(self.kernel, before.kernel), "found the kernel's buffer full"),
            (more(self.framing, before.framing), "had a wrong stop bit (baud rate, noise)"),
            (more(self.parity, before.parity), "had wrong parity"),
        ];
        let told: Vec<String> =
            counts.iter().filter(|(n, _)| *n > 0).map(|(n, what)| format!("{n} bytes {what}")).collect();
        (!told.is_empty()).then(|| format!("its driver counts: {}", told.join(", ")))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn only_what_is_new_is_told_and_a_counter_may_wrap() {
        let before = Overruns { hardware: i32::MAX, kernel: 5, framing: 0, parity: 7 };
        assert_eq!(before.since(before), None);
        let now = Overruns { hardware: i32::MIN, kernel: 9, ..before };
        let told = now.since(before).unwrap();
        assert_eq!(
            told,
            "its driver counts: 1 bytes found the adapter's buffer full, 4 bytes found the kernel's buffer full"
        );
    }

    #[test]
    fn a_pty_counts_nothing_and_says_so() {
        let pty = crate::link::tests::Pty::new();
        assert_eq!(read(&pty.master), None);
    }
}
