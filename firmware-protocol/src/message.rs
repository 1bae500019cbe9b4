//! What frames say. Layouts: SPEC.md, section "Payloads".

use crate::reader::Reader;
use crate::writer::FrameWriter;
use crate::{DecodeError, Describe, EncodeError};

/// Kinds of frames, as the second byte of the header says. From the host when the highest bit is set.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[repr(u8)]
pub enum Kind {
    Describe = 1,
    Block = 2,
    Edge = 3,
    Status = 4,
    TimeReply = 5,
    Text = 6,
    DescribeRequest = 0x81,
    Start = 0x82,
    Stop = 0x83,
    TimeRequest = 0x84,
    SetRate = 0x85,
}

impl Kind {
    /// The kind that a header's byte names; `None` for one this version does not know.
    pub const fn from_byte(byte: u8) -> Option<Self> {
        Some(match byte {
            0x01 => Self::Describe,
            0x02 => Self::Block,
            0x03 => Self::Edge,
            0x04 => Self::Status,
            0x05 => Self::TimeReply,
            0x06 => Self::Text,
            0x81 => Self::DescribeRequest,
            0x82 => Self::Start,
            0x83 => Self::Stop,
            0x84 => Self::TimeRequest,
            0x85 => Self::SetRate,
            _ => return None,
        })
    }

    /// The kind as SPEC.md names it.
    pub const fn word(self) -> &'static str {
        match self {
            Self::Describe => "describe",
            Self::Block => "block",
            Self::Edge => "edge",
            Self::Status => "status",
            Self::TimeReply => "time reply",
            Self::Text => "text",
            Self::DescribeRequest => "describe?",
            Self::Start => "start",
            Self::Stop => "stop",
            Self::TimeRequest => "time request",
            Self::SetRate => "set rate",
        }
    }
}

/// A message, borrowing what it carries.
#[derive(Debug, Clone, Copy, PartialEq)]
#[non_exhaustive]
pub enum Message<'a> {
    Describe(Describe<'a>),
    /// Its stream is the header's.
    Block(Block<'a>),
    Edge(Edge),
    Status(Status),
    TimeReply(TimeReply),
    /// A line for people, at most 255 bytes.
    Text(&'a str),
    /// The host asks for a description.
    DescribeRequest,
    /// The host asks for blocks of all streams.
    Start,
    /// The host asks for silence; descriptions and time replies still come.
    Stop,
    TimeRequest(TimeRequest),
    SetRate(SetRate),
    /// A kind this version does not know; not an error.
    Unknown {
        kind: u8,
        payload: &'a [u8],
    },
}

/// Consecutive samples of one stream.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Block<'a> {
    /// Index of the first sample in its stream since boot; dropped samples are counted too.
    pub first_index: u64,
    /// Tick of the first sample.
    pub tick: u64,
    /// Tick when the block was handed to the port.
    pub sent_tick: u64,
    /// Samples of this stream that the device had to drop since boot.
    pub overruns: u32,
    pub n_samples: u16,
    /// Bytes of one sample of all channels.
    pub sample_len: u16,
    /// `n_samples · sample_len` bytes: all channels of the first sample in the order of the description, then the next.
    pub samples: &'a [u8],
}

/// A digital input changed.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Edge {
    pub input: u8,
    pub rising: bool,
    pub tick: u64,
}

/// How the device is. Values it does not measure are NaN.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Status {
    pub tick: u64,
    pub temperature_c: f32,
    pub supply_v: f32,
    pub excitation_v: f32,
    /// Samples dropped since boot, over all streams.
    pub overruns: u32,
}

/// Answer to a [`TimeRequest`].
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct TimeReply {
    /// The request's.
    pub token: u32,
    /// Tick when the request's last byte had come in.
    pub received_tick: u64,
    /// Tick when the reply was handed to the port.
    pub sent_tick: u64,
}

/// The host asks for the device's time.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct TimeRequest {
    pub token: u32,
}

/// The host asks for another rate of one stream. The device answers with a description: one with a new id, or the old one
/// where it can't follow.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct SetRate {
    pub stream: u8,
    pub ticks_per_sample: u32,
}

impl<'a> Message<'a> {
    /// The header's kind byte.
    pub const fn kind(&self) -> u8 {
        match self {
            Self::Describe(_) => Kind::Describe as u8,
            Self::Block(_) => Kind::Block as u8,
            Self::Edge(_) => Kind::Edge as u8,
            Self::Status(_) => Kind::Status as u8,
            Self::TimeReply(_) => Kind::TimeReply as u8,
            Self::Text(_) => Kind::Text as u8,
            Self::DescribeRequest => Kind::DescribeRequest as u8,
            Self::Start => Kind::Start as u8,
            Self::Stop => Kind::Stop as u8,
            Self::TimeRequest(_) => Kind::TimeRequest as u8,
            Self::SetRate(_) => Kind::SetRate as u8,
            Self::Unknown { kind, .. } => *kind,
        }
    }

