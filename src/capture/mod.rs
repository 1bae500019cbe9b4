//! Bytes to samples: frames, device descriptions, blocks, gaps, clock maps. Pure: no port, no clock.

mod clock;
mod decoder;
mod description;
mod sample;
mod unpack;

pub use clock::{
    BlockTimes, ClockMethod, ClockPiece, ClockSamples, LiveClock, NominalClock, TimeExchange, TimeRequests, fit_clock,
    piece_at,
};
pub use decoder::{Counters, DeviceDecoder};
pub use sample::*;
