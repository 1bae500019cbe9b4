//! What can be wrong with a frame, on the way out and on the way in.

use crate::{Kind, MAX_DECODED_LEN, PROTOCOL_VERSION};

/// Why a frame could not be written. What is in the buffer then is of no use.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum EncodeError {
    #[error("the frame does not fit into a buffer of {buffer_len} bytes, {max} always suffice", max = crate::MAX_FRAME_LEN)]
    BufferTooSmall { buffer_len: usize },
    #[error("header, payload and checksum exceed {MAX_DECODED_LEN} bytes, send fewer samples or shorter names")]
    FrameTooLong,
    #[error("a string of {len} bytes was given, at most 255 fit")]
    StringTooLong { len: usize },
    #[error("{count} {what} were given, at most 255 fit")]
    TooMany { what: &'static str, count: usize },
    #[error("{found} sample bytes were given, {n_samples} samples of {sample_len} bytes need {expected}")]
    SampleBytes { found: usize, expected: usize, n_samples: u16, sample_len: u16 },
}

/// Why a frame was refused.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
#[non_exhaustive]
pub enum DecodeError {
    #[error("byte stuffing is broken at byte {at}")]
    Stuffing { at: usize },
    #[error("a frame of {len} bytes is shorter than header and checksum")]
    TooShort { len: usize },
    #[error("a frame of {len} bytes is longer than {MAX_DECODED_LEN}")]
    TooLong { len: usize },
    #[error("checksum {found:#010x}, expected {expected:#010x}{}", order(*found, *expected))]
    Checksum { found: u32, expected: u32 },
    #[error("protocol version {found}, this host speaks {PROTOCOL_VERSION}")]
    Version { found: u8 },
    #[error("the payload of kind {kind:#04x} ({}) ends inside its {field}", word(*kind))]
    CutShort { kind: u8, field: &'static str },
    #[error("kind {kind:#04x} ({}): {field} has a value that the protocol does not know", word(*kind))]
    BadValue { kind: u8, field: &'static str },
}

const fn order(found: u32, expected: u32) -> &'static str {
    if found == expected.swap_bytes() { ", its bytes are in the wrong order (little-endian is wanted)" } else { "" }
}

fn word(kind: u8) -> &'static str {
    Kind::from_byte(kind).map_or("header", Kind::word)
}

impl DecodeError {
    /// A short name of the reason, for counting.
    pub const fn reason(&self) -> &'static str {
        match self {
            Self::Stuffing { .. } => "broken byte stuffing",
            Self::TooShort { .. } => "too short",
            Self::TooLong { .. } => "too long",
            Self::Checksum { .. } => "checksum mismatch",
            Self::Version { .. } => "other protocol version",
            Self::CutShort { .. } => "payload cut short",
            Self::BadValue { .. } => "payload value unknown",
        }
    }
}
