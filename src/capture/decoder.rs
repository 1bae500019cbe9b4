//! One device's frames to what they say.
//!
//! Guarantees: any bytes are accepted, and nothing is dropped unseen. What cannot be used is handed on as
//! [`Captured::Rejected`], as received (without delimiters), with the reason; how many of those to keep is the caller's
//! choice. Samples missing by a stream's own indices become a [`Captured::Gap`] before the block that shows it; nothing
//! is ever filled in. The result depends on the bytes alone, not on how reads cut them (the host times apart).
//!
//! Refuses: samples before the description they name (their bytes are kept, and the gap covers them), frames that only a
//! host sends (a sign that the port echoes), indices that run backward within one boot.

use std::collections::BTreeMap;

use firmware_protocol::{Deframed, Deframer, Frame, Header, MAX_COBS_LEN, Message, decode};

use super::sample::{
    Block, Captured, Counts, DeviceDescription, Edge, Gap, HostNs, Rejected, Status, StreamDescription, TimeReply,
};
use super::{description, unpack};

/// What a decoder has seen so far.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Counters {
    /// Bytes fed, delimiters included.
    pub bytes: u64,
    /// Frames received whole, also those refused for what they say.
    pub frames: u64,
    /// Refusals by reason.
    pub refused: BTreeMap<&'static str, u64>,
    /// Frames of kinds this version does not know; skipped.
    pub unknown_kinds: u64,
    /// Frames that the sequence numbers show to be lost.
    pub lost_frames: u64,
    /// Samples that the indices show to be missing, over all streams.
    pub missing: u64,
    /// Places where they are missing.
    pub gaps: u64,
}

/// Decodes the bytes of one device that speaks frames.
#[derive(Debug)]
pub struct FrameDecoder {
    deframer: Deframer<Box<[u8]>>,
    /// The bytes of the frame at hand, as received; decoding in place overwrites them in the deframer.
    as_received: Vec<u8>,
    state: State,
}

#[derive(Debug, Default)]
struct State {
    boot_id: Option<u32>,
    description: Option<DeviceDescription>,
    streams: BTreeMap<u8, StreamState>,
    counters: Counters,
}

#[derive(Debug, Default)]
struct StreamState {
    next_sequence: Option<u32>,
    next_index: Option<u64>,
}

/// No stream gets so far in a device's life (two thousand years at 1 MHz), nor misses so much at once (12 days of that): a
/// block that says so is refused, and the stream goes on from where it was.
const INDEX_MAX: u64 = 1 << 56;
const MISSING_MAX: u64 = 1 << 40;

/// Why a frame received whole is refused all the same.
type Refusal = &'static str;

const NO_DESCRIPTION: Refusal = "samples before their description";
const FROM_A_HOST: Refusal = "frame that only a host sends";
const BACKWARD: Refusal = "index runs backward";
const BEYOND: Refusal = "index beyond belief";
const ODD_SAMPLES: Refusal = "samples do not fit the description";
const OVERLONG: Refusal = "too long for a frame";
const CUT_OFF: Refusal = "cut off when the link was lost";

impl Default for FrameDecoder {
    fn default() -> Self {
        Self::new()
    }
}

impl FrameDecoder {
    pub fn new() -> Self {
        let deframer = Deframer::new(vec![0; MAX_COBS_LEN].into_boxed_slice());
        Self { deframer, as_received: Vec::with_capacity(MAX_COBS_LEN), state: State::default() }
    }

    /// A decoder that already knows the device, for bytes from the middle of a recording.
    pub fn knowing(description: DeviceDescription) -> Self {
        let mut decoder = Self::new();
        decoder.state.boot_id = Some(description.boot_id);
        decoder.state.description = Some(description);
        decoder
    }

    /// Takes the bytes of one read, stamped `host_ns`; hands on what they complete, in order.
    pub fn feed(&mut self, host_ns: HostNs, mut bytes: &[u8], sink: &mut impl FnMut(Captured)) {
        self.state.counters.bytes += bytes.len() as u64;
        while let Some(piece) = self.deframer.next_piece(&mut bytes) {
            match piece {
                Deframed::Frame(cobs) => {
                    self.as_received.clear();
                    self.as_received.extend_from_slice(cobs);
                    let refused = match decode(cobs) {
                        Ok(frame) => self.state.frame(host_ns, &frame, sink).err(),
                        Err(error) => Some(error.reason()),
                    };
                    if let Some(reason) = refused {
                        self.state.reject(host_ns, reason, &self.as_received, sink);
                    }
                }
                Deframed::Junk(junk) => self.state.reject(host_ns, OVERLONG, junk, sink),
            }
        }
    }

    /// The link is gone: bytes of an unfinished frame are rejected. Indices go on when the same boot comes back.
    pub fn link_lost(&mut self, host_ns: HostNs, sink: &mut impl FnMut(Captured)) {
        let partial = self.deframer.take_partial();
        if !partial.is_empty() {
            self.state.reject(host_ns, CUT_OFF, partial, sink);
        }
    }

    /// The description in force; `None` before the first and after a boot that was not described yet.
    pub fn description(&self) -> Option<&DeviceDescription> {
        self.state.description.as_ref().filter(|description| Some(description.boot_id) == self.state.boot_id)
    }

    pub fn counters(&self) -> &Counters {
        &self.state.counters
    }
}

