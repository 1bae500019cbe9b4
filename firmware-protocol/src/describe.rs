//! A device's description of itself: its clock, its streams, their channels.
//!
//! One set of types serves both ways: a writer gives slices, a reader walks the received bytes in place. A received list
//! was checked when its frame was decoded, so walking it cannot fail.

use crate::reader::Reader;
use crate::writer::FrameWriter;
use crate::{DecodeError, EncodeError};

/// How a channel packs one sample, little-endian.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
#[repr(u8)]
pub enum Encoding {
    I16 = 1,
    /// Two's complement in three bytes.
    I24 = 2,
    I32 = 3,
    F32 = 4,
}

impl Encoding {
    /// Bytes of one sample.
    pub const fn width(self) -> usize {
        match self {
            Self::I16 => 2,
            Self::I24 => 3,
            Self::I32 | Self::F32 => 4,
        }
    }

    const fn from_byte(byte: u8) -> Option<Self> {
        match byte {
            1 => Some(Self::I16),
            2 => Some(Self::I24),
            3 => Some(Self::I32),
            4 => Some(Self::F32),
            _ => None,
        }
    }
}

/// What a device says of itself. The header's boot id and description id name this description in later frames.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Describe<'a> {
    /// Never changes for one board (a chip's serial number, say).
    pub device_id: u64,
    pub name: &'a str,
    /// Name and version of the firmware.
    pub firmware: &'a str,
    /// Nominal rate of the device's clock.
    pub tick_rate_hz: f64,
    /// How far the true rate may be from the nominal one, parts per million.
    pub tick_tolerance_ppm: f32,
    pub streams: Streams<'a>,
}

/// Channels that are sampled together.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Stream<'a> {
    /// 1 to 255; the header of the stream's blocks carries it.
    pub id: u8,
    /// Nominal ticks from one sample to the next.
    pub ticks_per_sample: u32,
    pub channels: Channels<'a>,
}

/// One channel of a stream.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Channel<'a> {
    pub name: &'a str,
    /// What is measured, in a word: `force`, `position`, `acceleration`.
    pub quantity: &'a str,
    pub encoding: Encoding,
    /// Smallest value the channel can give before it saturates, in counts.
    pub nominal_min: f64,
    /// Largest value the channel can give before it saturates, in counts.
    pub nominal_max: f64,
    /// By how much a sample is later than what it shows, seconds.
    pub group_delay_s: f32,
    /// −3 dB bandwidth of the anti-alias filter; `None` when it is not known (0 on the wire).
    pub bandwidth_hz: Option<f32>,
}

const CHANNEL_FIXED_LEN: usize = 1 + 1 + 1 + 8 + 8 + 4 + 4;
const STREAM_FIXED_LEN: usize = 1 + 4 + 1;
const RECORD_LEN_LEN: usize = 2;

impl<'a> Describe<'a> {
    pub(crate) fn write(&self, to: &mut FrameWriter<'_>) -> Result<(), EncodeError> {
        to.u64(self.device_id)?;
        to.string(self.name)?;
        to.string(self.firmware)?;
        to.f64(self.tick_rate_hz)?;
        to.f32(self.tick_tolerance_ppm)?;
        to.count("streams", self.streams.iter().count())?;
        self.streams.iter().try_for_each(|stream| stream.write(to))
    }

    pub(crate) fn read(from: &mut Reader<'a>) -> Result<Self, DecodeError> {
        let device_id = from.u64("device id")?;
        let name = from.string("device name")?;
        let firmware = from.string("firmware name")?;
        let tick_rate_hz = from.f64("tick rate")?;
        if !(tick_rate_hz.is_finite() && tick_rate_hz > 0.0) {
            return Err(from.bad("tick rate"));
        }
        let tick_tolerance_ppm = from.f32("tick tolerance")?;
        if !(tick_tolerance_ppm.is_finite() && tick_tolerance_ppm >= 0.0) {
            return Err(from.bad("tick tolerance"));
        }
        let count = from.u8("number of streams")?;
        let streams = Streams(List::Received { records: *from, count });
        for _ in 0..count {
            Stream::read(&mut from.record("stream")?)?;
        }
        Ok(Self { device_id, name, firmware, tick_rate_hz, tick_tolerance_ppm, streams })
    }
}

impl<'a> Stream<'a> {
    /// Bytes of one sample of all channels.
    pub fn sample_len(&self) -> usize {
        self.channels.iter().map(|channel| channel.encoding.width()).sum()
    }

