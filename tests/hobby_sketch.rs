//! The example sketch for hobby boards, compiled for the host with a shim of its board's library and run for five invented
//! seconds: frames that the decoder takes whole, and text lines.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

use std::io::Write;
use std::path::{Path, PathBuf};
use std::process::{Command, Stdio};

use firmware_protocol::{
    Deframed, Deframer, Header, MAX_COBS_LEN, MAX_FRAME_LEN, Message, SetRate, TimeRequest, decode, encode,
};
use tautrail::capture::{Block, Captured, Counts, DeviceDecoder, TimeReply};
use tautrail::rig::{Device, parse};

/// Compiles the sketch with every warning an error; runs it with this on its serial port; what it sends.
fn run_sketch(speak_frames: bool, host_bytes: &[u8]) -> Vec<u8> {
    let home = Path::new(env!("CARGO_MANIFEST_DIR"));
    let hobby = home.join("tools/firmware/hobby");
    let program = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join(format!("winch_scale-{speak_frames}"));
    let compiled = Command::new("g++")
        .args(["-std=c++11", "-O1", "-Wall", "-Wextra", "-Werror", "-pedantic"])
        .arg(format!("-DSPEAK_FRAMES={}", u8::from(speak_frames)))
        .arg(format!("-DSKETCH=\"{}\"", hobby.join("winch_scale/winch_scale.ino").display()))
        .arg("-I")
        .arg(hobby.join("shim"))
        .arg("-I")
        .arg(home.join("firmware-protocol/c"))
        .arg(hobby.join("shim/main.cpp"))
        .arg("-o")
        .arg(&program)
        .output()
        .unwrap_or_else(|error| panic!("g++ cannot be started ({error}); install it: apt-get install g++"));
    assert!(compiled.status.success(), "{}", String::from_utf8_lossy(&compiled.stderr));
    let mut board = Command::new(program).stdin(Stdio::piped()).stdout(Stdio::piped()).spawn().unwrap();
    board.stdin.take().unwrap().write_all(host_bytes).unwrap();
    let ran = board.wait_with_output().unwrap();
    assert!(ran.status.success());
    ran.stdout
}

fn asked() -> Vec<u8> {
    let messages = [
        Message::DescribeRequest,
        Message::Start,
        Message::TimeRequest(TimeRequest { token: 77 }),
        Message::SetRate(SetRate { stream: 1, ticks_per_sample: 1 }),
    ];
    let mut bytes = Vec::new();
    for message in messages {
        let mut frame = [0; MAX_FRAME_LEN];
        let n = encode(&Header::default(), &message, &mut frame).unwrap();
        bytes.extend_from_slice(&frame[..n]);
    }
    bytes
}

fn n_descriptions(bytes: &[u8]) -> usize {
    let mut deframer = Deframer::new([0; MAX_COBS_LEN]);
    let (mut rest, mut n) = (bytes, 0);
    while let Some(piece) = deframer.next_piece(&mut rest) {
        let Deframed::Frame(cobs) = piece else { panic!("no frame") };
        n += usize::from(matches!(decode(cobs).unwrap().message, Message::Describe(_)));
    }
    n
}

#[test]
fn the_sketch_in_frames_is_taken_whole_over_the_wrap_of_its_clock() {
    let sent = run_sketch(true, &asked());
    let (mut decoder, mut blocks, mut replies, mut gaps) = (DeviceDecoder::new(), Vec::new(), Vec::new(), 0);
    decoder.feed(0, &sent, &mut |captured| match captured {
        Captured::Block(block) => blocks.push(block),
        Captured::TimeReply(reply) => replies.push(reply),
        Captured::Gap(gap) => gaps += gap.n_missing,
        Captured::Rejected(rejected) => panic!("{rejected:?}"),
        _ => {}
    });
    let described = decoder.description().expect("a description");
    assert_eq!((described.name.as_str(), described.streams.len()), ("winch-scale", 1));
    let [TimeReply { token: 77, received_tick, sent_tick, .. }] = replies[..] else { panic!("{replies:?}") };
    assert!(received_tick <= sent_tick);
    // At boot, when asked, in answer to a rate it cannot follow, and once a second.
    assert_eq!(n_descriptions(&sent), 3 + 5);

    let n_samples: u32 = blocks.iter().map(|block: &Block| block.n_samples).sum();
    assert!((495..=501).contains(&n_samples), "{n_samples} samples in five seconds at 100 Hz");
    let last = &blocks[blocks.len() - 1];
    assert_eq!(gaps, u64::from(last.overruns), "what is missing is what it says it dropped");
    assert!(blocks[0].first_tick < 1 << 32 && last.first_tick > 1 << 32, "the board's 32 bits start again on the way");
    for block in &blocks {
        assert_eq!(block.counts, [Counts::Integer(vec![400; 2]), Counts::Integer(vec![500; 2])]);
        assert!(block.first_tick <= block.sent_tick);
    }
    for pair in blocks.windows(2) {
        let ticks = pair[1].first_tick - pair[0].first_tick;
        let samples = pair[1].first_index - pair[0].first_index;
        assert!(ticks.abs_diff(samples * 10_000) < 1_000, "{ticks} ticks for {samples} samples");
    }
}

