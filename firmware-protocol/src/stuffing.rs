//! Consistent overhead byte stuffing: Cheshire & Baker, IEEE/ACM Transactions on Networking 7(2), 1999.
//!
//! Written here and not taken from the `cobs` crate because a frame is stuffed while it is written and unstuffed run by
//! run with block moves; that crate stands beside it in the tests as an independent encoder and decoder.

use crate::DecodeError;

/// A run of this many bytes without a zero ends without an implied zero.
pub(crate) const LONGEST_RUN: u8 = 254;

/// Up to here, moving bytes one by one costs less than asking for a block move.
const SHORT_RUN: usize = 16;

/// Stuffs `source` into `out`, without delimiters; returns the length, or `None` when `out` is too small.
pub fn stuff(source: &[u8], out: &mut [u8]) -> Option<usize> {
    let mut stuffer = Stuffer::new(out, 0);
    for &byte in source {
        stuffer.push(byte)?;
    }
    stuffer.finish()
}

/// Replaces stuffed bytes (no delimiters, no zeros) by what they stand for; returns how many bytes that is.
///
/// Accepts the extra `01` that some encoders put after a last run of 254.
pub fn unstuff_in_place(bytes: &mut [u8]) -> Result<usize, DecodeError> {
    let (mut from, mut to) = (0, 0);
    while let Some(&code) = bytes.get(from) {
        let run = usize::from(code);
        let end = from + run;
        if code == 0 || end > bytes.len() {
            return Err(DecodeError::Stuffing { at: from });
        }
        if run <= SHORT_RUN {
            for at in from + 1..end {
                bytes[to] = bytes[at];
                to += 1;
            }
        } else {
            bytes.copy_within(from + 1..end, to);
            to += run - 1;
        }
        if code <= LONGEST_RUN && end < bytes.len() {
            bytes[to] = 0;
            to += 1;
        }
        from = end;
    }
    Ok(to)
}

/// Stuffs byte by byte into a buffer, from a given place on.
pub(crate) struct Stuffer<'out> {
    out: &'out mut [u8],
    /// Where the open run's code byte stands.
    code_at: usize,
    /// Bytes in the open run.
    run: u8,
}

impl<'out> Stuffer<'out> {
    pub(crate) fn new(out: &'out mut [u8], at: usize) -> Self {
        Self { out, code_at: at, run: 0 }
    }

    pub(crate) fn buffer_len(&self) -> usize {
        self.out.len()
    }

    #[inline]
    pub(crate) fn push(&mut self, byte: u8) -> Option<()> {
        if self.run == LONGEST_RUN {
            self.close_run()?;
        }
        if byte == 0 {
            return self.close_run();
        }
        self.run += 1;
        *self.out.get_mut(self.code_at + usize::from(self.run))? = byte;
        Some(())
    }

    /// Writes the open run's code; returns the place behind the last byte.
    pub(crate) fn finish(self) -> Option<usize> {
        *self.out.get_mut(self.code_at)? = self.run + 1;
        Some(self.code_at + usize::from(self.run) + 1)
    }

    fn close_run(&mut self) -> Option<()> {
        *self.out.get_mut(self.code_at)? = self.run + 1;
        self.code_at += usize::from(self.run) + 1;
        self.run = 0;
        Some(())
    }
}
