//! What the links' thread hands on.

use bytes::Bytes;

/// Index of a device in the rig file's list.
#[derive(Debug, Clone, Copy, PartialEq, Eq, PartialOrd, Ord, Hash)]
pub struct DeviceIdx(pub u16);

/// Something a link saw, stamped with CLOCK_MONOTONIC when it was seen.
#[derive(Debug, Clone, PartialEq)]
pub struct LinkEvent {
    pub host_ns: i64,
    pub device: DeviceIdx,
    pub what: LinkWhat,
}

#[derive(Debug, Clone, PartialEq)]
pub enum LinkWhat {
    /// The port is open; says which path, at which baud rate it really runs.
    Up { path: String, baud: u32 },
    /// Something to know about the open port: how it was set, what its driver counted.
    Note { text: String },
    /// Bytes of one read, as received.
    Bytes(Bytes),
    /// A time request left for the device at `host_ns`.
    TimeRequested { token: u32 },
    /// The port was lost or could not be opened; the sentence says what and why.
    Down { reason: String },
}

/// The reason of a link that went down because the program was told to stop.
pub const STOPPED: &str = "the daemon stops";
