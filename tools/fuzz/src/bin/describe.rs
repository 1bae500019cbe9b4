//! Any description behind a checksum that fits. What is accepted holds what it counts, says nothing that no clock or
//! converter could, and is the same once it was written and read again.
#![no_main]

use firmware_protocol::{Channel, Describe, Frame, Header, Kind, MAX_FRAME_LEN, Message, Stream, decode, encode};

libfuzzer_sys::fuzz_target!(|payload: &[u8]| {
    let mut frame = [0; MAX_FRAME_LEN];
    let message = Message::Unknown { kind: Kind::Describe as u8, payload };
    let Ok(len) = encode(&Header::default(), &message, &mut frame) else { return };
    let Ok(Frame { message: Message::Describe(describe), .. }) = decode(&mut frame[1..len - 1]) else { return };
    assert!(describe.tick_rate_hz > 0.0 && describe.tick_rate_hz.is_finite());
    assert!(describe.tick_tolerance_ppm >= 0.0);
    let streams: Vec<Stream> = describe.streams.iter().collect();
    for stream in &streams {
        assert!(stream.ticks_per_sample > 0);
        let channels: Vec<Channel> = stream.channels.iter().collect();
        assert_eq!(stream.sample_len(), channels.iter().map(|channel| channel.encoding.width()).sum::<usize>());
        assert!(channels.iter().all(|channel| channel.bandwidth_hz.is_none_or(|hz| hz > 0.0)));
        assert!(channels.len() * 29 <= payload.len(), "each channel's record took its bytes");
    }
    assert!(streams.len() * 8 <= payload.len(), "each stream's record took its bytes");
    written_and_read_again(&describe);
});

fn written_and_read_again(describe: &Describe<'_>) {
    let mut frame = [0; MAX_FRAME_LEN];
    let len = encode(&Header::default(), &Message::Describe(*describe), &mut frame).expect("it can be written");
    let again = decode(&mut frame[1..len - 1]).expect("it can be read");
    let Message::Describe(again) = again.message else { panic!("not a description: {again:?}") };
    let same = |one: &Describe<'_>, other: &Describe<'_>| {
        one.streams.iter().count() == other.streams.iter().count()
            && one.streams.iter().zip(other.streams.iter()).all(|(one, other)| same_stream(&one, &other))
    };
    assert!(same(describe, &again));
    assert_eq!((describe.device_id, describe.name, describe.firmware), (again.device_id, again.name, again.firmware));
}

/// By bits, for a nominal range may be no number.
fn same_stream(one: &Stream<'_>, other: &Stream<'_>) -> bool {
    let bits = |channel: &Channel<'_>| (channel.nominal_min.to_bits(), channel.nominal_max.to_bits());
    let same_channel = |(one, other): (Channel<'_>, Channel<'_>)| {
        (one.name, one.quantity, one.encoding, bits(&one)) == (other.name, other.quantity, other.encoding, bits(&other))
    };
    (one.id, one.ticks_per_sample) == (other.id, other.ticks_per_sample)
        && one.channels.iter().count() == other.channels.iter().count()
        && one.channels.iter().zip(other.channels.iter()).all(same_channel)
}
