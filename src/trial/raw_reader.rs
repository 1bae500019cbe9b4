//! `/raw` read back: counts as they were received, and proof that they still are.

use super::attribute::{get_number, get_text, read_text};
use super::content::{BlockRow, DeviceRecord, RawChannel, RawCounts, RefusedBytes};
use super::description::{encoding_from_word, from_json};
use super::digest::{DatasetDigest, devices_digest, group_digest};
use super::error::TrialError;
use super::link_health;
use super::members::Members;
use super::reader::TrialFile;
use super::schema::{
    BlockTable, EdgeTable, GapTable, RESERVED, RejectedRow, RejectedTable, StatusTable, TextLineTable,
};
use super::table::Table;
use crate::capture::{Counts, Encoding};

/// A device's raw digest: as sealed, and as the file holds it now.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct RawDigest {
    pub device: String,
    /// The device's group in the file.
    member: String,
    pub sealed: String,
    pub found: String,
}

/// The digest over all devices, from what the file holds now.
pub fn whole_raw_digest(digests: &[RawDigest]) -> String {
    devices_digest(digests.iter().map(|digest| (digest.member.as_str(), digest.found.as_str())))
}

impl TrialFile {
    /// Devices in the file, in the order of their groups.
    pub fn device_names(&self) -> Result<Vec<String>, TrialError> {
        let raw = self.raw()?;
        raw.names().map(|member| get_text(raw.child(member)?.group(), "device")).collect()
    }

    fn device_group(&self, device: &str) -> Result<Members, TrialError> {
        let raw = self.raw()?;
        for member in raw.names() {
            let group = raw.child(member)?;
            if get_text(group.group(), "device")? == device {
                return Ok(group);
            }
        }
        Err(TrialError::NoSuch { object: format!("device {device:?}"), n_known: raw.names().count() })
    }

    pub fn blocks(&self, device: &str) -> Result<Vec<BlockRow>, TrialError> {
        BlockTable::read(&self.device_group(device)?.child("blocks")?)
    }

    pub fn raw_channels(&self, device: &str) -> Result<Vec<RawChannel>, TrialError> {
        let group = self.device_group(device)?;
        channel_members(&group).map(|dataset| raw_channel(&group, device, dataset)).collect()
    }

    /// Counts `from..to` of a channel, as received.
    pub fn counts(&self, channel: &RawChannel, from: usize, to: usize) -> Result<Counts, TrialError> {
        let group = self.device_group(&channel.device)?;
        match channel.encoding {
            Encoding::F32 => Ok(Counts::Float(group.column::<f32>(&channel.dataset)?.read(from, to)?)),
            _ => Ok(Counts::Integer(group.column::<i32>(&channel.dataset)?.read(from, to)?)),
        }
    }

    /// Every channel of a device with all its counts.
    pub fn all_counts(&self, device: &str) -> Result<Vec<RawCounts>, TrialError> {
        let channels = self.raw_channels(device)?.into_iter();
        channels.map(|channel| Ok(RawCounts { counts: self.counts(&channel, 0, channel.n_counts)?, channel })).collect()
    }

    /// Descriptions, gaps, edges, statuses, text lines and refusals of a device.
    pub fn device(&self, device: &str) -> Result<DeviceRecord, TrialError> {
        let group = self.device_group(device)?;
        let descriptions = group.child("descriptions")?;
        let description = |name: &str| from_json(name, &read_text(&descriptions.dataset(name)?)?);
        let rejected = group.child("rejected")?;
        Ok(DeviceRecord {
            device: device.to_owned(),
            descriptions: descriptions.names().map(description).collect::<Result<_, _>>()?,
            gaps: GapTable::read(&group.child("gaps")?)?,
            edges: EdgeTable::read(&group.child("edges")?)?,
            statuses: StatusTable::read(&group.child("status")?)?,
            text_lines: TextLineTable::read(&group.child("text_lines")?)?,
            rejected: refused_bytes(&rejected)?,
            rejected_not_kept: get_number(rejected.group(), "not_kept")?,
            link: link_health::read(group.group())?,
        })
    }

