//! A device's description as JSON text, so that it stays readable without this program.

use serde_json::{Value, json};

use super::error::TrialError;
use crate::capture::{ChannelDescription, DeviceDescription, Encoding, StreamDescription, TimeBase};

/// The word of an encoding in files.
pub(super) const fn encoding_word(encoding: Encoding) -> &'static str {
    match encoding {
        Encoding::I16 => "i16",
        Encoding::I24 => "i24",
        Encoding::I32 => "i32",
        Encoding::F32 => "f32",
    }
}

pub(super) fn encoding_from_word(word: &str) -> Option<Encoding> {
    [Encoding::I16, Encoding::I24, Encoding::I32, Encoding::F32].into_iter().find(|e| encoding_word(*e) == word)
}

pub(super) fn to_json(description: &DeviceDescription) -> String {
    let streams: Vec<Value> = description.streams.iter().map(stream_json).collect();
    let mut value = json!({
        "device_id": description.device_id,
        "name": description.name,
        "firmware": description.firmware,
        "tick_rate_hz": description.tick_rate_hz,
        "tick_tolerance_ppm": description.tick_tolerance_ppm,
        "boot_id": description.boot_id,
        "description_id": description.description_id,
        "streams": streams,
    });
    match description.time_base {
        TimeBase::Ticks => {}
        TimeBase::Printed { hidden_delay_ns } => value["printed_time"] = json!({ "hidden_delay_ns": hidden_delay_ns }),
        TimeBase::Arrival { half_width_ns } => value["arrival_time"] = json!({ "half_width_ns": half_width_ns }),
    }
    format!("{value:#}\n")
}

fn stream_json(stream: &StreamDescription) -> Value {
    let channels: Vec<Value> = stream.channels.iter().map(channel_json).collect();
    json!({ "stream": stream.stream, "ticks_per_sample": stream.ticks_per_sample, "channels": channels })
}

fn channel_json(channel: &ChannelDescription) -> Value {
    json!({
        "name": channel.name,
        "quantity": channel.quantity,
        "encoding": encoding_word(channel.encoding),
        "nominal_min": channel.nominal_min,
        "nominal_max": channel.nominal_max,
        "group_delay_s": channel.group_delay_s,
        "bandwidth_hz": channel.bandwidth_hz,
    })
}

pub(super) fn from_json(object: &str, text: &str) -> Result<DeviceDescription, TrialError> {
    let bad = || TrialError::WrongType {
        object: object.to_owned(),
        found: "other text".to_owned(),
        expected: "a device description in JSON",
    };
    let value: Value = serde_json::from_str(text).map_err(|_| bad())?;
    parse(&value).ok_or_else(bad)
}

fn parse(value: &Value) -> Option<DeviceDescription> {
    Some(DeviceDescription {
        device_id: value.get("device_id")?.as_u64()?,
        name: text(value, "name")?,
        firmware: text(value, "firmware")?,
        tick_rate_hz: number(value, "tick_rate_hz")?,
        tick_tolerance_ppm: number(value, "tick_tolerance_ppm")?,
        boot_id: small(value, "boot_id")?,
        description_id: small(value, "description_id")?,
        streams: value.get("streams")?.as_array()?.iter().map(parse_stream).collect::<Option<_>>()?,
        time_base: parse_time_base(value)?,
    })
}

fn parse_time_base(value: &Value) -> Option<TimeBase> {
    Some(match (value.get("printed_time"), value.get("arrival_time")) {
        (Some(printed), _) => TimeBase::Printed { hidden_delay_ns: number(printed, "hidden_delay_ns")? },
        (None, Some(arrival)) => TimeBase::Arrival { half_width_ns: number(arrival, "half_width_ns")? },
        (None, None) => TimeBase::Ticks,
    })
}

fn parse_stream(value: &Value) -> Option<StreamDescription> {
    Some(StreamDescription {
        stream: small(value, "stream")?,
        ticks_per_sample: small(value, "ticks_per_sample")?,
        channels: value.get("channels")?.as_array()?.iter().map(parse_channel).collect::<Option<_>>()?,
    })
}

fn parse_channel(value: &Value) -> Option<ChannelDescription> {
    Some(ChannelDescription {
        name: text(value, "name")?,
        quantity: text(value, "quantity")?,
        encoding: encoding_from_word(value.get("encoding")?.as_str()?)?,
        nominal_min: number(value, "nominal_min")?,
        nominal_max: number(value, "nominal_max")?,
        group_delay_s: number(value, "group_delay_s")?,
        bandwidth_hz: value.get("bandwidth_hz")?.as_f64(),
    })
}

fn text(value: &Value, key: &str) -> Option<String> {
    Some(value.get(key)?.as_str()?.to_owned())
}

fn small<T: TryFrom<u64>>(value: &Value, key: &str) -> Option<T> {
    T::try_from(value.get(key)?.as_u64()?).ok()
}

/// JSON has no NaN: what a device could not state is `null` there.
fn number(value: &Value, key: &str) -> Option<f64> {
    let found = value.get(key)?;
    if found.is_null() { Some(f64::NAN) } else { found.as_f64() }
}
