//! What a host sends, between noise: the C header, built so that undefined behaviour stops it, must hear the same requests
//! in the same bytes as the Rust crate.
//!
//! The input is a recipe: an odd byte says how many bytes of noise follow; an even one is followed by a kind, a length
//! and that many bytes of payload, which become a frame whose checksum fits; of this protocol version where its second bit
//! is set, else of any.
#![no_main]

use firmware_protocol::{
    Deframed, Deframer, HEADER_LEN, MAX_COBS_LEN, Message, PROTOCOL_VERSION, crc32c, decode, stuff, unstuff_in_place,
};
use fuzz as _; // brings the C code that build.rs made

/// As in `requests.c`.
#[repr(C)]
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
struct Request {
    kind: u8,
    stream: u8,
    token: u32,
    ticks_per_sample: u32,
}

unsafe extern "C" {
    /// Writes at most `room` requests to `found`, returns how many there were.
    fn requests_in(bytes: *const u8, len: usize, found: *mut Request, room: usize) -> usize;
    /// The longest request the header keeps, unstuffed.
    fn longest_request() -> usize;
}

libfuzzer_sys::fuzz_target!(|recipe: &[u8]| {
    let stream = cooked(recipe);
    let mut by_c = vec![Request::default(); stream.len() + 1];
    // SAFETY: the lengths are those of the slices; the function keeps neither pointer.
    let n = unsafe { requests_in(stream.as_ptr(), stream.len(), by_c.as_mut_ptr(), by_c.len()) };
    by_c.truncate(n);
    assert_eq!(by_c, by_rust(&stream), "in {stream:02x?}");
});

fn cooked(recipe: &[u8]) -> Vec<u8> {
    let (mut stream, mut rest) = (Vec::new(), recipe);
    while let Some((&tag, after)) = rest.split_first() {
        if tag % 2 == 1 {
            let (noise, after) = after.split_at(after.len().min(usize::from(tag / 2)));
            stream.extend_from_slice(noise);
            rest = after;
            continue;
        }
        let [kind, len, after @ ..] = after else { break };
        let (payload, after) = after.split_at(after.len().min(usize::from(*len)));
        put_frame(if tag & 2 == 2 { PROTOCOL_VERSION } else { tag / 4 }, *kind, payload, &mut stream);
        rest = after;
    }
    stream
}

fn put_frame(version: u8, kind: u8, payload: &[u8], stream: &mut Vec<u8>) {
    let mut plain = vec![0; HEADER_LEN];
    plain[..2].copy_from_slice(&[version, kind]);
    plain.extend_from_slice(payload);
    plain.extend_from_slice(&crc32c(&plain).to_le_bytes());
    let mut stuffed = [0; MAX_COBS_LEN];
    let n = stuff(&plain, &mut stuffed).expect("a short frame");
    stream.push(0);
    stream.extend_from_slice(&stuffed[..n]);
    stream.push(0);
}

fn by_rust(stream: &[u8]) -> Vec<Request> {
    // SAFETY: returns a constant.
    let longest = unsafe { longest_request() };
    let mut deframer = Deframer::new([0; MAX_COBS_LEN]);
    let (mut rest, mut found) = (stream, Vec::new());
    while let Some(piece) = deframer.next_piece(&mut rest) {
        let Deframed::Frame(cobs) = piece else { continue };
        if unstuff_in_place(&mut cobs.to_vec()).is_ok_and(|len| len > longest) {
            continue;
        }
        let Ok(frame) = decode(cobs) else { continue };
        let asked = Request { kind: frame.message.kind(), ..Request::default() };
        match frame.message {
            Message::DescribeRequest | Message::Start | Message::Stop => found.push(asked),
            Message::TimeRequest(time) => found.push(Request { token: time.token, ..asked }),
            Message::SetRate(set) => {
                found.push(Request { stream: set.stream, ticks_per_sample: set.ticks_per_sample, ..asked });
            }
            _ => {}
        }
    }
    found
}
