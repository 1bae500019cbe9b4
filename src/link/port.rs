//! Opens one serial port, and tells apart the ways in which that and reading go wrong.
//!
//! Never opens a port merely to look: opening resets many small boards. An absent port and a busy one are told apart by
//! looking at the path first, since the library gives both the same error.

use std::io;
use std::os::fd::{AsRawFd, BorrowedFd};
use std::os::unix::fs::FileTypeExt;
use std::path::PathBuf;
use std::time::Duration;

use rustix::termios::{ControlModes, OptionalActions, tcgetattr, tcsetattr};
use tokio_serial::{
    ClearBuffer, DataBits, FlowControl, Parity, SerialPort, SerialPortBuilderExt, SerialStream, StopBits,
};

use super::low_latency;
use crate::rig::SerialSettings;

/// Above this relative difference between the rate asked for and the rate set, bytes are at risk.
const BAUD_TOLERANCE: f64 = 0.02;

/// Why a port could not be opened.
#[derive(Debug, Clone, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum PortError {
    #[error("port {path} is not there; plug the device in, or correct its `port` in the rig file")]
    Absent { path: PathBuf },
    #[error("{path} is not a serial port; correct the device's `port` in the rig file")]
    NotAPort { path: PathBuf },
    #[error("port {path} is in use by another program; close that one first")]
    Busy { path: PathBuf },
    #[error("this user may not open port {path}; let it join the group that owns the port")]
    NotAllowed { path: PathBuf },
    #[error("cannot open port {path}: {reason}")]
    Failed { path: PathBuf, reason: String },
}

/// A port as it was opened.
pub(super) struct OpenPort {
    pub stream: SerialStream,
    /// The rate the driver says it set.
    pub baud: u32,
    /// How it was set, and what is not as it should be.
    pub notes: Vec<String>,
}

/// Says whether a serial port stands at `path`, without opening it.
///
/// # Errors
/// [`PortError::Absent`] or [`PortError::NotAPort`].
pub fn look(path: &std::path::Path) -> Result<(), PortError> {
    let path = path.to_owned();
    match std::fs::metadata(&path) {
        Ok(about) if about.file_type().is_char_device() => Ok(()),
        Ok(_) => Err(PortError::NotAPort { path }),
        Err(error) if error.kind() == io::ErrorKind::NotFound => Err(PortError::Absent { path }),
        Err(error) if error.kind() == io::ErrorKind::PermissionDenied => Err(PortError::NotAllowed { path }),
        Err(error) => Err(PortError::Failed { path, reason: error.to_string() }),
    }
}

/// Opens for this program alone, raw, with an empty receive queue and the driver's holding back of bytes switched off.
///
/// Linux raises DTR on every open, whatever is asked, so that boards wired for it reset now; closing keeps it up.
pub(super) fn open(path: &std::path::Path, baud: u32, serial: SerialSettings) -> Result<OpenPort, PortError> {
    look(path)?;
    let builder = tokio_serial::new(path.to_string_lossy(), baud)
        .timeout(Duration::ZERO)
        .data_bits(data_bits(serial))
        .parity(parity(serial))
        .stop_bits(if serial.stop_bits == 2 { StopBits::Two } else { StopBits::One })
        .flow_control(FlowControl::None);
    let stream = builder.open_native_async().map_err(|error| refused(path, &error))?;
    let mut notes = Vec::new();
    // What waited in the queue is of an unknown time; framing finds its step again.
    if let Err(error) = stream.clear(ClearBuffer::Input) {
        notes.push(format!("stale bytes could not be cleared: {error}"));
    }
    match keep_dtr_on_close(&stream) {
        Ok(()) => {}
        Err(error) => notes.push(format!("closing the port may reset the device: {error}")),
    }
    notes.extend(low_latency::ask(&stream, path).sentence());
    let set = stream.baud_rate().unwrap_or(baud);
    if (f64::from(set) / f64::from(baud.max(1)) - 1.0).abs() > BAUD_TOLERANCE {
        notes.push(format!("{baud} baud was asked for, the port runs at {set}: bytes will be damaged"));
    }
    Ok(OpenPort { stream, baud: set, notes })
}

const fn data_bits(serial: SerialSettings) -> DataBits {
    match serial.data_bits {
        5 => DataBits::Five,
        6 => DataBits::Six,
        7 => DataBits::Seven,
        _ => DataBits::Eight,
    }
}

const fn parity(serial: SerialSettings) -> Parity {
    match serial.parity {
        crate::rig::Parity::None => Parity::None,
        crate::rig::Parity::Even => Parity::Even,
        crate::rig::Parity::Odd => Parity::Odd,
    }
}

fn refused(path: &std::path::Path, error: &tokio_serial::Error) -> PortError {
    let path = path.to_owned();
    match error.kind() {
        // It was there a moment ago: now it is taken, or just pulled.
        tokio_serial::ErrorKind::NoDevice if look(&path).is_ok() => PortError::Busy { path },
        tokio_serial::ErrorKind::NoDevice | tokio_serial::ErrorKind::Io(io::ErrorKind::NotFound) => {
            PortError::Absent { path }
        }
        tokio_serial::ErrorKind::Io(io::ErrorKind::PermissionDenied) => PortError::NotAllowed { path },
        _ => PortError::Failed { path, reason: error.to_string() },
    }
}

