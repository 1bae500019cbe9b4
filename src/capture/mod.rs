//! Bytes to samples: frames, device descriptions, blocks, gaps, clock maps. Pure: no port, no clock.

mod sample;

pub use sample::*;