    fn record_len(&self) -> usize {
        let channels: usize = self.channels.iter().map(|channel| RECORD_LEN_LEN + channel.record_len()).sum();
        STREAM_FIXED_LEN + channels
    }

    fn write(&self, to: &mut FrameWriter<'_>) -> Result<(), EncodeError> {
        to.record_len(self.record_len())?;
        to.u8(self.id)?;
        to.u32(self.ticks_per_sample)?;
        to.count("channels", self.channels.iter().count())?;
        self.channels.iter().try_for_each(|channel| channel.write(to))
    }

    fn read(from: &mut Reader<'a>) -> Result<Self, DecodeError> {
        let id = from.u8("stream id")?;
        let ticks_per_sample = from.u32("ticks per sample")?;
        if ticks_per_sample == 0 {
            return Err(from.bad("ticks per sample"));
        }
        let count = from.u8("number of channels")?;
        let channels = Channels(List::Received { records: *from, count });
        for _ in 0..count {
            Channel::read(&mut from.record("channel")?)?;
        }
        Ok(Self { id, ticks_per_sample, channels })
    }
}

impl<'a> Channel<'a> {
    fn record_len(&self) -> usize {
        CHANNEL_FIXED_LEN + self.name.len() + self.quantity.len()
    }

    fn write(&self, to: &mut FrameWriter<'_>) -> Result<(), EncodeError> {
        to.record_len(self.record_len())?;
        to.string(self.name)?;
        to.string(self.quantity)?;
        to.u8(self.encoding as u8)?;
        to.f64(self.nominal_min)?;
        to.f64(self.nominal_max)?;
        to.f32(self.group_delay_s)?;
        to.f32(self.bandwidth_hz.unwrap_or(0.0))
    }

    fn read(from: &mut Reader<'a>) -> Result<Self, DecodeError> {
        let name = from.string("channel name")?;
        let quantity = from.string("quantity")?;
        let encoding = Encoding::from_byte(from.u8("encoding")?).ok_or(from.bad("encoding"))?;
        let nominal_min = from.f64("nominal range")?;
        let nominal_max = from.f64("nominal range")?;
        let group_delay_s = from.f32("group delay")?;
        if !group_delay_s.is_finite() {
            return Err(from.bad("group delay"));
        }
        let bandwidth_hz = Some(from.f32("bandwidth")?).filter(|hz| hz.is_finite() && *hz > 0.0);
        Ok(Self { name, quantity, encoding, nominal_min, nominal_max, group_delay_s, bandwidth_hz })
    }
}

#[derive(Debug, Clone, Copy)]
enum List<'a, T> {
    Given(&'a [T]),
    Received { records: Reader<'a>, count: u8 },
}

impl<'a, T: Copy> List<'a, T> {
    fn advance(&mut self, read: fn(&mut Reader<'a>) -> Result<T, DecodeError>) -> Option<T> {
        match self {
            Self::Given(items) => {
                let (first, rest) = items.split_first()?;
                *items = rest;
                Some(*first)
            }
            Self::Received { records, count } => {
                *count = count.checked_sub(1)?;
                records.record("record").and_then(|mut record| read(&mut record)).ok()
            }
        }
    }
}

macro_rules! list_of {
    ($list:ident, $iter:ident, $item:ident, $doc:literal) => {
        #[doc = $doc]
        #[derive(Debug, Clone, Copy)]
        pub struct $list<'a>(List<'a, $item<'a>>);

        #[doc = concat!("Walks [`", stringify!($list), "`].")]
        #[derive(Debug, Clone)]
        pub struct $iter<'a>(List<'a, $item<'a>>);

        impl<'a> $list<'a> {
            /// A list to be written.
            pub const fn given(items: &'a [$item<'a>]) -> Self {
                Self(List::Given(items))
            }

            pub fn iter(&self) -> $iter<'a> {
                $iter(self.0)
            }
        }

        impl<'a> Iterator for $iter<'a> {
            type Item = $item<'a>;

            fn next(&mut self) -> Option<Self::Item> {
                self.0.advance($item::read)
            }
        }

        impl<'a> IntoIterator for $list<'a> {
            type Item = $item<'a>;
            type IntoIter = $iter<'a>;

            fn into_iter(self) -> Self::IntoIter {
                self.iter()
            }
        }

        impl PartialEq for $list<'_> {
            fn eq(&self, other: &Self) -> bool {
                self.iter().eq(other.iter())
            }
        }
    };
}

list_of!(Streams, StreamsIter, Stream, "The streams of a description: given as a slice, or read in place.");
list_of!(Channels, ChannelsIter, Channel, "The channels of a stream: given as a slice, or read in place.");
