//! Cuts a byte stream at the delimiters.

/// A piece of the stream.
#[derive(Debug, PartialEq, Eq)]
pub enum Deframed<'a> {
    /// What stood between two delimiters, for [`crate::decode`].
    Frame(&'a mut [u8]),
    /// Part of a run too long to be a frame: as received, one piece after the other until the next delimiter.
    Junk(&'a [u8]),
}

/// Cuts a byte stream at the delimiters, in a buffer of the caller's: a slice or an array, borrowed or owned
/// ([`crate::MAX_COBS_LEN`] bytes hold any frame).
///
/// Every byte that is not a delimiter is handed out exactly once. After damage it is in step again at the next
/// delimiter.
#[derive(Debug)]
pub struct Deframer<B> {
    buffer: B,
    len: usize,
    /// The buffer overflowed since the last delimiter.
    in_junk: bool,
    /// The buffer's content was handed out.
    handed_out: bool,
}

impl<B: AsRef<[u8]> + AsMut<[u8]>> Deframer<B> {
    /// # Panics
    /// When `buffer` is empty.
    pub fn new(buffer: B) -> Self {
        assert!(!buffer.as_ref().is_empty(), "a deframer needs a buffer");
        Self { buffer, len: 0, in_junk: false, handed_out: false }
    }

    /// Takes bytes off the front of `bytes` until a piece is complete. `None` when `bytes` is used up; call again with
    /// the next read.
    pub fn next_piece(&mut self, bytes: &mut &[u8]) -> Option<Deframed<'_>> {
        if self.handed_out {
            self.len = 0;
            self.handed_out = false;
        }
        loop {
            let room = self.buffer.as_ref().len() - self.len;
            let window = &bytes[..bytes.len().min(room + 1)];
            let delimiter = first_zero(window);
            let n_taken = delimiter.unwrap_or(window.len().min(room));
            self.buffer.as_mut()[self.len..self.len + n_taken].copy_from_slice(&window[..n_taken]);
            self.len += n_taken;
            *bytes = &bytes[n_taken + usize::from(delimiter.is_some())..];
            match delimiter {
                Some(_) => {
                    let was_junk = core::mem::take(&mut self.in_junk);
                    if self.len > 0 {
                        return Some(self.hand_out(was_junk));
                    }
                }
                None if bytes.is_empty() => return None,
                None => {
                    self.in_junk = true;
                    return Some(self.hand_out(true));
                }
            }
        }
    }

    /// Hands out what came since the last delimiter, for when no more will come.
    pub fn take_partial(&mut self) -> &[u8] {
        let len = if self.handed_out { 0 } else { self.len };
        (self.len, self.in_junk, self.handed_out) = (0, false, false);
        &self.buffer.as_ref()[..len]
    }

    fn hand_out(&mut self, junk: bool) -> Deframed<'_> {
        self.handed_out = true;
        let piece = &mut self.buffer.as_mut()[..self.len];
        if junk { Deframed::Junk(piece) } else { Deframed::Frame(piece) }
    }
}

/// Where the first zero is. Eight bytes at a time: a byte is zero where subtracting one borrows from a clear top bit
/// (Warren, Hacker's Delight, 2nd ed. 2013, section 6-1).
fn first_zero(bytes: &[u8]) -> Option<usize> {
    const ONES: u64 = 0x0101_0101_0101_0101;
    const TOPS: u64 = 0x8080_8080_8080_8080;
    let (words, rest) = bytes.as_chunks::<8>();
    for (at, word) in words.iter().enumerate() {
        let word = u64::from_le_bytes(*word);
        let zeros = word.wrapping_sub(ONES) & !word & TOPS;
        if zeros != 0 {
            return Some(at * 8 + (zeros.trailing_zeros() / 8) as usize);
        }
    }
    rest.iter().position(|&byte| byte == 0).map(|at| words.len() * 8 + at)
}
