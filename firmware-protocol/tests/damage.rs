//! Frames on a bad line: nothing damaged gets through, and nothing undamaged is lost.
#![allow(clippy::unwrap_used)]

use firmware_protocol::{
    Block, Deframed, Deframer, Frame, Header, MAX_COBS_LEN, MAX_FRAME_LEN, Message, TimeReply, decode, encode,
};
use proptest::prelude::*;

/// Seeded: xorshift64* (Vigna 2016, from memory).
struct Random(u64);

impl Random {
    fn next(&mut self) -> u64 {
        self.0 ^= self.0 >> 12;
        self.0 ^= self.0 << 25;
        self.0 ^= self.0 >> 27;
        self.0.wrapping_mul(0x2545_F491_4F6C_DD1D)
    }

    fn below(&mut self, limit: u64) -> u64 {
        (self.next() >> 16) % limit
    }

    /// Bits until the next one that is damaged.
    fn bits_to_damage(&mut self, rate: f64) -> u64 {
        let uniform = (self.next() >> 11) as f64 / (1_u64 << 53) as f64;
        ((1.0 - uniform).ln() / (-rate).ln_1p()) as u64
    }
}

/// A stream of frames, each with its place and the samples it carries.
struct Sent {
    bytes: Vec<u8>,
    frames: Vec<SentFrame>,
}

struct SentFrame {
    from: usize,
    to: usize,
    samples: Vec<u8>,
    is_touched: bool,
}

fn send(random: &mut Random, n_frames: u32) -> Sent {
    let mut sent = Sent { bytes: Vec::new(), frames: Vec::new() };
    for sequence in 0..n_frames {
        let n_samples = random.below(100) as u16 + 1;
        let sparse = random.below(4) == 0;
        let byte = |random: &mut Random| if sparse && random.below(8) != 0 { 0 } else { random.next() as u8 };
        let samples: Vec<u8> = (0..n_samples * 6).map(|_| byte(random)).collect();
        let first_index = u64::from(sequence) * 100;
        let block = Block {
            first_index,
            tick: first_index * 100,
            sent_tick: first_index * 100 + 77,
            overruns: 0,
            n_samples,
            sample_len: 6,
            samples: &samples,
        };
        let header = Header { flags: 0, stream: 1, sequence, boot_id: 0xB007, description_id: 1 };
        let mut out = [0; MAX_FRAME_LEN];
        let len = encode(&header, &Message::Block(block), &mut out).unwrap();
        let from = sent.bytes.len();
        sent.bytes.extend_from_slice(&out[..len]);
        sent.frames.push(SentFrame { from, to: from + len, samples, is_touched: false });
    }
    sent
}

/// Turns bits over at the rate given.
fn damage(sent: &mut Sent, random: &mut Random, rate: f64) {
    let mut bit = random.bits_to_damage(rate);
    let mut frame = 0;
    while let Some(byte) = sent.bytes.get_mut((bit / 8) as usize) {
        *byte ^= 1 << (bit % 8);
        while sent.frames[frame].to <= (bit / 8) as usize {
            frame += 1;
        }
        assert!(sent.frames[frame].from <= (bit / 8) as usize);
        sent.frames[frame].is_touched = true;
        bit += 1 + random.bits_to_damage(rate);
    }
}

/// Receives; returns how many frames came through.
fn receive(sent: &Sent) -> usize {
    let mut buffer = [0; MAX_COBS_LEN];
    let mut deframer = Deframer::new(&mut buffer);
    let mut came_through = vec![false; sent.frames.len()];
    for mut read in sent.bytes.chunks(1021) {
        while let Some(piece) = deframer.next_piece(&mut read) {
            let Deframed::Frame(cobs) = piece else { continue };
            let Ok(Frame { header, message: Message::Block(block), .. }) = decode(cobs) else { continue };
            let at = header.sequence as usize;
            assert_eq!(block.samples, sent.frames[at].samples, "frame {at} was accepted damaged");
            assert_eq!(block.first_index, at as u64 * 100);
            came_through[at] = true;
        }
    }
    for (at, frame) in sent.frames.iter().enumerate() {
        assert!(came_through[at] || frame.is_touched, "frame {at} was lost undamaged");
    }
    came_through.iter().filter(|came| **came).count()
}

/// 10⁸ bytes over the four rates.
#[test]
fn no_damaged_frame_is_accepted_and_no_undamaged_one_lost() {
    const BYTES_PER_RATE: usize = 25_000_000;
    for (seed, rate) in [(1, 1e-6), (2, 1e-5), (3, 1e-4), (4, 1e-3)] {
        let random = &mut Random(seed);
        let (mut n_bytes, mut n_sent, mut n_touched, mut n_through) = (0, 0, 0, 0);
        while n_bytes < BYTES_PER_RATE {
            let mut sent = send(random, 2000);
            damage(&mut sent, random, rate);
            n_bytes += sent.bytes.len();
            n_sent += sent.frames.len();
            n_touched += sent.frames.iter().filter(|frame| frame.is_touched).count();
            n_through += receive(&sent);
        }
        assert!(n_touched > 0, "the line was damaged at {rate}");
        println!("bit error rate {rate:e}: {n_bytes} bytes, {n_sent} frames, {n_touched} touched, {n_through} through");
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
