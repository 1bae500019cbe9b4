//! The vector files, written from SPEC.md by a program that shares nothing with this crate (`vectors/make.py`).
#![allow(clippy::unwrap_used, clippy::expect_used)]

use std::collections::BTreeSet;
use std::fs;
use std::path::PathBuf;
use std::process::Command;

use firmware_protocol::{
    Block, Channel, Channels, DecodeError, Deframed, Deframer, Describe, Edge, Encoding, Frame, Header, MAX_COBS_LEN,
    MAX_FRAME_LEN, Message, SetRate, Status, Stream, Streams, TimeReply, TimeRequest, decode, encode,
};

const DEVICE: Header = Header { flags: 0, stream: 0, sequence: 0, boot_id: 0x5EED_1234, description_id: 3 };
const HOST: Header = Header { flags: 0, stream: 0, sequence: 0, boot_id: 0, description_id: 0 };

const LINE: Channel<'_> = Channel {
    name: "line",
    quantity: "force",
    encoding: Encoding::I24,
    nominal_min: -8_388_608.0,
    nominal_max: 8_388_607.0,
    group_delay_s: 0.000_25,
    bandwidth_hz: Some(3300.0),
};
const TENSION: [Channel<'_>; 2] = [LINE, Channel { name: "anchor", bandwidth_hz: None, ..LINE }];
const MOTION: [Channel<'_>; 3] = [
    Channel {
        name: "encoder",
        quantity: "position",
        encoding: Encoding::I32,
        nominal_min: -2_147_483_648.0,
        nominal_max: 2_147_483_647.0,
        group_delay_s: 0.0,
        bandwidth_hz: None,
    },
    Channel {
        name: "accel",
        quantity: "acceleration",
        encoding: Encoding::I16,
        nominal_min: -32_000.0,
        nominal_max: 32_000.0,
        group_delay_s: 0.000_5,
        bandwidth_hz: Some(1000.0),
    },
    Channel {
        name: "bridge",
        quantity: "force",
        encoding: Encoding::F32,
        nominal_min: -1.5,
        nominal_max: 1.5,
        group_delay_s: 0.0,
        bandwidth_hz: None,
    },
];
const STREAMS: [Stream<'_>; 2] = [
    Stream { id: 1, ticks_per_sample: 100, channels: Channels::given(&TENSION) },
    Stream { id: 2, ticks_per_sample: 1000, channels: Channels::given(&MOTION) },
];
const DESCRIBE: Describe<'_> = Describe {
    device_id: 0x0123_4567_89AB_CDEF,
    name: "winch-node",
    firmware: "tension 1.4.0",
    tick_rate_hz: 1e6,
    tick_tolerance_ppm: 50.0,
    streams: Streams::given(&STREAMS),
};
const SAMPLES: [u8; 18] = [255, 255, 255, 255, 255, 127, 0, 0, 0, 0, 0, 128, 0, 1, 0, 1, 0, 1];
const BLOCK: Block<'_> = Block {
    first_index: 5_000_000_000,
    tick: 500_000_000_000,
    sent_tick: 500_000_000_321,
    overruns: 7,
    n_samples: 3,
    sample_len: 6,
    samples: &SAMPLES,
};
const LONG_RUNS: [u8; 800] = {
    let mut samples = [1; 800];
    (samples[400], samples[401], samples[402], samples[403]) = (0, 0, 0, 0);
    samples
};

/// Chosen by `make.py` so that the checksum has no zero either.
const FULL_RUN_SEQUENCE: u32 = 0;
const FULL_RUN: [u8; 252] = {
    let mut samples = [1; 252];
    samples[1] = 0;
    samples
};

