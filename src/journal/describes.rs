//! Keeps the last frame that described each device, so that every segment can be decoded from its own start.
//!
//! Looks at kind and checksum only; samples are not decoded here.

use super::DeviceAtOpen;
use firmware_protocol::{Kind, MAX_COBS_LEN, Message, PROTOCOL_VERSION, decode};

/// One device's byte stream, watched for descriptions.
#[derive(Debug, Default)]
pub(super) struct DescribeKeeper {
    /// What came since the last delimiter; one byte more than any frame once it is too long to be one.
    partial: Vec<u8>,
    /// The last sound describe frame, delimiters included.
    frame: Vec<u8>,
}

impl DescribeKeeper {
    /// Goes on from what an earlier segment knew.
    pub fn at_open(device: &DeviceAtOpen) -> Self {
        Self { partial: Vec::new(), frame: device.describe().unwrap_or_default() }
    }

    pub fn feed(&mut self, bytes: &[u8]) {
        let mut pieces = bytes.split(|&byte| byte == 0);
        self.extend(pieces.next().unwrap_or_default());
        for piece in pieces {
            self.complete();
            self.extend(piece);
        }
    }

    /// The frame under way will not be completed.
    pub fn link_lost(&mut self) {
        self.partial.clear();
    }

    pub fn describe_hex(&self) -> String {
        use std::fmt::Write;
        self.frame.iter().fold(String::with_capacity(2 * self.frame.len()), |mut hex, byte| {
            let _ = write!(hex, "{byte:02x}"); // writing to a string cannot fail
            hex
        })
    }

    fn extend(&mut self, piece: &[u8]) {
        let room = (MAX_COBS_LEN + 1).saturating_sub(self.partial.len());
        self.partial.extend_from_slice(&piece[..piece.len().min(room)]);
    }

    fn complete(&mut self) {
        // Version and kind are not zero, so stuffing leaves them second and third.
        let describes = self.partial.get(1..3) == Some(&[PROTOCOL_VERSION, Kind::Describe as u8]);
        if describes && self.partial.len() <= MAX_COBS_LEN {
            let whole = [&[0], self.partial.as_slice(), &[0]].concat();
            if matches!(decode(&mut self.partial), Ok(frame) if matches!(frame.message, Message::Describe(_))) {
                self.frame = whole;
            }
        }
        self.partial.clear();
    }
}

#[cfg(test)]
mod tests {
    use super::*;
    use firmware_protocol::{Describe, Header, MAX_FRAME_LEN, Streams, encode};

    fn frame(message: &Message<'_>) -> Vec<u8> {
        let mut out = [0; MAX_FRAME_LEN];
        let n = encode(&Header { boot_id: 7, ..Header::default() }, message, &mut out).unwrap();
        out[..n].to_vec()
    }

    fn describe(name: &str) -> Vec<u8> {
        frame(&Message::Describe(Describe {
            device_id: 1,
            name,
            firmware: "invented 1",
            tick_rate_hz: 1e6,
            tick_tolerance_ppm: 50.0,
            streams: Streams::given(&[]),
        }))
    }

    fn hex(bytes: &[u8]) -> String {
        bytes.iter().map(|byte| format!("{byte:02x}")).collect()
    }

    #[test]
    fn the_last_sound_description_is_kept_however_the_reads_cut_it() {
        let (first, last, text) = (describe("a"), describe("b"), frame(&Message::Text("hello")));
        let mut damaged = describe("c");
        damaged[12] ^= 0x40;
        let stream = [&[5, 5, 5, 0], &first[..], &text, &last, &damaged, &text].concat();
        for n in [1, 2, 3, 7, 64, stream.len()] {
            let mut keeper = DescribeKeeper::default();
            stream.chunks(n).for_each(|read| keeper.feed(read));
            assert_eq!(keeper.describe_hex(), hex(&last), "reads of {n}");
        }
    }

    #[test]
    fn a_stream_without_delimiters_takes_no_memory() {
        let mut keeper = DescribeKeeper::default();
        (0..100).for_each(|_| keeper.feed(&[1; 4096]));
        assert!(keeper.partial.len() <= MAX_COBS_LEN + 1);
    }
}