    /// Recomputes the digest of every raw group from what the file holds now.
    pub fn raw_digests(&self) -> Result<Vec<RawDigest>, TrialError> {
        let raw = self.raw()?;
        let digest = |member: &str| {
            let group = raw.child(member)?;
            let device = get_text(group.group(), "device")?;
            let sealed = get_text(group.group(), "sha256")?;
            Ok(RawDigest { device, member: member.to_owned(), sealed, found: group_digest(dataset_digests(&group)?) })
        };
        raw.names().map(digest).collect()
    }

    /// The digest over all devices, as sealed: what a report prints.
    pub fn sealed_raw_digest(&self) -> Result<String, TrialError> {
        get_text(self.raw()?.group(), "sha256")
    }
}

fn channel_members(group: &Members) -> impl Iterator<Item = &str> {
    group.names().filter(|name| !RESERVED.contains(name))
}

fn raw_channel(group: &Members, device: &str, dataset: &str) -> Result<RawChannel, TrialError> {
    let at = group.dataset(dataset)?;
    let word = get_text(&at, "encoding")?;
    let object = || format!("{}/encoding", at.name());
    let encoding = encoding_from_word(&word).ok_or_else(|| TrialError::UnknownWord { object: object(), word })?;
    let n_counts = match encoding {
        Encoding::F32 => group.column::<f32>(dataset)?.len(),
        _ => group.column::<i32>(dataset)?.len(),
    };
    Ok(RawChannel {
        device: device.to_owned(),
        name: get_text(&at, "channel")?,
        dataset: dataset.to_owned(),
        stream: get_number(&at, "stream")?,
        layout: get_number(&at, "layout")?,
        encoding,
        n_counts,
    })
}

fn refused_bytes(rejected: &Members) -> Result<Vec<RefusedBytes>, TrialError> {
    let bytes = rejected.column::<u8>("bytes")?.read_all()?;
    let refused = |row: RejectedRow| {
        let from = usize::try_from(row.offset).unwrap_or(usize::MAX);
        let part = bytes.get(from..from.saturating_add(row.length as usize));
        let part = part.ok_or_else(|| TrialError::Uneven {
            object: format!("{}/bytes", rejected.group().name()),
            found: bytes.len(),
            expected: from.saturating_add(row.length as usize),
        })?;
        Ok(RefusedBytes { host_ns: row.host_ns, reason: row.reason, bytes: part.to_vec() })
    };
    RejectedTable::read(rejected)?.into_iter().map(refused).collect()
}

fn dataset_digests(group: &Members) -> Result<Vec<DatasetDigest>, TrialError> {
    let mut digests = Vec::new();
    for name in channel_members(group) {
        let dataset = group.dataset(name)?;
        let encoding = get_text(&dataset, "encoding")?;
        digests.push(match encoding_from_word(&encoding) {
            Some(Encoding::F32) => group.column::<f32>(name)?.digest(name)?,
            _ => group.column::<i32>(name)?.digest(name)?,
        });
    }
    let descriptions = group.child("descriptions")?;
    for name in descriptions.names() {
        digests
            .push(DatasetDigest::of_text(&format!("descriptions/{name}"), &read_text(&descriptions.dataset(name)?)?));
    }
    let rejected = group.child("rejected")?;
    digests.push(rejected.column::<u8>("bytes")?.digest("rejected/bytes")?);
    digests.extend(RejectedTable::digests(&rejected, "rejected")?);
    digests.extend(BlockTable::digests(&group.child("blocks")?, "blocks")?);
    digests.extend(GapTable::digests(&group.child("gaps")?, "gaps")?);
    digests.extend(EdgeTable::digests(&group.child("edges")?, "edges")?);
    digests.extend(StatusTable::digests(&group.child("status")?, "status")?);
    digests.extend(TextLineTable::digests(&group.child("text_lines")?, "text_lines")?);
    Ok(digests)
}
