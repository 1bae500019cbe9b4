//! What live tells the daemon, in the order in which it happened.

use super::state::{LaunchSeen, Phase};

/// Something the daemon must act on or pass on at once.
#[derive(Debug, Clone, PartialEq)]
pub enum Happening {
    /// A trial begins; it should reach back to `preroll_from_host_ns`.
    OpenTrial {
        host_ns: i64,
        preroll_from_host_ns: i64,
    },
    /// The trial is over: every tension cell is fresh and slack.
    CloseTrial {
        host_ns: i64,
        reason: String,
    },
    Phase {
        host_ns: i64,
        from: Phase,
        to: Phase,
    },
    /// What a device said, or what of it was lost: to be passed on. Sealing tells it again from the bytes.
    Device {
        host_ns: i64,
        device: String,
        kind: &'static str,
        text: String,
    },
    Alarm {
        host_ns: i64,
        sentence: String,
        change: AlarmChange,
    },
    /// What the launch just seen gave, at rest.
    LaunchSeen {
        host_ns: i64,
        launch: LaunchSeen,
    },
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum AlarmChange {
    Raised,
    Cleared,
}
