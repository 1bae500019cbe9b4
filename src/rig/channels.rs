//! Devices and channels of a rig file, and what ties them together.

use super::attached::Attached;
use super::document::{Findings, Section};
use super::record::{CalibrationRecord, RecordKind};
use super::resembling::advice;
use super::sections::coefficients;
use super::{Channel, Coefficients, Device, Protocol, Role, UncalibratedChannel, text_section};
use crate::units::{self, Unit};

/// Channels as they were read, with and without calibration.
#[derive(Default)]
pub(super) struct Channels {
    pub(super) calibrated: Vec<Channel>,
    pub(super) uncalibrated: Vec<UncalibratedChannel>,
    /// A channel's role or device could not be told: what seems to be missing may be meant by it.
    pub(super) unclear: bool,
}

pub(super) fn devices(root: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Vec<Device> {
    let mut devices: Vec<Device> = Vec::new();
    for (index, mut entry) in root.sections(findings, "device").into_iter().enumerate() {
        let key = entry.key("name");
        let device = device(&mut entry, findings);
        if let Some(earlier) = devices.iter().position(|other| !device.name.is_empty() && other.name == device.name) {
            findings.error(&key, format!("{:?} is already the name of device[{earlier}]", device.name));
        }
        if let Some(earlier) = devices.iter().position(|other| !device.port.is_empty() && other.port == device.port) {
            let message =
                format!("{:?} is already the port of device[{earlier}], a port serves one device", device.port);
            findings.error(&format!("device[{index}].port"), message);
        }
        entry.finish(findings);
        devices.push(device);
    }
    devices
}

fn device(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Device {
    let name = plain_name(entry, findings);
    let port = entry.text(findings, "port");
    if port.starts_with("/dev/ttyUSB") || port.starts_with("/dev/ttyACM") {
        let key = entry.key("port");
        findings.caution(
            &key,
            format!("{port} may name another device after a replug, prefer its link under /dev/serial/by-id/"),
        );
    }
    let baud = entry.number(findings, "baud", 300.0..=12_000_000.0) as u32;
    let serial = text_section::serial_settings(entry, findings);
    Device { name, port, baud, serial, protocol: protocol(entry, findings) }
}

fn protocol(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Protocol {
    let key = entry.key("protocol");
    let word = entry.text(findings, "protocol");
    match word.as_str() {
        "text" => {
            let table = entry.section(findings, "text");
            return Protocol::Text(Box::new(text_section::text_instrument(table, findings)));
        }
        "frames" | "" => {}
        _ => findings.error(&key, format!("{word:?} is not known, known: \"frames\", \"text\"")),
    }
    if entry.optional(findings, "text").is_some() {
        findings.error(&entry.key("text"), "is for a device that speaks text: protocol = \"text\"");
    }
    Protocol::Frames
}

/// A name that can stand in file paths and on screens.
pub(super) fn plain_name(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> String {
    plain_name_of(entry, findings, "name")
}

pub(super) fn plain_name_of(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>, key: &'static str) -> String {
    let name = entry.text(findings, key);
    let key = entry.key(key);
    let plain = |c: char| c.is_ascii_alphanumeric() || matches!(c, '-' | '_');
    if !name.chars().all(plain) || name.len() > 40 {
        findings.error(&key, format!("{name:?} must be letters, digits, \"-\" or \"_\", at most 40 of them"));
    }
    name
}

pub(super) fn channels(
    root: &mut Section<'_, '_>,
    findings: &mut Findings<'_>,
    devices: &[Device],
    attached: &[Attached],
) -> Channels {
    let mut channels = Channels::default();
    let mut names: Vec<String> = Vec::new();
    for (index, mut entry) in root.sections(findings, "channel").into_iter().enumerate() {
        let name = plain_name(&mut entry, findings);
        if let Some(earlier) = names.iter().position(|other| !name.is_empty() && *other == name) {
            findings.error(&entry.key("name"), format!("{name:?} is already the name of channel[{earlier}]"));
        }
        names.push(name.clone());
        let device = known_device(&mut entry, findings, devices);
        let device_channel = entry.text(findings, "device_channel");
        let role = role(&mut entry, findings);
        let printed = devices
            .iter()
            .find(|known| known.name == device)
            .and_then(|known| printed_unit(known, &device_channel, role, &entry.key("device_channel"), findings));
        let calibration = entry.optional_section(findings, "calibration");
        let pointer = entry.optional_text(findings, "record");
        let key = entry.key("record");
        if calibration.is_some() && pointer.is_some() {
            findings.error(&key, "stands beside calibration: keep the record, its coefficients count");
        }
        channels.unclear |= role.is_none() || !devices.iter().any(|known| known.name == device);
        if let Some(role) = role {
            let record = pointer.and_then(|pointer| record_of(&pointer, &key, (&name, role), attached, findings));
            let stated = calibration.map(|table| calibration_of(table, findings, role, printed));
            match record.as_ref().map(|record| record.coefficients.clone()).or(stated) {
                Some(calibration) => {
                    channels.calibrated.push(Channel { name, device, device_channel, role, calibration, record });
                }
                None => {
                    let message = "has no calibration: recorded as counts, never shown as a value";
                    findings.caution(&format!("channel[{index}]"), message);
                    channels.uncalibrated.push(UncalibratedChannel { name, device, device_channel, role });
                }
            }
        }
        entry.finish(findings);
    }
    channels
}

pub(super) fn known_device(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>, devices: &[Device]) -> String {
    let name = entry.text(findings, "device");
    if !name.is_empty() && !devices.iter().any(|device| device.name == name) {
        let advice = advice(&name, devices.iter().map(|device| device.name.as_str()));
        findings.error(&entry.key("device"), format!("there is no device {name:?} in this rig file{advice}"));
    }
    name
}

fn role(entry: &mut Section<'_, '_>, findings: &mut Findings<'_>) -> Option<Role> {
    let word = entry.text(findings, "role");
    let role = Role::ALL.into_iter().find(|role| role.word() == word);
    if role.is_none() && !word.is_empty() {
        let known = Role::ALL.map(Role::word);
        let advice = advice(&word, known.into_iter());
        let known = known.join(", ");
        findings.error(&entry.key("role"), format!("{word:?} is not a role{advice} (roles: {known})"));
    }
    role
}

/// The unit in which a text instrument prints the channel, where it fits the role; findings where the two do not.
fn printed_unit(
    device: &Device,
    device_channel: &str,
    role: Option<Role>,
    key: &str,
    findings: &mut Findings<'_>,
) -> Option<&'static Unit> {
    let Protocol::Text(instrument) = &device.protocol else { return None };
    let Some(column) = device.text_column(device_channel) else {
        if !device_channel.is_empty() {
            let advice = advice(device_channel, instrument.columns.iter().map(|column| column.name.as_str()));
            findings.error(key, format!("device {:?} has no column {device_channel:?}{advice}", device.name));
        }
        return None;
    };
    let (unit, wanted) = (column.unit?, Unit::named(role?.unit())?.dimension);
    match units::parse(&format!("1 {}", unit.symbol), wanted) {
        Ok(_) => Some(unit),
        Err(error) => {
            findings.error(key, format!("column {device_channel:?} does not fit the role: {error}"));
            None
        }
    }
}

/// The record that a channel points to; `None` with a finding where it can't be used: the channel has no values then.
fn record_of(
    pointer: &str,
    key: &str,
    (channel, role): (&str, Role),
    attached: &[Attached],
    findings: &mut Findings<'_>,
) -> Option<CalibrationRecord> {
    let Some(found) = attached.iter().find(|text| text.name == pointer) else {
        if !pointer.is_empty() {
            let message =
                format!("{pointer} can't be read: is it there, beside the rig file? the channel has no values");
            findings.caution(key, message);
        }
        return None;
    };
    let (record, wrong) = CalibrationRecord::read(pointer, &found.text);
    for finding in wrong {
        findings.error(key, format!("{pointer}:{finding}"));
    }
    let record = record?;
    let wanted = RecordKind::for_role(role);
    if record.kind != wanted {
        let (found, wanted) = (record.kind.word(), wanted.word());
        findings.error(key, format!("{pointer} is the record of a {found}, the role needs a {wanted}'s"));
    }
    if record.channel != channel {
        findings.error(key, format!("{pointer} is the record of channel {:?}, not of {channel:?}", record.channel));
    }
    Some(record)
}

/// A column printed in a unit needs no coefficients: the instrument's own scale is taken.
fn calibration_of(
    mut table: Section<'_, '_>,
    findings: &mut Findings<'_>,
    role: Role,
    printed: Option<&'static Unit>,
) -> Coefficients {
    let unit = role.unit();
    let zeros = -2_147_483_648.0..=2_147_483_647.0;
    let given = table.optional(findings, "coefficients").is_some();
    let (zero_counts, coefficients) = match printed.filter(|_| !given) {
        Some(printed) => {
            (table.optional_number(findings, "zero_counts", zeros).unwrap_or(0.0), vec![0.0, printed.si_from(1.0)])
        }
        None => (table.number(findings, "zero_counts", zeros), coefficients(&mut table, findings, unit)),
    };
    if !table.optional_flag(findings, "without_record") {
        let message = "coefficients stand without a calibration record: make one with `tautrail calibrate` and point to it with record; or \
                       write without_record = true, and check, display and every result say that nobody dated these values";
        findings.error(&table.key("without_record"), message);
    }
    let calibration = Coefficients {
        zero_counts,
        coefficients,
        zero_uncertainty: table.quantity(findings, "zero_uncertainty", unit, 0.0..=1e6),
        scale_relative_uncertainty: table.quantity(findings, "scale_uncertainty", "%", 0.0..=50.0),
    };
    table.finish(findings);
    calibration
}