/// What this crate must write, byte by byte.
fn written() -> Vec<(&'static str, Header, Message<'static>)> {
    let numbered = |sequence| Header { sequence, ..DEVICE };
    let asked = |sequence| Header { sequence, ..HOST };
    let long = Block {
        first_index: 0,
        tick: 1,
        sent_tick: 2,
        overruns: 0,
        n_samples: 200,
        sample_len: 4,
        samples: &LONG_RUNS,
    };
    vec![
        ("describe", numbered(1), Message::Describe(DESCRIBE)),
        ("block", Header { stream: 1, sequence: u32::MAX, ..DEVICE }, Message::Block(BLOCK)),
        ("block-long-runs", Header { stream: 2, ..DEVICE }, Message::Block(long)),
        (
            "block-full-run-at-end",
            Header { stream: 2, sequence: FULL_RUN_SEQUENCE, ..DEVICE },
            Message::Block(Block { n_samples: 63, samples: &FULL_RUN, ..long }),
        ),
        ("edge", numbered(7), Message::Edge(Edge { input: 2, rising: true, tick: 1_000_000 })),
        (
            "status",
            numbered(8),
            Message::Status(Status {
                tick: 123_456_789,
                temperature_c: 21.5,
                supply_v: 5.125,
                excitation_v: f32::from_bits(0x7FC0_0000),
                overruns: 12,
            }),
        ),
        (
            "time-reply",
            numbered(9),
            Message::TimeReply(TimeReply {
                token: 0xDEAD_BEEF,
                received_tick: 1_099_511_627_776,
                sent_tick: 1_099_511_627_800,
            }),
        ),
        ("text", numbered(10), Message::Text("excitation 4.98 V, 20 °C")),
        ("unknown-kind", numbered(11), Message::Unknown { kind: 0x40, payload: &[0, 1, 2] }),
        ("describe-request", asked(0), Message::DescribeRequest),
        ("start", asked(1), Message::Start),
        ("stop", asked(2), Message::Stop),
        ("time-request", asked(3), Message::TimeRequest(TimeRequest { token: 0xDEAD_BEEF })),
        ("set-rate", asked(4), Message::SetRate(SetRate { stream: 1, ticks_per_sample: 50 })),
    ]
}

fn vectors() -> PathBuf {
    PathBuf::from(env!("CARGO_MANIFEST_DIR")).join("vectors")
}

/// The bytes of a vector's line.
fn bytes_of(name: &str, line: &str) -> Vec<u8> {
    let text = fs::read_to_string(vectors().join(format!("{name}.txt"))).expect("vector file");
    let hex = text.lines().find_map(|l| l.strip_prefix(line)?.strip_prefix(": ")).expect("line of the vector");
    (0..hex.len()).step_by(2).map(|at| u8::from_str_radix(&hex[at..at + 2], 16).unwrap()).collect()
}

fn decoded<'c>(name: &str, cobs: &'c mut Vec<u8>) -> Frame<'c> {
    *cobs = bytes_of(name, "frame");
    assert_eq!((cobs.first(), cobs.last()), (Some(&0), Some(&0)), "{name}");
    let inside = 1..cobs.len() - 1;
    decode(&mut cobs[inside]).unwrap()
}

#[test]
fn every_message_is_written_as_the_vectors_say() {
    for (name, header, message) in written() {
        let mut out = [0; MAX_FRAME_LEN];
        let len = encode(&header, &message, &mut out).unwrap();
        assert_eq!(out[..len], bytes_of(name, "frame"), "{name}");
    }
}

#[test]
fn every_vector_is_read_as_what_was_written() {
    for (name, header, message) in written() {
        let mut cobs = Vec::new();
        let frame = decoded(name, &mut cobs);
        assert_eq!(frame.header, header, "{name}");
        // By their text, because one value is not a number and so not equal to itself.
        assert_eq!(same_text(&frame.message), same_text(&message), "{name}");
    }
}

/// Lists print differently when given and when received; they are compared in `DESCRIBE` itself.
fn same_text(message: &Message<'_>) -> String {
    match message {
        Message::Describe(describe) => {
            assert_eq!(*describe, DESCRIBE);
            "describe".to_owned()
        }
        other => format!("{other:?}"),
    }
}

#[test]
fn fields_to_come_are_read_as_if_they_were_not_there() {
    let mut cobs = Vec::new();
    let frame = decoded("block-with-fields-to-come", &mut cobs);
    assert_eq!(frame.message, Message::Block(BLOCK));
    let frame = decoded("describe-with-fields-to-come", &mut cobs);
    assert_eq!(frame.message, Message::Describe(Describe { streams: Streams::given(&STREAMS[..1]), ..DESCRIBE }));
    let frame = decoded("time-request-with-fields-to-come", &mut cobs);
    assert_eq!(frame.message, Message::TimeRequest(TimeRequest { token: 0xDEAD_BEEF }));
}

#[test]
fn another_version_is_refused_by_its_number() {
    let mut cobs = bytes_of("other-version", "frame");
    let inside = 1..cobs.len() - 1;
    assert_eq!(decode(&mut cobs[inside]), Err(DecodeError::Version { found: 2 }));
}

