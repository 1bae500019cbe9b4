//! What is written is read back, through the deframer, whatever the reads' sizes.
#![allow(clippy::unwrap_used)]

use firmware_protocol::{
    Block, Channel, Channels, Deframed, Deframer, Describe, Edge, EncodeError, Encoding, Frame, Header, MAX_COBS_LEN,
    MAX_FRAME_LEN, Message, SetRate, Status, Stream, Streams, TimeReply, TimeRequest, decode, encode,
};

const HEADER: Header = Header { flags: 0, stream: 3, sequence: 0xFFFF_FFFE, boot_id: 0xDEAD_BEEF, description_id: 258 };

fn channel<'a>(name: &'a str, encoding: Encoding, bandwidth_hz: Option<f32>) -> Channel<'a> {
    Channel {
        name,
        quantity: "force",
        encoding,
        nominal_min: -8_388_608.0,
        nominal_max: 8_388_607.0,
        group_delay_s: 0.000_25,
        bandwidth_hz,
    }
}

#[track_caller]
fn check(message: Message<'_>) {
    let mut frame = [0; MAX_FRAME_LEN];
    let n_bytes = encode(&HEADER, &message, &mut frame).unwrap();
    for read_len in [1, 2, 7, 4096] {
        let mut buffer = [0; MAX_COBS_LEN];
        let mut deframer = Deframer::new(&mut buffer);
        let mut n_found = 0;
        for mut bytes in frame[..n_bytes].chunks(read_len) {
            while let Some(piece) = deframer.next_piece(&mut bytes) {
                let Deframed::Frame(cobs) = piece else { panic!("junk in a clean stream") };
                let Frame { header, message: read, .. } = decode(cobs).unwrap();
                assert_eq!((header, read), (HEADER, message));
                n_found += 1;
            }
        }
        assert_eq!(n_found, 1, "reads of {read_len} bytes");
    }
}

#[test]
fn a_description_is_read_back_in_place() {
    let tension = [channel("line", Encoding::I24, Some(3300.0)), channel("anchor", Encoding::I24, None)];
    let motion = [channel("encoder", Encoding::I32, None), channel("accel", Encoding::I16, Some(1000.0))];
    let streams = [
        Stream { id: 1, ticks_per_sample: 100, channels: Channels::given(&tension) },
        Stream { id: 9, ticks_per_sample: 1000, channels: Channels::given(&motion) },
        Stream { id: 10, ticks_per_sample: 1, channels: Channels::given(&[]) },
    ];
    check(Message::Describe(Describe {
        device_id: u64::MAX,
        name: "winch-node",
        firmware: "tension ½ 1.2.3",
        tick_rate_hz: 1e6,
        tick_tolerance_ppm: 50.0,
        streams: Streams::given(&streams),
    }));
}

#[test]
fn every_other_message_is_read_back() {
    check(Message::Block(Block {
        first_index: u64::MAX,
        tick: 1 << 40,
        sent_tick: (1 << 40) + 9,
        overruns: 3,
        n_samples: 300,
        sample_len: 6,
        samples: &core::array::from_fn::<u8, 1800, _>(|i| (i / 3) as u8),
    }));
    check(Message::Edge(Edge { input: 2, rising: false, tick: 0 }));
    check(Message::Status(Status {
        tick: 5,
        temperature_c: -4.5,
        supply_v: 5.02,
        excitation_v: f32::INFINITY,
        overruns: u32::MAX,
    }));
    check(Message::TimeReply(TimeReply { token: 77, received_tick: u64::MAX - 1, sent_tick: u64::MAX }));
    check(Message::Text("shunt resistor switched on"));
    check(Message::DescribeRequest);
    check(Message::Start);
    check(Message::Stop);
    check(Message::TimeRequest(TimeRequest { token: 0 }));
    check(Message::SetRate(SetRate { stream: 1, ticks_per_sample: 50 }));
    check(Message::Unknown { kind: 0x40, payload: &[0, 1, 0, 2, 255] });
}

#[test]
fn a_frame_that_does_not_fit_is_an_error_at_every_buffer_length() {
    let message = Message::Text("winch at rest");
    let mut frame = [0; MAX_FRAME_LEN];
    let n_bytes = encode(&HEADER, &message, &mut frame).unwrap();
    for buffer_len in 0..n_bytes {
        assert_eq!(
            encode(&HEADER, &message, &mut frame[..buffer_len]),
            Err(EncodeError::BufferTooSmall { buffer_len }),
        );
    }
    assert_eq!(encode(&HEADER, &message, &mut frame[..n_bytes]), Ok(n_bytes));
}

#[test]
fn what_the_wire_cannot_carry_is_refused() {
    let mut out = [0; MAX_FRAME_LEN];
    let long = core::str::from_utf8(&[b'x'; 256]).unwrap();
    assert_eq!(encode(&HEADER, &Message::Text(long), &mut out), Err(EncodeError::StringTooLong { len: 256 }));
    let too_many = Message::Unknown { kind: 0x40, payload: &[1; 2031] };
    assert_eq!(encode(&HEADER, &too_many, &mut out), Err(EncodeError::FrameTooLong));
    let longest = Message::Unknown { kind: 0x40, payload: &[1; 2030] };
    assert!(encode(&HEADER, &longest, &mut out).is_ok_and(|n_bytes| n_bytes <= MAX_FRAME_LEN));
}
