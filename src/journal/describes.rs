//! Keeps the frames that described each device's present boot, so that every segment can be decoded from its own start.
//!
//! Looks at kind and checksum only; samples are not decoded here.

use super::DeviceAtOpen;
use firmware_protocol::{Frame, Kind, MAX_COBS_LEN, Message, PROTOCOL_VERSION, decode};

/// One device's byte stream, watched for descriptions.
#[derive(Debug, Default)]
pub(super) struct DescribeKeeper {
    /// What came since the last delimiter; one byte more than any frame once it is too long to be one.
    partial: Vec<u8>,
    /// The last sound describe frame of each of the last description ids of one boot, delimiters included, oldest first.
    frames: Vec<Kept>,
}

#[derive(Debug)]
struct Kept {
    boot_id: u32,
    description_id: u16,
    bytes: Vec<u8>,
}

/// As many descriptions as blocks may name (`capture::N_DESCRIPTIONS`; this room decodes no samples and does not know it).
const N_FRAMES: usize = 4;

impl DescribeKeeper {
    /// Goes on from what an earlier segment knew.
    pub fn at_open(device: &DeviceAtOpen) -> Self {
        let mut keeper = Self::default();
        keeper.feed(&device.describe().unwrap_or_default());
        keeper
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
        let bytes = self.frames.iter().flat_map(|kept| &kept.bytes);
        bytes.fold(String::new(), |mut hex, byte| {
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
            if let Ok(Frame { header, message: Message::Describe(_), .. }) = decode(&mut self.partial) {
                self.keep(Kept { boot_id: header.boot_id, description_id: header.description_id, bytes: whole });
            }
        }
        self.partial.clear();
    }

    fn keep(&mut self, new: Kept) {
        self.frames.retain(|kept| kept.boot_id == new.boot_id && kept.description_id != new.description_id);
        if self.frames.len() == N_FRAMES {
            self.frames.remove(0);
        }
        self.frames.push(new);
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
    fn descriptions_that_blocks_may_still_name_are_kept_until_the_next_boot() {
        let of = |boot_id, description_id, name: &str| {
            let mut out = [0; MAX_FRAME_LEN];
            let header = Header { boot_id, description_id, ..Header::default() };
            let mut text = name.to_owned();
            text.push_str(" 1");
            let describe = Describe {
                device_id: 1,
                name,
                firmware: &text,
                tick_rate_hz: 1e6,
                tick_tolerance_ppm: 50.0,
                streams: Streams::given(&[]),
            };
            let n = encode(&header, &Message::Describe(describe), &mut out).unwrap();
            out[..n].to_vec()
        };
        let mut keeper = DescribeKeeper::default();
        let frames: Vec<_> = (1..=5).map(|id| of(7, id, "a")).collect();
        frames.iter().for_each(|frame| keeper.feed(frame));
        assert_eq!(keeper.describe_hex(), hex(&frames[1..].concat()));
        let again = DescribeKeeper::at_open(&DeviceAtOpen {
            name: String::new(),
            port: String::new(),
            describe_hex: keeper.describe_hex(),
        });
        assert_eq!(again.describe_hex(), keeper.describe_hex(), "carried from segment to segment");
        keeper.feed(&of(8, 1, "b"));
        assert_eq!(keeper.describe_hex(), hex(&of(8, 1, "b")));
    }

    #[test]
    fn a_stream_without_delimiters_takes_no_memory() {
        let mut keeper = DescribeKeeper::default();
        (0..100).for_each(|_| keeper.feed(&[1; 4096]));
        assert!(keeper.partial.len() <= MAX_COBS_LEN + 1);
    }
}
