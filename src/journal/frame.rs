//! One record on disk: length, kind, device, sequence, host time, payload, checksum. FORMAT.md gives the bytes.
//!
//! Reading accepts any bytes: what is not a whole, sound record is said to be so, never a panic, never a guess.

use std::io::{self, Read};

/// Bytes before the payload.
pub const HEADER_BYTES: usize = 24;
/// Bytes after it.
pub const CHECKSUM_BYTES: usize = 4;
/// No record's payload is longer; a length beyond it is damage, not a request for memory.
pub const MAX_PAYLOAD_BYTES: usize = 1 << 20;

/// A record before its payload is understood.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct RawRecord {
    pub kind: u8,
    pub device: u16,
    pub seq: u64,
    pub host_ns: i64,
    pub payload: Vec<u8>,
}

/// Why bytes are not a record.
#[derive(Debug, Clone, Copy, PartialEq, Eq, thiserror::Error)]
pub enum Unsound {
    #[error("the file ends inside a record: {found} of {expected} bytes")]
    Short { found: usize, expected: usize },
    #[error("a record claims {claimed} bytes, the most allowed is {MAX_PAYLOAD_BYTES}")]
    TooLong { claimed: u32 },
    #[error("record checksum {found:#010x}, expected {expected:#010x}")]
    Checksum { found: u32, expected: u32 },
}

/// Bytes a record with this payload takes on disk.
pub const fn record_bytes(payload_bytes: usize) -> usize {
    HEADER_BYTES + payload_bytes + CHECKSUM_BYTES
}

/// Appends one record to `out`. The caller keeps `payload` within [`MAX_PAYLOAD_BYTES`].
pub fn encode(kind: u8, device: u16, seq: u64, host_ns: i64, payload: &[u8], out: &mut Vec<u8>) {
    debug_assert!(payload.len() <= MAX_PAYLOAD_BYTES);
    let start = out.len();
    out.extend_from_slice(&(payload.len() as u32).to_le_bytes());
    out.extend_from_slice(&[kind, 0]);
    out.extend_from_slice(&device.to_le_bytes());
    out.extend_from_slice(&seq.to_le_bytes());
    out.extend_from_slice(&host_ns.to_le_bytes());
    out.extend_from_slice(payload);
    let checksum = crc32c::crc32c(&out[start..]);
    out.extend_from_slice(&checksum.to_le_bytes());
}

/// Reads the next record; `None` at a clean end.
///
/// The outer error is the disk's, the inner one says that what follows is not a record.
pub fn read(source: &mut impl Read) -> io::Result<Option<Result<RawRecord, Unsound>>> {
    let mut header = [0_u8; HEADER_BYTES];
    match read_fully(source, &mut header)? {
        0 => return Ok(None),
        HEADER_BYTES => {}
        found => return Ok(Some(Err(Unsound::Short { found, expected: HEADER_BYTES }))),
    }
    let claimed = u32::from_le_bytes(array(&header[0..4]));
    let n_payload = claimed as usize;
    if n_payload > MAX_PAYLOAD_BYTES {
        return Ok(Some(Err(Unsound::TooLong { claimed })));
    }
    let mut rest = vec![0_u8; n_payload + CHECKSUM_BYTES];
    let n_rest = read_fully(source, &mut rest)?;
    if n_rest < rest.len() {
        let (found, expected) = (HEADER_BYTES + n_rest, record_bytes(n_payload));
        return Ok(Some(Err(Unsound::Short { found, expected })));
    }
    let found = u32::from_le_bytes(array(&rest[n_payload..]));
    rest.truncate(n_payload);
    let expected = crc32c::crc32c_append(crc32c::crc32c(&header), &rest);
    if found != expected {
        return Ok(Some(Err(Unsound::Checksum { found, expected })));
    }
    Ok(Some(Ok(RawRecord {
        kind: header[4],
        device: u16::from_le_bytes(array(&header[6..8])),
        seq: u64::from_le_bytes(array(&header[8..16])),
        host_ns: i64::from_le_bytes(array(&header[16..24])),
        payload: rest,
    })))
}

/// The first `N` bytes; missing ones read as zero (callers pass exact slices).
pub(super) fn array<const N: usize>(bytes: &[u8]) -> [u8; N] {
    let mut out = [0; N];
    for (to, from) in out.iter_mut().zip(bytes) {
        *to = *from;
    }
    out
}

fn read_fully(source: &mut impl Read, into: &mut [u8]) -> io::Result<usize> {
    let mut n_read = 0;
    while n_read < into.len() {
        match source.read(&mut into[n_read..]) {
            Ok(0) => break,
            Ok(n) => n_read += n,
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error),
        }
    }
    Ok(n_read)
}

#[cfg(test)]
mod tests {
    use super::*;
    use proptest::prelude::*;

    /// The worked example of FORMAT.md.
    #[test]
    fn the_documented_example_is_what_is_written() {
        let mut out = Vec::new();
        encode(3, 1, 258, 1_000_000_000, b"\x00\x41", &mut out);
        let hex: Vec<String> = out.iter().map(|byte| format!("{byte:02x}")).collect();
        let documented = include_str!("FORMAT.md")
            .split("```example")
            .nth(1)
            .and_then(|rest| rest.split("```").next())
            .expect("FORMAT.md has an example");
        assert_eq!(hex, documented.split_whitespace().collect::<Vec<_>>());
    }

    proptest! {
        #[test]
        fn what_is_encoded_is_read_back(kind: u8, device: u16, seq: u64, host_ns: i64, payload: Vec<u8>) {
            let mut out = Vec::new();
            encode(kind, device, seq, host_ns, &payload, &mut out);
            let read = read(&mut out.as_slice()).unwrap();
            prop_assert_eq!(read, Some(Ok(RawRecord { kind, device, seq, host_ns, payload })));
        }

        #[test]
        fn a_flipped_bit_is_never_read_as_a_record(payload: Vec<u8>, at: prop::sample::Index, bit in 0_u8..8) {
            let mut out = Vec::new();
            encode(3, 0, 7, 9, &payload, &mut out);
            let at = at.index(out.len());
            out[at] ^= 1 << bit;
            prop_assert!(matches!(read(&mut out.as_slice()).unwrap(), Some(Err(_))));
        }

        #[test]
        fn any_bytes_are_read_without_a_panic(bytes: Vec<u8>) {
            let mut source = bytes.as_slice();
            while let Some(Ok(_)) = read(&mut source).unwrap() {}
        }
    }

    #[test]
    fn zeros_left_by_a_power_cut_are_not_a_record() {
        assert!(matches!(read(&mut [0_u8; 4096].as_slice()).unwrap(), Some(Err(Unsound::Checksum { .. }))));
    }
}
