//! Reads a payload field by field; a field that is not there is a typed error, never a panic.

use crate::DecodeError;

#[derive(Debug, Clone, Copy)]
pub(crate) struct Reader<'a> {
    kind: u8,
    rest: &'a [u8],
}

impl<'a> Reader<'a> {
    pub(crate) const fn new(kind: u8, payload: &'a [u8]) -> Self {
        Self { kind, rest: payload }
    }

    pub(crate) fn take(&mut self, field: &'static str, len: usize) -> Result<&'a [u8], DecodeError> {
        let (taken, rest) = self.rest.split_at_checked(len).ok_or(DecodeError::CutShort { kind: self.kind, field })?;
        self.rest = rest;
        Ok(taken)
    }

    fn array<const N: usize>(&mut self, field: &'static str) -> Result<[u8; N], DecodeError> {
        let (taken, rest) = self.rest.split_first_chunk().ok_or(DecodeError::CutShort { kind: self.kind, field })?;
        self.rest = rest;
        Ok(*taken)
    }

    pub(crate) fn u8(&mut self, field: &'static str) -> Result<u8, DecodeError> {
        self.array(field).map(|[byte]| byte)
    }

    pub(crate) fn u16(&mut self, field: &'static str) -> Result<u16, DecodeError> {
        self.array(field).map(u16::from_le_bytes)
    }

    pub(crate) fn u32(&mut self, field: &'static str) -> Result<u32, DecodeError> {
        self.array(field).map(u32::from_le_bytes)
    }

    pub(crate) fn u64(&mut self, field: &'static str) -> Result<u64, DecodeError> {
        self.array(field).map(u64::from_le_bytes)
    }

    pub(crate) fn f32(&mut self, field: &'static str) -> Result<f32, DecodeError> {
        self.array(field).map(f32::from_le_bytes)
    }

    pub(crate) fn f64(&mut self, field: &'static str) -> Result<f64, DecodeError> {
        self.array(field).map(f64::from_le_bytes)
    }

    /// Length in one byte, then UTF-8.
    pub(crate) fn string(&mut self, field: &'static str) -> Result<&'a str, DecodeError> {
        let len = self.u8(field)?;
        let bytes = self.take(field, usize::from(len))?;
        core::str::from_utf8(bytes).map_err(|_| self.bad(field))
    }

    /// A record with its length in two bytes before it.
    pub(crate) fn record(&mut self, field: &'static str) -> Result<Self, DecodeError> {
        let len = self.u16(field)?;
        Ok(Self { kind: self.kind, rest: self.take(field, usize::from(len))? })
    }

    pub(crate) const fn bad(&self, field: &'static str) -> DecodeError {
        DecodeError::BadValue { kind: self.kind, field }
    }
}