/// Without this, closing drops DTR and resets many small boards.
fn keep_dtr_on_close(stream: &SerialStream) -> io::Result<()> {
    // SAFETY: the stream owns the descriptor and outlives this borrow.
    let port = unsafe { BorrowedFd::borrow_raw(stream.as_raw_fd()) };
    let mut settings = tcgetattr(port)?;
    settings.control_modes.remove(ControlModes::HUPCL);
    Ok(tcsetattr(port, OptionalActions::Now, &settings)?)
}

/// What a read's result means.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) enum ReadMeans {
    Bytes(usize),
    /// Nothing now; try again.
    Again,
    /// The far end is gone; the sentence says how that showed.
    LinkLost(String),
}

/// The one place that knows how a lost link looks: nothing read though the port was ready, or one of the errors with
/// which kernels and libraries say that the device went. Any other error ends the link too, with its own words.
pub(super) fn meaning(read: &io::Result<usize>) -> ReadMeans {
    let error = match read {
        Ok(0) => return ReadMeans::LinkLost("the far end closed".to_owned()),
        Ok(n) => return ReadMeans::Bytes(*n),
        Err(error) => error,
    };
    let number = error.raw_os_error().map(rustix::io::Errno::from_raw_os_error);
    match (error.kind(), number) {
        (io::ErrorKind::WouldBlock | io::ErrorKind::Interrupted, _) => ReadMeans::Again,
        (io::ErrorKind::BrokenPipe, _)
        | (_, Some(rustix::io::Errno::IO | rustix::io::Errno::NXIO | rustix::io::Errno::NODEV)) => {
            ReadMeans::LinkLost(format!("the device or its cable is gone ({error})"))
        }
        _ => ReadMeans::LinkLost(format!("reading failed: {error}")),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_way_a_pulled_cable_shows_is_a_lost_link() {
        // field experience: EIO and 0 on ptys, BrokenPipe from serial libraries, ENXIO and ENODEV from drivers
        let lost = [
            Ok(0),
            Err(io::Error::from_raw_os_error(5)),
            Err(io::Error::from_raw_os_error(6)),
            Err(io::Error::from_raw_os_error(19)),
            Err(io::ErrorKind::BrokenPipe.into()),
            Err(io::ErrorKind::PermissionDenied.into()),
        ];
        assert!(lost.iter().all(|read| matches!(meaning(read), ReadMeans::LinkLost(_))));
        assert_eq!(meaning(&Ok(3)), ReadMeans::Bytes(3));
        assert_eq!(meaning(&Err(io::ErrorKind::WouldBlock.into())), ReadMeans::Again);
        assert_eq!(meaning(&Err(io::ErrorKind::Interrupted.into())), ReadMeans::Again);
    }

    #[test]
    fn absent_and_not_a_port_are_told_apart_without_opening() {
        let dir = tempfile::tempdir().unwrap();
        let absent = dir.path().join("none");
        assert_eq!(look(&absent), Err(PortError::Absent { path: absent.clone() }));
        let file = dir.path().join("file");
        std::fs::write(&file, "").unwrap();
        assert_eq!(look(&file), Err(PortError::NotAPort { path: file.clone() }));
    }

    #[tokio::test(flavor = "current_thread")]
    async fn a_busy_port_is_not_called_absent() {
        let pty = crate::link::tests::Pty::new();
        let first = open(&pty.path, 115_200, SerialSettings::default()).unwrap();
        assert_eq!(
            open(&pty.path, 115_200, SerialSettings::default()).err(),
            Some(PortError::Busy { path: pty.path.clone() })
        );
        drop(first);
        assert!(open(&pty.path, 115_200, SerialSettings::default()).is_ok());
    }

    fn settings_of(port: &SerialStream) -> rustix::termios::Termios {
        // SAFETY: the stream owns the descriptor and outlives this borrow.
        tcgetattr(unsafe { BorrowedFd::borrow_raw(port.as_raw_fd()) }).unwrap()
    }

    #[tokio::test(flavor = "current_thread")]
    async fn a_port_is_raw_and_keeps_dtr_when_it_is_closed() {
        use rustix::termios::{InputModes, LocalModes, OutputModes};
        let pty = crate::link::tests::Pty::new();
        let open = open(&pty.path, 115_200, SerialSettings::default()).unwrap();
        let set = settings_of(&open.stream);
        assert!(!set.control_modes.contains(ControlModes::HUPCL));
        assert!(!set.local_modes.intersects(LocalModes::ICANON | LocalModes::ECHO | LocalModes::ISIG));
        let changing =
            InputModes::ICRNL | InputModes::INLCR | InputModes::IGNCR | InputModes::IXON | InputModes::ISTRIP;
        assert!(!set.input_modes.intersects(changing));
        assert!(!set.output_modes.contains(OutputModes::OPOST));
        assert_eq!(open.notes, Vec::<String>::new());
    }

    #[tokio::test(flavor = "current_thread")]
    async fn bits_parity_and_odd_baud_rates_are_set_as_asked_and_read_back() {
        let pty = crate::link::tests::Pty::new();
        let serial = SerialSettings { data_bits: 7, parity: crate::rig::Parity::Even, stop_bits: 2 };
        for baud in [250_000, 12_345, 1_843_200, 3_000_000] {
            let open = open(&pty.path, baud, serial).unwrap();
            assert_eq!(open.baud, baud);
            // A pty's own driver fixes eight bits without parity (Linux, pty_set_termios); the second stop bit it keeps.
            assert!(settings_of(&open.stream).control_modes.contains(ControlModes::CSTOPB));
            assert_eq!(
                (open.stream.stop_bits().unwrap(), open.stream.flow_control().unwrap()),
                (StopBits::Two, FlowControl::None)
            );
        }
    }
}
