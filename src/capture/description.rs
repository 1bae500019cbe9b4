//! A received description, owned; refused where samples could not be unpacked by it.

use firmware_protocol::{Channel, Describe, Header, Stream};

use super::decoder::Refusal;
use super::sample::{ChannelDescription, DeviceDescription, Encoding, StreamDescription, TimeBase};

/// What may be believed of a device's clock.
const TICK_RATES_HZ: std::ops::RangeInclusive<f64> = 1.0..=1e12;

const CHANNEL_TWICE: &str = "description names a channel twice";
const STREAM_TWICE: &str = "description names a stream twice";

/// The description in SI units, or why it is of no use.
pub(super) fn owned(header: &Header, describe: &Describe<'_>) -> Result<DeviceDescription, Refusal> {
    if !TICK_RATES_HZ.contains(&describe.tick_rate_hz) {
        let detail = format!("{} Hz, from 1 Hz to 1 THz is believed", describe.tick_rate_hz);
        return Err(Refusal { reason: "description states a tick rate that no clock has", detail });
    }
    let streams: Vec<_> = describe.streams.iter().map(|stream| owned_stream(&stream)).collect();
    let names: Vec<&str> =
        streams.iter().flat_map(|stream| &stream.channels).map(|channel| channel.name.as_str()).collect();
    if let Some(twice) = names.iter().enumerate().find_map(|(at, name)| names[..at].contains(name).then_some(name)) {
        return Err(Refusal { detail: format!("\"{twice}\""), ..CHANNEL_TWICE.into() });
    }
    for (at, stream) in streams.iter().enumerate() {
        if stream.stream == firmware_protocol::CONTROL_STREAM {
            return Err(Refusal::from("description gives samples to the control stream"));
        }
        if streams[..at].iter().any(|earlier| earlier.stream == stream.stream) {
            return Err(Refusal { detail: format!("stream {}", stream.stream), ..STREAM_TWICE.into() });
        }
    }
    Ok(DeviceDescription {
        device_id: describe.device_id,
        name: describe.name.to_owned(),
        firmware: describe.firmware.to_owned(),
        tick_rate_hz: describe.tick_rate_hz,
        tick_tolerance_ppm: describe.tick_tolerance_ppm.into(),
        boot_id: header.boot_id,
        description_id: header.description_id,
        streams,
        time_base: TimeBase::Ticks,
    })
}

fn owned_stream(stream: &Stream<'_>) -> StreamDescription {
    StreamDescription {
        stream: stream.id,
        ticks_per_sample: stream.ticks_per_sample,
        channels: stream.channels.iter().map(|channel| owned_channel(&channel)).collect(),
    }
}

fn owned_channel(channel: &Channel<'_>) -> ChannelDescription {
    ChannelDescription {
        name: channel.name.to_owned(),
        quantity: channel.quantity.to_owned(),
        encoding: match channel.encoding {
            firmware_protocol::Encoding::I16 => Encoding::I16,
            firmware_protocol::Encoding::I24 => Encoding::I24,
            firmware_protocol::Encoding::I32 => Encoding::I32,
            firmware_protocol::Encoding::F32 => Encoding::F32,
        },
        nominal_min: channel.nominal_min,
        nominal_max: channel.nominal_max,
        group_delay_s: channel.group_delay_s.into(),
        bandwidth_hz: channel.bandwidth_hz.map(f64::from),
    }
}
