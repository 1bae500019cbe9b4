//! Whole frames: header, payload, checksum, stuffing, delimiters.

use crate::reader::Reader;
use crate::writer::FrameWriter;
use crate::{
    CHECKSUM_LEN, DecodeError, EncodeError, HEADER_LEN, MAX_DECODED_LEN, Message, PROTOCOL_VERSION, crc32c,
    unstuff_in_place,
};

/// What stands before every payload, apart from version and kind.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub struct Header {
    /// None are defined: senders write 0, receivers ignore them.
    pub flags: u8,
    /// The block's stream; [`crate::CONTROL_STREAM`] for everything else.
    pub stream: u8,
    /// Counts this stream's frames since boot, and wraps.
    pub sequence: u32,
    /// Differs from boot to boot. 0 in frames from the host.
    pub boot_id: u32,
    /// Names the description that the frame is to be read by; changes when the description does. 0 from the host.
    pub description_id: u16,
}

/// A frame that was received whole.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Frame<'a> {
    pub header: Header,
    pub message: Message<'a>,
    /// The checksum the frame carried, found right.
    pub crc: u32,
}

/// Writes a whole frame with both delimiters into `out` and returns its length. [`crate::MAX_FRAME_LEN`] bytes always
/// suffice.
///
/// # Errors
/// When `out` is too small, the frame would be longer than [`MAX_DECODED_LEN`], a string is longer than 255 bytes, or
/// the sample bytes do not fit the block's numbers.
pub fn encode(header: &Header, message: &Message<'_>, out: &mut [u8]) -> Result<usize, EncodeError> {
    let buffer_len = out.len();
    let mut to = FrameWriter::new(out)?;
    to.u8(PROTOCOL_VERSION)?;
    to.u8(message.kind())?;
    to.u8(header.flags)?;
    to.u8(header.stream)?;
    to.u32(header.sequence)?;
    to.u32(header.boot_id)?;
    to.u16(header.description_id)?;
    message.write(&mut to)?;
    let delimiter_at = to.finish()?;
    *out.get_mut(delimiter_at).ok_or(EncodeError::BufferTooSmall { buffer_len })? = 0;
    Ok(delimiter_at + 1)
}

/// Reads one frame in place from the bytes between two delimiters (as [`crate::Deframer`] hands them out).
///
/// The bytes are overwritten, also when the frame is refused: keep a copy where refused bytes matter.
///
/// # Errors
/// When the bytes are not a frame, the checksum does not fit, the version is another, or a field is cut short or out of
/// the protocol. Unknown kinds and trailing fields are no errors.
pub fn decode(cobs: &mut [u8]) -> Result<Frame<'_>, DecodeError> {
    let len = unstuff_in_place(cobs)?;
    if len > MAX_DECODED_LEN {
        return Err(DecodeError::TooLong { len });
    }
    let too_short = DecodeError::TooShort { len };
    let (summed, sum) = cobs[..len].split_last_chunk::<CHECKSUM_LEN>().ok_or(too_short)?;
    let (header, payload) = summed.split_at_checked(HEADER_LEN).ok_or(too_short)?;
    let (found, expected) = (u32::from_le_bytes(*sum), crc32c(summed));
    if found != expected {
        return Err(DecodeError::Checksum { found, expected });
    }
    let from = &mut Reader::new(0, header);
    let version = from.u8("version")?;
    if version != PROTOCOL_VERSION {
        return Err(DecodeError::Version { found: version });
    }
    let kind = from.u8("kind")?;
    let header = Header {
        flags: from.u8("flags")?,
        stream: from.u8("stream")?,
        sequence: from.u32("sequence")?,
        boot_id: from.u32("boot id")?,
        description_id: from.u16("description id")?,
    };
    Ok(Frame { header, message: Message::read(kind, payload)?, crc: found })
}