/// How the rig file of a crew with this board would describe it.
const SKETCH_IN_TEXT: &str = r#"
[[device]]
name = "winch-scale"
port = "ports/winch-scale"
baud = 115200
protocol = "text"
[device.text]
separator = ","
header_lines = 1
time_field = 1
time_unit = "us"
time_wrap = 4294967296
interval = "10 ms"
column = [{ name = "line", field = 2 }, { name = "anchor", field = 3 }]

[[channel]]
name = "line"
device = "winch-scale"
device_channel = "line"
role = "release_line_tension"
"#;

fn sketch_device() -> Device {
    let launcher = include_str!("../tools/rehearsal/north-pier.toml").split("[[device]]").next().unwrap();
    let rig = parse(&format!("{launcher}{SKETCH_IN_TEXT}")).unwrap_or_else(|error| panic!("{error}"));
    rig.devices.into_iter().next().unwrap()
}

#[test]
fn the_text_decoder_takes_every_line_of_the_sketch_over_the_wrap_of_its_clock() {
    let sent = run_sketch(false, &[]);
    let mut decoder = DeviceDecoder::of(&sketch_device());
    let (mut blocks, mut other) = (Vec::new(), Vec::new());
    for (k, line) in (0_i64..).zip(sent.split_inclusive(|byte| *byte == b'\n')) {
        // A line comes ten milliseconds after the one before, in two reads.
        let host_ns = 10_000_000 * k;
        let (first, rest) = line.split_at(line.len() / 2);
        let mut sink = |captured| match captured {
            Captured::Block(block) => blocks.push(block),
            Captured::Gap(_) | Captured::Rejected(_) => other.push(captured),
            _ => {}
        };
        decoder.feed(host_ns, first, &mut sink);
        decoder.feed(host_ns + 1_000_000, rest, &mut sink);
    }
    let printed = String::from_utf8(sent).unwrap();
    let times_us: Vec<u64> =
        printed.lines().skip(1).map(|line| line.split(',').next().unwrap().parse().unwrap()).collect();
    assert!(times_us.first() > times_us.last(), "the board's 32 bits start again on the way");
    assert_eq!((blocks.len(), other), (times_us.len(), vec![]), "a reading a line, nothing else");
    for (block, time_us) in blocks.iter().zip(&times_us) {
        assert_eq!(block.counts, [Counts::Float(vec![400.0]), Counts::Float(vec![500.0])]);
        assert_eq!(block.boot_id, blocks[0].boot_id, "a wrap is no new boot");
        assert_eq!(block.first_tick % (1000 << 32), time_us * 1000, "ticks are the board's time, carried on");
    }
    assert!(blocks.windows(2).all(|pair| pair[1].first_tick > pair[0].first_tick));
    assert_eq!(blocks[blocks.len() - 1].first_tick / (1000 << 32), 1, "one turn");
}

#[test]
fn the_sketch_in_text_prints_a_heading_and_three_columns() {
    let sent = String::from_utf8(run_sketch(false, &[])).unwrap();
    let mut lines = sent.split_terminator("\r\n");
    assert_eq!(lines.next(), Some("us,line,anchor"));
    let rows: Vec<Vec<u32>> =
        lines.map(|line| line.split(',').map(|number| number.parse().unwrap()).collect()).collect();
    assert!((495..=502).contains(&rows.len()), "{} lines", rows.len());
    for row in &rows {
        assert_eq!((row.len(), &row[1..]), (3, &[400, 500][..]));
    }
    for pair in rows.windows(2) {
        let us = pair[1][0].wrapping_sub(pair[0][0]);
        assert!(us.abs_diff(10_000) < 1_000, "{us} microseconds from line to line");
    }
}