    pub(crate) fn write(&self, to: &mut FrameWriter<'_>) -> Result<(), EncodeError> {
        match self {
            Self::Describe(describe) => describe.write(to),
            Self::Block(block) => block.write(to),
            Self::Edge(edge) => {
                to.u8(edge.input)?;
                to.u8(edge.rising.into())?;
                to.u64(edge.tick)
            }
            Self::Status(status) => status.write(to),
            Self::TimeReply(reply) => {
                to.u32(reply.token)?;
                to.u64(reply.received_tick)?;
                to.u64(reply.sent_tick)
            }
            Self::Text(text) => to.string(text),
            Self::DescribeRequest | Self::Start | Self::Stop => Ok(()),
            Self::TimeRequest(request) => to.u32(request.token),
            Self::SetRate(set) => {
                to.u8(set.stream)?;
                to.u32(set.ticks_per_sample)
            }
            Self::Unknown { payload, .. } => to.bytes(payload),
        }
    }

    pub(crate) fn read(kind: u8, payload: &'a [u8]) -> Result<Self, DecodeError> {
        let from = &mut Reader::new(kind, payload);
        let Some(known) = Kind::from_byte(kind) else { return Ok(Self::Unknown { kind, payload }) };
        Ok(match known {
            Kind::Describe => Self::Describe(Describe::read(from)?),
            Kind::Block => Self::Block(Block::read(from)?),
            Kind::Edge => Self::Edge(Edge {
                input: from.u8("input")?,
                rising: match from.u8("direction")? {
                    0 => false,
                    1 => true,
                    _ => return Err(from.bad("direction")),
                },
                tick: from.u64("tick")?,
            }),
            Kind::Status => Self::Status(Status::read(from)?),
            Kind::TimeReply => Self::TimeReply(TimeReply {
                token: from.u32("token")?,
                received_tick: from.u64("receive tick")?,
                sent_tick: from.u64("send tick")?,
            }),
            Kind::Text => Self::Text(from.string("text")?),
            Kind::DescribeRequest => Self::DescribeRequest,
            Kind::Start => Self::Start,
            Kind::Stop => Self::Stop,
            Kind::TimeRequest => Self::TimeRequest(TimeRequest { token: from.u32("token")? }),
            Kind::SetRate => {
                Self::SetRate(SetRate { stream: from.u8("stream")?, ticks_per_sample: from.u32("ticks per sample")? })
            }
        })
    }
}

impl<'a> Block<'a> {
    fn write(&self, to: &mut FrameWriter<'_>) -> Result<(), EncodeError> {
        let expected = usize::from(self.n_samples) * usize::from(self.sample_len);
        if self.samples.len() != expected {
            let (n_samples, sample_len) = (self.n_samples, self.sample_len);
            return Err(EncodeError::SampleBytes { found: self.samples.len(), expected, n_samples, sample_len });
        }
        to.u64(self.first_index)?;
        to.u64(self.tick)?;
        to.u64(self.sent_tick)?;
        to.u32(self.overruns)?;
        to.u16(self.n_samples)?;
        to.u16(self.sample_len)?;
        to.bytes(self.samples)
    }

    fn read(from: &mut Reader<'a>) -> Result<Self, DecodeError> {
        let first_index = from.u64("first index")?;
        let tick = from.u64("tick")?;
        let sent_tick = from.u64("send tick")?;
        let overruns = from.u32("overruns")?;
        let n_samples = from.u16("number of samples")?;
        let sample_len = from.u16("sample length")?;
        let samples = from.take("samples", usize::from(n_samples) * usize::from(sample_len))?;
        Ok(Self { first_index, tick, sent_tick, overruns, n_samples, sample_len, samples })
    }
}

impl Status {
    fn write(&self, to: &mut FrameWriter<'_>) -> Result<(), EncodeError> {
        to.u64(self.tick)?;
        to.f32(self.temperature_c)?;
        to.f32(self.supply_v)?;
        to.f32(self.excitation_v)?;
        to.u32(self.overruns)
    }

    fn read(from: &mut Reader<'_>) -> Result<Self, DecodeError> {
        Ok(Self {
            tick: from.u64("tick")?,
            temperature_c: from.f32("temperature")?,
            supply_v: from.f32("supply")?,
            excitation_v: from.f32("excitation")?,
            overruns: from.u32("overruns")?,
        })
    }
}
