//! Bench section `decode`: frames to samples, against the `cobs` crate taking the same bytes apart and nothing more, and
//! against copying them.
//!
//! The stream is four channels of 24 bits in blocks of 100 samples. Best of several runs each, in the same process.

#![allow(clippy::unwrap_used, reason = "a bench that cannot go on stops here")]

use std::hint::black_box;
use std::time::Instant;

use firmware_protocol::{
    Block, Channel, Channels, Deframed, Deframer, Describe, Encoding, Header, MAX_COBS_LEN, MAX_FRAME_LEN, Message,
    Stream, Streams, decode, encode,
};
use tautrail::capture::{Captured, FrameDecoder};

const N_BLOCKS: u64 = 2_000;
const N_PER_BLOCK: u16 = 100;
const N_CHANNELS: u64 = 4;
const N_RUNS: u32 = 15;
/// One read from a port.
const READ_BYTES: usize = 4096;

/// The stream, and where its frames' stuffed bytes stand.
fn stream() -> Vec<u8> {
    let channel = |name| Channel {
        name,
        quantity: "force",
        encoding: Encoding::I24,
        nominal_min: -8e6,
        nominal_max: 8e6,
        group_delay_s: 1e-4,
        bandwidth_hz: Some(2000.0),
    };
    let channels = ["a", "b", "c", "d"].map(channel);
    let streams = [Stream { id: 1, ticks_per_sample: 100, channels: Channels::given(&channels) }];
    let describe = Message::Describe(Describe {
        device_id: 1,
        name: "bench",
        firmware: "0",
        tick_rate_hz: 1e6,
        tick_tolerance_ppm: 50.0,
        streams: Streams::given(&streams),
    });
    let mut all = Vec::new();
    let mut frame = [0; MAX_FRAME_LEN];
    let mut put = |stream: u8, sequence: u32, message: &Message<'_>| {
        let header = Header { flags: 0, stream, sequence, boot_id: 7, description_id: 1 };
        let n = encode(&header, message, &mut frame).unwrap();
        all.extend_from_slice(&frame[..n]);
    };
    put(0, 0, &describe);
    let mut state = 1_u64;
    for number in 0..N_BLOCKS {
        let mut samples = Vec::new();
        for _ in 0..u64::from(N_PER_BLOCK) * N_CHANNELS {
            state = state.wrapping_mul(6_364_136_223_846_793_005).wrapping_add(1);
            // Around a load of 600 N at 0.5 mN a count, with noise: zeros are as common as in real counts.
            let counts = 1_200_000 + (state >> 54) as i32 - 512;
            samples.extend_from_slice(&counts.to_le_bytes()[..3]);
        }
        let first_index = number * u64::from(N_PER_BLOCK);
        let block = Block {
            first_index,
            tick: first_index * 100,
            sent_tick: (first_index + u64::from(N_PER_BLOCK)) * 100,
            overruns: 0,
            n_samples: N_PER_BLOCK,
            sample_len: 3 * N_CHANNELS as u16,
            samples: &samples,
        };
        put(1, number as u32, &Message::Block(block));
    }
    all
}

/// Best time of several runs, ns; a fresh copy of the stream each time, made outside the time.
fn best_ns(stream: &[u8], mut run: impl FnMut(&mut Vec<u8>)) -> f64 {
    let once = |_| {
        let mut copy = stream.to_vec();
        let begun = Instant::now();
        run(&mut copy);
        begun.elapsed().as_nanos() as f64
    };
    (0..N_RUNS).map(once).fold(f64::INFINITY, f64::min)
}

fn main() {
    let stream = stream();
    let mut target = vec![0_u8; stream.len()];
    let copy_ns = best_ns(&stream, |bytes| black_box(&mut target).copy_from_slice(black_box(bytes)));
    let mut unstuffed = 0;
    let cobs_ns = best_ns(&stream, |bytes| {
        for piece in bytes.split_mut(|byte| *byte == 0).filter(|piece| !piece.is_empty()) {
            unstuffed += cobs::decode_in_place(black_box(piece)).unwrap();
        }
    });
    let wire_ns = best_ns(&stream, |bytes| {
        let mut deframer = Deframer::new(vec![0; MAX_COBS_LEN]);
        for read in bytes.chunks(READ_BYTES) {
            let mut rest = read;
            while let Some(Deframed::Frame(frame)) = deframer.next_piece(&mut rest) {
                black_box(decode(frame).unwrap());
            }
        }
    });
    let mut n_samples = 0;
    let samples_ns = best_ns(&stream, |bytes| {
        let mut decoder = FrameDecoder::new();
        n_samples = 0;
        for (k, read) in bytes.chunks(READ_BYTES).enumerate() {
            decoder.feed(k as i64, read, &mut |captured| {
                if let Captured::Block(block) = black_box(captured) {
                    n_samples += u64::from(block.n_samples) * N_CHANNELS;
                }
            });
        }
    });
    assert!(unstuffed > 0 && n_samples == N_BLOCKS * u64::from(N_PER_BLOCK) * N_CHANNELS);
    let figure = |name: &str, ns: f64, target: &str| {
        let (mb_per_s, cobs_mb_per_s) = (stream.len() as f64 * 1e3 / ns, stream.len() as f64 * 1e3 / cobs_ns);
        let ratio = ns / cobs_ns;
        println!(
            "figure decode_{name} value={mb_per_s:.0} unit=MB/s reference={cobs_mb_per_s:.0} ratio={ratio:.2} target={target}"
        );
    };
    figure("memcpy", copy_ns, "-");
    figure("cobs_crate_alone", cobs_ns, "-");
    figure("frames_checked", wire_ns, "-");
    figure("frames_to_samples", samples_ns, "-");
    let per_sample_ns = samples_ns / n_samples as f64;
    println!("figure decode_per_channel_sample value={per_sample_ns:.2} unit=ns reference=- ratio=- target=-");
}
