//! Tautrail's wire protocol: frames, messages, checksums. `SPEC.md` beside this crate is the document of record.
//!
//! A frame is `0x00`, COBS(header, payload, CRC-32C), `0x00`. Everything is little-endian; ticks and sample indices are
//! 64-bit. [`encode`] writes a whole frame into the caller's buffer; [`Deframer`] cuts a byte stream at the delimiters
//! and [`decode`] reads a frame in place.
//!
//! Guarantees: `no_std`, no allocation, no `unsafe`, and no panic on any bytes. A frame is handed out only when its
//! checksum fits. Unknown kinds are handed out as [`Message::Unknown`]; trailing fields of a payload or of a record in a
//! description are skipped, so that newer firmware works with an older host.
//!
//! Refuses: frames of another protocol version, frames over [`MAX_DECODED_LEN`], payloads that are cut short.
//!
//! ```
//! use firmware_protocol::{Deframed, Deframer, Edge, Header, MAX_COBS_LEN, MAX_FRAME_LEN, Message, decode, encode};
//!
//! let header = Header { sequence: 7, boot_id: 0x51, description_id: 1, ..Header::default() };
//! let message = Message::Edge(Edge { input: 0, rising: true, tick: 1_000_000 });
//! let mut frame = [0; MAX_FRAME_LEN];
//! let n_bytes = encode(&header, &message, &mut frame)?;
//!
//! let mut buffer = [0; MAX_COBS_LEN];
//! let mut deframer = Deframer::new(&mut buffer);
//! let mut bytes = &frame[..n_bytes];
//! while let Some(piece) = deframer.next_piece(&mut bytes) {
//!     if let Deframed::Frame(cobs) = piece {
//!         let frame = decode(cobs)?;
//!         assert_eq!((frame.header, frame.message), (header, message));
//!     }
//! }
//! # Ok::<(), Box<dyn std::error::Error>>(())
//! ```
#![no_std]
#![forbid(unsafe_code)]

mod checksum;
mod deframer;
mod describe;
mod error;
mod frame;
mod message;
mod reader;
mod stuffing;
mod writer;

pub use checksum::crc32c;
pub use deframer::{Deframed, Deframer};
pub use describe::{Channel, Channels, ChannelsIter, Describe, Encoding, Stream, Streams, StreamsIter};
pub use error::{DecodeError, EncodeError};
pub use frame::{Frame, Header, decode, encode};
pub use message::{Block, Edge, Kind, Message, SetRate, Status, TimeReply, TimeRequest};
pub use stuffing::{stuff, unstuff_in_place};

/// The version that this crate speaks, in the first byte of every frame.
pub const PROTOCOL_VERSION: u8 = 1;
/// Bytes of the header: version, kind, flags, stream, sequence, boot id, description id.
pub const HEADER_LEN: usize = 14;
/// Bytes of the checksum at the end of every frame.
pub const CHECKSUM_LEN: usize = 4;
/// Header, payload and checksum of one frame are never longer than this.
pub const MAX_DECODED_LEN: usize = 2048;
/// The longest payload.
pub const MAX_PAYLOAD_LEN: usize = MAX_DECODED_LEN - HEADER_LEN - CHECKSUM_LEN;
/// The longest run between two delimiters (COBS adds a byte for every 254 begun, and one more from some encoders).
pub const MAX_COBS_LEN: usize = MAX_DECODED_LEN + MAX_DECODED_LEN.div_ceil(254) + 1;
/// Room for any frame with both its delimiters.
pub const MAX_FRAME_LEN: usize = MAX_COBS_LEN + 2;
/// The stream of everything but blocks.
pub const CONTROL_STREAM: u8 = 0;
