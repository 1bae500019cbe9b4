//! Bytes to samples: frames, device descriptions, blocks, gaps, clock maps. Pure: no port, no clock.

mod decoder;
mod description;
mod sample;
mod unpack;

pub use decoder::{Counters, DeviceDecoder};
pub use sample::*;