#[test]
fn a_full_run_at_the_end_is_read_with_the_spare_code_too() {
    let mut cobs = bytes_of("block-full-run-at-end", "frame");
    cobs.pop();
    cobs.push(1);
    assert_eq!(decode(&mut cobs[1..]).unwrap().header.sequence, FULL_RUN_SEQUENCE);
}

/// What a receiver makes of a vector's wire, frame by frame.
fn received(name: &str) -> Vec<Result<String, DecodeError>> {
    let wire = bytes_of(name, "frame");
    let mut deframer = Deframer::new([0; MAX_COBS_LEN]);
    let (mut bytes, mut heard) = (&wire[..], Vec::new());
    while let Some(piece) = deframer.next_piece(&mut bytes) {
        let Deframed::Frame(cobs) = piece else { panic!("{name}: junk") };
        heard.push(decode(cobs).map(|frame| format!("{:?} {:?}", frame.header, frame.message)));
    }
    heard
}

#[test]
fn two_frames_are_read_with_one_delimiter_between_them_too() {
    let (edge, status) = (received("edge"), received("status"));
    let both = [edge, status].concat();
    assert_eq!(both.len(), 2);
    assert_eq!(received("two-frames"), both);
    assert_eq!(received("two-frames-one-delimiter"), both);
}

#[test]
fn the_spare_code_changes_nothing() {
    assert_eq!(received("block-with-spare-code"), received("block-full-run-at-end"));
}

const REFUSED: [(&str, &str, &str); 5] = [
    ("refused-checksum", "checksum mismatch", "checksum 0xe7a3503c, expected 0xe6a3503c"),
    ("refused-stuffing", "broken byte stuffing", "byte stuffing is broken at byte 24"),
    ("refused-cut-payload", "payload cut short", "the payload of kind 0x03 (edge) ends inside its tick"),
    (
        "refused-direction",
        "payload value unknown",
        "kind 0x03 (edge): direction has a value that the protocol does not know",
    ),
    ("refused-cut-request", "payload cut short", "the payload of kind 0x84 (time request) ends inside its token"),
];

#[test]
fn what_must_be_refused_is_refused_by_kind_and_field() {
    for (name, reason, sentence) in REFUSED {
        let [Err(error)] = received(name)[..] else { panic!("{name} is not refused") };
        assert_eq!((error.reason(), error.to_string().as_str()), (reason, sentence), "{name}");
    }
}

#[test]
fn no_vector_is_left_untested() {
    let mut tested: BTreeSet<_> = written().iter().map(|(name, ..)| format!("{name}.txt")).collect();
    tested.insert("block-with-fields-to-come.txt".to_owned());
    tested.insert("describe-with-fields-to-come.txt".to_owned());
    tested.insert("time-request-with-fields-to-come.txt".to_owned());
    tested.insert("other-version.txt".to_owned());
    let more = ["two-frames", "two-frames-one-delimiter", "block-with-spare-code"];
    tested.extend(more.into_iter().chain(REFUSED.map(|(name, ..)| name)).map(|name| format!("{name}.txt")));
    let names = fs::read_dir(vectors()).unwrap().map(|entry| entry.unwrap().file_name().into_string().unwrap());
    assert_eq!(names.filter(|name| name.ends_with(".txt")).collect::<BTreeSet<_>>(), tested);
}

#[test]
fn the_files_are_what_their_program_writes() {
    let fresh = PathBuf::from(env!("CARGO_TARGET_TMPDIR")).join("vectors");
    fs::create_dir_all(&fresh).unwrap();
    let status = Command::new("python3").arg(vectors().join("make.py")).arg(&fresh).status();
    assert!(status.expect("python3 can be started").success());
    for entry in fs::read_dir(&fresh).unwrap() {
        let path = entry.unwrap().path();
        let kept = fs::read_to_string(vectors().join(path.file_name().unwrap())).unwrap();
        assert_eq!(fs::read_to_string(&path).unwrap(), kept, "{}", path.display());
    }
}

#[test]
fn the_worked_example_of_the_document_is_the_edge_vector() {
    let spec = fs::read_to_string(vectors().with_file_name("SPEC.md")).unwrap();
    for line in ["decoded", "frame"] {
        let spaced: Vec<_> = bytes_of("edge", line).iter().map(|byte| format!("{byte:02x}")).collect();
        let run_together: String = spec.split_whitespace().collect::<Vec<_>>().join(" ");
        assert!(run_together.contains(&spaced.join(" ")), "{line} of the example");
    }
}
