//! Writes header and payload into the caller's buffer, stuffed and summed on the way.

use crate::checksum::Running;
use crate::stuffing::Stuffer;
use crate::{CHECKSUM_LEN, EncodeError, MAX_DECODED_LEN};

const DELIMITER: u8 = 0;

pub(crate) struct FrameWriter<'out> {
    stuffer: Stuffer<'out>,
    sum: Running,
    /// Bytes written so far, before stuffing.
    len: usize,
}

impl<'out> FrameWriter<'out> {
    pub(crate) fn new(out: &'out mut [u8]) -> Result<Self, EncodeError> {
        let buffer_len = out.len();
        *out.first_mut().ok_or(EncodeError::BufferTooSmall { buffer_len })? = DELIMITER;
        Ok(Self { stuffer: Stuffer::new(out, 1), sum: Running::default(), len: 0 })
    }

    pub(crate) fn bytes(&mut self, bytes: &[u8]) -> Result<(), EncodeError> {
        self.len += bytes.len();
        if self.len > MAX_DECODED_LEN - CHECKSUM_LEN {
            return Err(EncodeError::FrameTooLong);
        }
        self.sum.update(bytes);
        self.stuffed(bytes)
    }

    pub(crate) fn u8(&mut self, value: u8) -> Result<(), EncodeError> {
        self.bytes(&[value])
    }

    pub(crate) fn u16(&mut self, value: u16) -> Result<(), EncodeError> {
        self.bytes(&value.to_le_bytes())
    }

    pub(crate) fn u32(&mut self, value: u32) -> Result<(), EncodeError> {
        self.bytes(&value.to_le_bytes())
    }

    pub(crate) fn u64(&mut self, value: u64) -> Result<(), EncodeError> {
        self.bytes(&value.to_le_bytes())
    }

    pub(crate) fn f32(&mut self, value: f32) -> Result<(), EncodeError> {
        self.bytes(&value.to_le_bytes())
    }

    pub(crate) fn f64(&mut self, value: f64) -> Result<(), EncodeError> {
        self.bytes(&value.to_le_bytes())
    }

    /// Length in one byte, then UTF-8.
    pub(crate) fn string(&mut self, text: &str) -> Result<(), EncodeError> {
        let len = u8::try_from(text.len()).map_err(|_| EncodeError::StringTooLong { len: text.len() })?;
        self.u8(len)?;
        self.bytes(text.as_bytes())
    }

    /// Number of entries in one byte.
    pub(crate) fn count(&mut self, what: &'static str, count: usize) -> Result<(), EncodeError> {
        self.u8(u8::try_from(count).map_err(|_| EncodeError::TooMany { what, count })?)
    }

    /// Length of the record that follows, in two bytes.
    pub(crate) fn record_len(&mut self, len: usize) -> Result<(), EncodeError> {
        self.u16(u16::try_from(len).map_err(|_| EncodeError::FrameTooLong)?)
    }

    /// Adds the checksum; returns where the closing delimiter belongs.
    pub(crate) fn finish(mut self) -> Result<usize, EncodeError> {
        let sum = self.sum.sum();
        self.stuffed(&sum.to_le_bytes())?;
        let buffer_len = self.stuffer.buffer_len();
        self.stuffer.finish().ok_or(EncodeError::BufferTooSmall { buffer_len })
    }

    fn stuffed(&mut self, bytes: &[u8]) -> Result<(), EncodeError> {
        for &byte in bytes {
            let buffer_len = self.stuffer.buffer_len();
            self.stuffer.push(byte).ok_or(EncodeError::BufferTooSmall { buffer_len })?;
        }
        Ok(())
    }
}
