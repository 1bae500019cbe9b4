//! Frames on a bad line: nothing damaged gets through, and nothing undamaged is lost.
#![allow(clippy::unwrap_used)]

#[path = "support/bad_line.rs"]
mod bad_line;

use bad_line::{Random, sweep};
use firmware_protocol::{
    Deframed, Deframer, Frame, Header, MAX_COBS_LEN, MAX_FRAME_LEN, Message, TimeReply, decode, encode,
};
use proptest::prelude::*;

/// The short form of `tools/bench corruption`, which sends 10⁸ bytes at every rate.
#[test]
fn no_damaged_frame_is_accepted_and_no_undamaged_one_lost() {
    for (seed, rate) in [(1, 1e-6), (2, 1e-5), (3, 1e-4), (4, 1e-3)] {
        let tally = sweep(&mut Random(seed), 2_000_000, rate);
        assert!(tally.touched > 0 && tally.accepted > 0, "the line was damaged at {rate}: {tally:?}");
        assert_eq!((tally.accepted_damaged, tally.lost_untouched), (0, 0), "at {rate}: {tally:?}");
    }
}

fn frame_of(sequence: u32) -> Vec<u8> {
    let header = Header { sequence, boot_id: 1, ..Header::default() };
    let reply = TimeReply { token: sequence, received_tick: u64::from(sequence) << 8, sent_tick: 1 };
    let mut out = vec![0; MAX_FRAME_LEN];
    let len = encode(&header, &Message::TimeReply(reply), &mut out).unwrap();
    out.truncate(len);
    out
}

fn sequences_in(bytes: &[u8]) -> Vec<u32> {
    let mut deframer = Deframer::new([0; MAX_COBS_LEN]);
    let (mut rest, mut found) = (bytes, Vec::new());
    while let Some(piece) = deframer.next_piece(&mut rest) {
        if let Deframed::Frame(cobs) = piece {
            found.extend(decode(cobs).map(|frame| frame.header.sequence));
        }
    }
    found
}

#[test]
fn a_frame_cut_anywhere_costs_only_itself() {
    let (cut, whole) = (frame_of(1), frame_of(2));
    for len in 0..cut.len() {
        let bytes = [&cut[..len], &whole[..]].concat();
        // Only the closing delimiter may be missing: the next frame brings one.
        let expected = if len == cut.len() - 1 { vec![1, 2] } else { vec![2] };
        assert_eq!(sequences_in(&bytes), expected, "cut after {len} bytes");
        let bytes = [&cut[cut.len() - len..], &whole[..]].concat();
        let expected = if len == cut.len() - 1 { vec![1, 2] } else { vec![2] };
        assert_eq!(sequences_in(&bytes), expected, "joined {len} bytes before the end");
    }
}

#[test]
fn a_run_too_long_for_a_frame_is_handed_out_and_ends_at_the_next_delimiter() {
    let junk: Vec<u8> = (0..3 * MAX_COBS_LEN).map(|at| (at % 255) as u8 + 1).collect();
    let bytes = [&junk[..], &frame_of(3)].concat();
    let mut deframer = Deframer::new([0; MAX_COBS_LEN]);
    let (mut rest, mut handed_out, mut n_frames) = (&bytes[..], Vec::new(), 0);
    while let Some(piece) = deframer.next_piece(&mut rest) {
        match piece {
            Deframed::Junk(junk) => handed_out.extend_from_slice(junk),
            Deframed::Frame(cobs) => n_frames += usize::from(decode(cobs).is_ok()),
        }
    }
    assert_eq!((handed_out, n_frames), (junk, 1));
}

proptest! {
    #[test]
    fn any_bytes_are_decoded_without_panic(mut bytes in prop::collection::vec(any::<u8>(), 0..2200)) {
        let _either_way = decode(&mut bytes);
    }

    /// The checksum made to fit, so that every payload parser sees anything.
    #[test]
    fn any_payload_is_read_without_panic(
        kind in any::<u8>(),
        payload in prop::collection::vec(prop_oneof![any::<u8>(), 0_u8..4], 0..300),
    ) {
        let mut out = [0; MAX_FRAME_LEN];
        let len = encode(&Header::default(), &Message::Unknown { kind, payload: &payload }, &mut out).unwrap();
        if let Ok(Frame { message: Message::Describe(describe), .. }) = decode(&mut out[1..len - 1]) {
            let n_channels: usize = describe.streams.iter().map(|stream| stream.channels.iter().count()).sum();
            prop_assert!(n_channels <= payload.len());
        }
    }

    #[test]
    fn every_byte_but_delimiters_is_handed_out_once(
        bytes in prop::collection::vec(prop_oneof![1 => Just(0_u8), 8 => any::<u8>()], 0..400),
        buffer_len in 1_usize..50,
        read_len in 1_usize..60,
    ) {
        let mut deframer = Deframer::new(vec![0; buffer_len]);
        let mut handed_out = Vec::new();
        for mut read in bytes.chunks(read_len) {
            while let Some(piece) = deframer.next_piece(&mut read) {
                match piece {
                    Deframed::Frame(cobs) => handed_out.extend_from_slice(cobs),
                    Deframed::Junk(junk) => handed_out.extend_from_slice(junk),
                }
            }
        }
        handed_out.extend_from_slice(deframer.take_partial());
        let expected: Vec<u8> = bytes.iter().copied().filter(|byte| *byte != 0).collect();
        prop_assert_eq!(handed_out, expected);
    }
}
