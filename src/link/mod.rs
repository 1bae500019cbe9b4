//! The only room that knows serial ports: reads, stamps, hands on, and does nothing else.
//!
//! One thread, one current-thread runtime, one task a port. Guarantees: what was read is in both queues, in order,
//! stamped when it was read, or counted as lost there; an absent or lost port is tried again for ever, without haste.
//! Refuses: to decode, to wait for a queue, to open a port merely to look at it.

mod clock;
mod event;
mod from_links;
mod listing;
mod low_latency;
mod overruns;
mod port;
mod sinks;
mod task;
#[cfg(test)]
mod tests;
mod threads;

pub use clock::{HostClock, SystemClock};
pub use event::{DeviceIdx, LinkEvent, LinkWhat, STOPPED};
pub use from_links::{FromLinks, Lost};
pub use listing::{ListedPort, list};
pub use port::{PortError, look};
pub use sinks::Sinks;
pub use task::{Asks, PortSpec};
pub use threads::{Links, LinksError, spawn_links};
