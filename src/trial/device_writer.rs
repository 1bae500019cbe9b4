//! `/raw/<device>`: counts as received, the blocks they came in, and what is missing or was refused.

use std::collections::BTreeSet;

use hdf5::Group;

use super::attribute::{new_group, put_number, put_text, put_text_dataset};
use super::column::{Column, SAMPLES_PER_CHUNK};
use super::content::{BlockRow, TextLine};
use super::description::{encoding_word, to_json};
use super::digest::{DatasetDigest, group_digest};
use super::error::TrialError;
use super::link_health::{self, LinkHealth};
use super::names::free_member_name;
use super::schema::{
    BlockTable, EdgeTable, GapTable, RESERVED, RejectedRow, RejectedTable, StatusTable, TextLineTable,
};
use super::table::Table;
use crate::capture::{ChannelDescription, Counts, DeviceDescription, Edge, Encoding, Gap, Rejected, Status};

/// Refused bytes kept a device; what is beyond is counted.
const REJECTED_BYTES_MAX: u64 = 1 << 20;
const REJECTED_ROWS_MAX: u64 = 10_000;

/// Which channels blocks carry, as far as unpacking them goes: (stream, name, encoding).
type Layout = Vec<(u8, String, Encoding)>;

enum CountColumn {
    Integer(Column<i32>),
    Float(Column<f32>),
}

struct ChannelWriter {
    stream: u8,
    layout: u16,
    dataset: String,
    counts: CountColumn,
}

struct RejectedWriter {
    group: Group,
    rows: RejectedTable,
    bytes: Column<u8>,
    n_bytes: u64,
    n_rows: u64,
    not_kept: u64,
}

pub(super) struct DeviceWriter {
    group: Group,
    blocks: BlockTable,
    gaps: GapTable,
    edges: EdgeTable,
    statuses: StatusTable,
    text_lines: TextLineTable,
    rejected: RejectedWriter,
    descriptions: Group,
    n_descriptions: u32,
    layouts: Vec<Layout>,
    channels: Vec<ChannelWriter>,
    taken: BTreeSet<String>,
    digests: Vec<DatasetDigest>,
}

impl DeviceWriter {
    pub(super) fn create(raw: &Group, member: &str, device: &str) -> Result<Self, TrialError> {
        let group = new_group(raw, member, "NXcollection")?;
        put_text(&group, "device", device)?;
        let table = |name: &str| new_group(&group, name, "NXcollection");
        Ok(Self {
            blocks: BlockTable::create(&table("blocks")?)?,
            gaps: GapTable::create(&table("gaps")?)?,
            edges: EdgeTable::create(&table("edges")?)?,
            statuses: StatusTable::create(&table("status")?)?,
            text_lines: TextLineTable::create(&table("text_lines")?)?,
            rejected: RejectedWriter::create(table("rejected")?)?,
            descriptions: table("descriptions")?,
            n_descriptions: 0,
            layouts: Vec::new(),
            channels: Vec::new(),
            taken: RESERVED.iter().map(|name| (*name).to_owned()).collect(),
            digests: Vec::new(),
            group,
        })
    }

    /// Keeps the description and gives the number of its layout; a new layout opens new datasets.
    pub(super) fn describe(&mut self, description: &DeviceDescription) -> Result<u16, TrialError> {
        self.keep_description(description)?;
        let layout: Layout = description
            .streams
            .iter()
            .flat_map(|s| s.channels.iter().map(|c| (s.stream, c.name.clone(), c.encoding)))
            .collect();
        if let Some(known) = self.layouts.iter().position(|other| *other == layout) {
            return Ok(known as u16);
        }
        let number = self.layouts.len() as u16;
        for stream in &description.streams {
            for channel in &stream.channels {
                self.open_channel(stream.stream, number, channel)?;
            }
        }
        self.layouts.push(layout);
        Ok(number)
    }

    fn keep_description(&mut self, description: &DeviceDescription) -> Result<(), TrialError> {
        let name = format!("{:04}", self.n_descriptions);
        let json = to_json(description);
        put_text_dataset(&self.descriptions, &name, &json)?;
        self.digests.push(DatasetDigest::of_text(&format!("descriptions/{name}"), &json));
        self.n_descriptions += 1;
        Ok(())
    }

    fn open_channel(&mut self, stream: u8, layout: u16, channel: &ChannelDescription) -> Result<(), TrialError> {
        let dataset = free_member_name(&channel.name, |name| self.taken.contains(name));
        let counts = match channel.encoding {
            Encoding::F32 => CountColumn::Float(Column::create(&self.group, &dataset, "count", SAMPLES_PER_CHUNK)?),
            _ => CountColumn::Integer(Column::create(&self.group, &dataset, "count", SAMPLES_PER_CHUNK)?),
        };
        let at = match &counts {
            CountColumn::Integer(column) => column.dataset(),
            CountColumn::Float(column) => column.dataset(),
        };
        put_text(at, "channel", &channel.name)?;
        put_text(at, "encoding", encoding_word(channel.encoding))?;
        put_number(at, "stream", stream)?;
        put_number(at, "layout", layout)?;
        self.taken.insert(dataset.clone());
        self.channels.push(ChannelWriter { stream, layout, dataset, counts });
        Ok(())
    }

