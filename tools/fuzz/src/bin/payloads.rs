//! Any payload behind a checksum that fits: first byte the kind, the rest the payload. What is read can be written, and
//! what was written is read as the same.
#![no_main]

use firmware_protocol::{Header, MAX_FRAME_LEN, Message, decode, encode};

libfuzzer_sys::fuzz_target!(|bytes: &[u8]| {
    let Some((&kind, payload)) = bytes.split_first() else { return };
    let header = Header { stream: 1, sequence: 2, boot_id: 3, description_id: 4, ..Header::default() };
    let mut first = [0; MAX_FRAME_LEN];
    let Ok(len) = encode(&header, &Message::Unknown { kind, payload }, &mut first) else { return };
    let Ok(frame) = decode(&mut first[1..len - 1]) else { return };
    let mut second = [0; MAX_FRAME_LEN];
    let len = encode(&frame.header, &frame.message, &mut second).expect("what was read can be written");
    let mut third = [0; MAX_FRAME_LEN];
    let again = decode(&mut second[1..len - 1]).expect("what was written can be read");
    let len_again = encode(&again.header, &again.message, &mut third).expect("and written again");
    assert_eq!((len, again.crc), (len_again, crc_of(&mut third[..len_again])), "the same bytes both times");
});

fn crc_of(frame: &mut [u8]) -> u32 {
    let inside = 1..frame.len() - 1;
    decode(&mut frame[inside]).expect("a frame").crc
}