impl State {
    fn reject(&mut self, host_ns: HostNs, reason: Refusal, bytes: &[u8], sink: &mut impl FnMut(Captured)) {
        *self.counters.refused.entry(reason).or_default() += 1;
        sink(Captured::Rejected(Rejected { host_ns, reason, bytes: bytes.to_vec() }));
    }

    fn frame(&mut self, host_ns: HostNs, frame: &Frame<'_>, sink: &mut impl FnMut(Captured)) -> Result<(), Refusal> {
        self.counters.frames += 1;
        let header = &frame.header;
        if matches!(
            frame.message,
            Message::DescribeRequest | Message::Start | Message::Stop | Message::TimeRequest(_) | Message::SetRate(_)
        ) {
            return Err(FROM_A_HOST);
        }
        self.follow_boot(header.boot_id);
        self.count_lost_frames(header);
        match &frame.message {
            Message::Describe(describe) => self.describe(description::owned(header, describe)?, sink),
            Message::Block(block) => self.block(host_ns, frame, block, sink)?,
            message => match plain(host_ns, header.boot_id, message) {
                Some(captured) => sink(captured),
                None => self.counters.unknown_kinds += 1,
            },
        }
        Ok(())
    }

    fn describe(&mut self, described: DeviceDescription, sink: &mut impl FnMut(Captured)) {
        if self.description.as_ref() != Some(&described) {
            self.description = Some(described.clone());
            sink(Captured::Description(described));
        }
    }

    /// A new boot starts indices and sequences afresh.
    fn follow_boot(&mut self, boot_id: u32) {
        if self.boot_id != Some(boot_id) {
            self.boot_id = Some(boot_id);
            self.streams.clear();
        }
    }

    fn count_lost_frames(&mut self, header: &Header) {
        let stream = self.streams.entry(header.stream).or_default();
        let ahead = stream.next_sequence.map_or(0, |next| header.sequence.wrapping_sub(next));
        if ahead <= u32::MAX / 2 {
            self.counters.lost_frames += u64::from(ahead);
        }
        stream.next_sequence = Some(header.sequence.wrapping_add(1));
    }

    fn block(
        &mut self,
        host_ns: HostNs,
        frame: &Frame<'_>,
        block: &firmware_protocol::Block<'_>,
        sink: &mut impl FnMut(Captured),
    ) -> Result<(), Refusal> {
        let header = &frame.header;
        if block.first_index > INDEX_MAX {
            return Err(BEYOND);
        }
        let stream = self.streams.entry(header.stream).or_default();
        let next_index = *stream.next_index.get_or_insert(block.first_index);
        let described = stream_of(self.description.as_ref(), header).ok_or(NO_DESCRIPTION)?;
        let n_missing = block.first_index.checked_sub(next_index).ok_or(BACKWARD)?;
        if n_missing > MISSING_MAX {
            return Err(BEYOND);
        }
        let next_index = block.first_index.checked_add(block.n_samples.into()).ok_or(BACKWARD)?;
        let counts = unpack::unpack(block.samples, block.n_samples.into(), described).ok_or(ODD_SAMPLES)?;
        if n_missing > 0 {
            self.counters.missing = self.counters.missing.saturating_add(n_missing);
            self.counters.gaps += 1;
            sink(Captured::Gap(Gap {
                host_ns,
                boot_id: header.boot_id,
                stream: header.stream,
                first_missing_index: block.first_index - n_missing,
                n_missing,
            }));
        }
        stream.next_index = Some(next_index);
        sink(Captured::Block(owned_block(host_ns, frame, block, counts)));
        Ok(())
    }
}

/// The stream that the header names, if `description` is the one it names.
fn stream_of<'d>(description: Option<&'d DeviceDescription>, header: &Header) -> Option<&'d StreamDescription> {
    description
        .filter(|known| (known.boot_id, known.description_id) == (header.boot_id, header.description_id))?
        .streams
        .iter()
        .find(|described| described.stream == header.stream)
}

fn owned_block(host_ns: HostNs, frame: &Frame<'_>, block: &firmware_protocol::Block<'_>, counts: Vec<Counts>) -> Block {
    Block {
        host_ns,
        boot_id: frame.header.boot_id,
        description_id: frame.header.description_id,
        stream: frame.header.stream,
        sequence: frame.header.sequence,
        first_index: block.first_index,
        first_tick: block.tick,
        sent_tick: block.sent_tick,
        n_samples: block.n_samples.into(),
        overruns: block.overruns,
        crc: frame.crc,
        counts,
    }
}

/// Messages that need nothing but themselves; `None` for a kind this version does not know.
fn plain(host_ns: HostNs, boot_id: u32, message: &Message<'_>) -> Option<Captured> {
    Some(match message {
        Message::Edge(edge) => {
            Captured::Edge(Edge { host_ns, boot_id, input: edge.input, rising: edge.rising, tick: edge.tick })
        }
        Message::Status(status) => Captured::Status(Status {
            host_ns,
            boot_id,
            tick: status.tick,
            temperature_c: status.temperature_c,
            supply_v: status.supply_v,
            excitation_v: status.excitation_v,
            overruns: status.overruns,
        }),
        Message::TimeReply(reply) => Captured::TimeReply(TimeReply {
            host_ns,
            boot_id,
            token: reply.token,
            received_tick: reply.received_tick,
            sent_tick: reply.sent_tick,
        }),
        Message::Text(text) => Captured::Text { host_ns, text: (*text).to_owned() },
        _ => return None,
    })
}

#[cfg(test)]
mod tests;
