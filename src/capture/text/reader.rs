//! The line reader and the description that a rig file's text instrument amounts to.

use regex::Regex;

use super::line::{Cut, LineReader};
use crate::capture::sample::{ChannelDescription, DeviceDescription, Encoding, StreamDescription, TimeBase};
use crate::rig::{Device, LineCut, TIME_GROUP, TextInstrument};

/// Text devices have one stream.
pub(super) const STREAM: u8 = 1;
/// Ticks are nanoseconds.
pub(super) const TICK_RATE_HZ: f64 = 1e9;
/// What a printed time's clock is believed to keep: ceramic resonators are within 0.5 % (common practice, no published
/// source).
const PRINTED_TOLERANCE_PPM: f64 = 10_000.0;
/// What an arrival may be late by: a USB adapter's timer of 16 ms and 4 ms of the host's (field experience, no published
/// source); a line is as likely anywhere in it.
const HELD_BACK_NS: f64 = 2e7;
/// Letters of a usual line.
const USUAL_LINE_LEN: f64 = 24.0;

pub(super) fn line_reader(instrument: &TextInstrument) -> LineReader {
    let (cut, n_fields) = match &instrument.cut {
        LineCut::At { separator, n_fields } => (Cut::At(*separator), *n_fields),
        LineCut::Spaces { n_fields } => (Cut::Spaces, *n_fields),
        LineCut::Pattern(pattern) => match Regex::new(pattern) {
            Ok(pattern) => (Cut::Pattern(pattern), 0),
            // The rig room lets no other through; every line would be refused, and shown.
            Err(_) => (Cut::Spaces, usize::MAX),
        },
    };
    let place = |field: usize, group: &str| match &cut {
        Cut::Pattern(pattern) => pattern.capture_names().position(|name| name == Some(group)).unwrap_or(usize::MAX),
        _ => field.saturating_sub(1),
    };
    LineReader {
        values: instrument.columns.iter().map(|column| place(column.field, &column.name)).collect(),
        time: instrument.time.map(|time| place(time.field, TIME_GROUP)),
        n_fields,
        decimal_comma: instrument.decimal_comma,
        cut,
    }
}

/// Time that one byte takes on the line.
pub(super) fn byte_ns(device: &Device) -> f64 {
    device.serial.byte_s(device.baud) * 1e9
}

/// Numbers are kept as 32-bit floats, which hold seven digits; the lines themselves are kept beside them.
pub(super) fn description(device: &Device, instrument: &TextInstrument, boot_id: u32) -> DeviceDescription {
    let channel = |column: &crate::rig::TextColumn| ChannelDescription {
        name: column.name.clone(),
        quantity: column.unit.map_or_else(|| "count".to_owned(), |unit| format!("printed in {}", unit.symbol)),
        encoding: Encoding::F32,
        nominal_min: column.least.unwrap_or(f64::NAN),
        nominal_max: column.greatest.unwrap_or(f64::NAN),
        group_delay_s: column.delay_s.unwrap_or(instrument.delay_s),
        bandwidth_hz: column.bandwidth_hz.or(instrument.bandwidth_hz),
    };
    let channels = instrument.columns.iter().map(channel).collect();
    let ticks_per_sample = (instrument.interval_s * TICK_RATE_HZ).round().clamp(1.0, f64::from(u32::MAX)) as u32;
    DeviceDescription {
        device_id: 0,
        name: device.name.clone(),
        firmware: "text".to_owned(),
        tick_rate_hz: TICK_RATE_HZ,
        tick_tolerance_ppm: if instrument.time.is_some() { PRINTED_TOLERANCE_PPM } else { 0.0 },
        boot_id,
        description_id: 1,
        streams: vec![StreamDescription { stream: STREAM, ticks_per_sample, channels }],
        time_base: time_base(device, instrument),
    }
}

fn time_base(device: &Device, instrument: &TextInstrument) -> TimeBase {
    // An adapter that knows no baud rate sends the line at once: half its time is taken off, half may be wrong.
    let wire_ns = USUAL_LINE_LEN * byte_ns(device);
    let stated_ns = instrument.arrival_uncertainty_s.map(|u_s| 3_f64.sqrt() * u_s * 1e9);
    if instrument.time.is_some() {
        return TimeBase::Printed { hidden_delay_ns: stated_ns.map_or(wire_ns, |stated_ns| 2.0 * stated_ns) };
    }
    TimeBase::Arrival { half_width_ns: stated_ns.unwrap_or(0.5 * (HELD_BACK_NS + wire_ns)) }
}
