//! The only room that knows serial ports: reads, stamps, hands on, and does nothing else.

mod event;

pub use event::{DeviceIdx, LinkEvent, LinkWhat};
