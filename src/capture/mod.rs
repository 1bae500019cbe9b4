//! Bytes to samples: frames, lines of text, device descriptions, blocks, gaps, clock maps. Pure: no port, no clock.

mod clock;
mod decoder;
mod description;
mod device;
mod sample;
mod steps;
mod text;
mod unpack;

pub use clock::{
    BlockTimes, ClockMethod, ClockPiece, ClockSamples, LiveClock, NominalClock, TimeExchange, TimeRequests, fit_clock,
    piece_at,
};
pub use decoder::{Counters, FrameDecoder, N_DESCRIPTIONS};
pub use device::DeviceDecoder;
pub use sample::*;
pub use steps::LeastSteps;
