//! Of the links' room, what has no port in it.

#[path = "../../../src/link/clock.rs"]
mod clock;
#[path = "../../../src/link/event.rs"]
mod event;
#[path = "../../../src/link/from_links.rs"]
mod from_links;

pub use clock::{HostClock, SystemClock};
pub use event::{DeviceIdx, LinkEvent, LinkWhat, STOPPED};
pub use from_links::{FromLinks, Lost};