    pub(super) fn block(&mut self, row: &BlockRow, counts: &[Counts]) -> Result<(), TrialError> {
        let object = self.group.name();
        let of_block = |channel: &&mut ChannelWriter| channel.stream == row.stream && channel.layout == row.layout;
        let channels: Vec<&mut ChannelWriter> = self.channels.iter_mut().filter(of_block).collect();
        let (n_channels, n_samples) = (channels.len(), row.n_samples);
        let shape = |found| TrialError::BlockShape { object: object.clone(), n_samples, n_channels, found };
        if n_channels != counts.len() {
            return Err(shape(counts.len()));
        }
        if let Some(odd) = counts.iter().map(n_counts).find(|n| *n != n_samples as usize) {
            return Err(shape(odd));
        }
        for (channel, counts) in channels.into_iter().zip(counts) {
            match (&mut channel.counts, counts) {
                (CountColumn::Integer(column), Counts::Integer(values)) => column.extend(values)?,
                (CountColumn::Float(column), Counts::Float(values)) => column.extend(values)?,
                _ => return Err(shape(0)),
            }
        }
        self.blocks.push(row)
    }

    pub(super) fn gap(&mut self, gap: &Gap) -> Result<(), TrialError> {
        self.gaps.push(gap)
    }

    pub(super) fn edge(&mut self, edge: &Edge) -> Result<(), TrialError> {
        self.edges.push(edge)
    }

    pub(super) fn status(&mut self, status: &Status) -> Result<(), TrialError> {
        self.statuses.push(status)
    }

    pub(super) fn text_line(&mut self, line: &TextLine) -> Result<(), TrialError> {
        self.text_lines.push(line)
    }

    pub(super) fn rejected(&mut self, rejected: &Rejected) -> Result<(), TrialError> {
        self.rejected.push(rejected)
    }

    pub(super) fn link_health(&self, health: &LinkHealth) -> Result<(), TrialError> {
        link_health::write(&self.group, health)
    }

    /// Ends the device; gives its digest in hex.
    pub(super) fn finish(mut self) -> Result<String, TrialError> {
        let mut digests = std::mem::take(&mut self.digests);
        for channel in self.channels {
            digests.push(match channel.counts {
                CountColumn::Integer(column) => column.finish(&channel.dataset)?,
                CountColumn::Float(column) => column.finish(&channel.dataset)?,
            });
        }
        self.rejected.finish(&mut digests)?;
        digests.extend(self.blocks.finish("blocks")?);
        digests.extend(self.gaps.finish("gaps")?);
        digests.extend(self.edges.finish("edges")?);
        digests.extend(self.statuses.finish("status")?);
        digests.extend(self.text_lines.finish("text_lines")?);
        let digest = group_digest(digests);
        put_text(&self.group, "sha256", &digest)?;
        Ok(digest)
    }
}

impl RejectedWriter {
    fn create(group: Group) -> Result<Self, TrialError> {
        let rows = RejectedTable::create(&group)?;
        let bytes = Column::create(&group, "bytes", "byte", SAMPLES_PER_CHUNK)?;
        Ok(Self { group, rows, bytes, n_bytes: 0, n_rows: 0, not_kept: 0 })
    }

    fn push(&mut self, rejected: &Rejected) -> Result<(), TrialError> {
        let n = rejected.bytes.len() as u64;
        if self.n_rows >= REJECTED_ROWS_MAX || self.n_bytes + n > REJECTED_BYTES_MAX {
            self.not_kept += 1;
            return Ok(());
        }
        let (host_ns, reason) = (rejected.host_ns, rejected.reason.to_owned());
        self.rows.push(&RejectedRow { host_ns, reason, offset: self.n_bytes, length: n as u32 })?;
        self.bytes.extend(&rejected.bytes)?;
        self.n_bytes += n;
        self.n_rows += 1;
        Ok(())
    }

    fn finish(self, digests: &mut Vec<DatasetDigest>) -> Result<(), TrialError> {
        put_number(&self.group, "not_kept", self.not_kept)?;
        digests.extend(self.rows.finish("rejected")?);
        digests.push(self.bytes.finish("rejected/bytes")?);
        Ok(())
    }
}

fn n_counts(counts: &Counts) -> usize {
    match counts {
        Counts::Integer(values) => values.len(),
        Counts::Float(values) => values.len(),
    }
}
