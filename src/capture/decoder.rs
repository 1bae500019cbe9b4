//! One device's frames to what they say.
//!
//! Guarantees: any bytes are accepted, and nothing is dropped unseen. What cannot be used is handed on as
//! [`Captured::Rejected`], as received (without delimiters), with the reason; how many of those to keep is the caller's
//! choice. Samples missing by a stream's own indices become a [`Captured::Gap`] before the block that shows it; nothing
//! is ever filled in. The result depends on the bytes alone, not on how reads cut them (the host times apart).
//!
//! Blocks may be packed by any of the last few descriptions of the present boot, so that firmware may describe a change
//! before the blocks it has queued are sent. A device that starts again under an old boot id is told apart from its run
//! before by sequences and ticks, and recorded under an id of its own.
//!
//! Refuses: samples whose description has not come (their bytes are kept, and the gap covers them), frames that only a host
//! sends (a sign that the port echoes), indices that run backward within one boot.

mod boots;
mod known;

use std::collections::BTreeMap;

use firmware_protocol::{Deframed, Deframer, Frame, Header, MAX_COBS_LEN, Message, decode};

use boots::{Boots, TickSays};
pub use known::N_DESCRIPTIONS;
use known::{KnownDescriptions, stream_of};

use super::sample::{
    Block, Captured, Counts, DeviceDescription, Edge, Gap, HostNs, Reboot, RebootSeen, Rejected, Status,
    StreamDescription, TimeReply,
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
    /// Blocks accepted.
    pub blocks: u64,
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
    boots: Boots,
    known: KnownDescriptions,
    streams: BTreeMap<u8, StreamState>,
    counters: Counters,
}

#[derive(Debug, Default)]
struct StreamState {
    next_sequence: Option<u32>,
    next_index: Option<u64>,
    newest_sent_tick: Option<u64>,
    /// The tick at send of its last frame was far behind.
    was_behind: bool,
}

/// No stream gets so far in a device's life (two thousand years at 1 MHz), nor misses so much at once (12 days of that): a
/// block that says so is refused, and the stream goes on from where it was.
const INDEX_MAX: u64 = 1 << 56;
const MISSING_MAX: u64 = 1 << 40;

/// Why a frame received whole is refused all the same.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Refusal {
    pub(super) reason: &'static str,
    pub(super) detail: String,
}

impl From<&'static str> for Refusal {
    fn from(reason: &'static str) -> Self {
        Self { reason, detail: String::new() }
    }
}

const NO_DESCRIPTION: &str = "samples before their description";
const FROM_A_HOST: &str = "frame that only a host sends";
const BACKWARD: &str = "index runs backward";
const SENT_BACKWARD: &str = "tick at send runs backward";
const BEYOND: &str = "index beyond belief";
const ODD_SAMPLES: &str = "samples do not fit the description";
const OVERLONG: &str = "too long for a frame";
const CUT_OFF: &str = "cut off when the link was lost";

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
        decoder.state.boots.follow(description.boot_id);
        decoder.state.known.take(description);
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
                        Err(error) => Some(Refusal { reason: error.reason(), detail: error.to_string() }),
                    };
                    if let Some(refusal) = refused {
                        self.state.reject(host_ns, refusal, &self.as_received, sink);
                    }
                }
                Deframed::Junk(junk) => self.state.reject(host_ns, OVERLONG.into(), junk, sink),
            }
        }
    }

    /// The link is gone: bytes of an unfinished frame are rejected. Indices go on when the same boot comes back.
    pub fn link_lost(&mut self, host_ns: HostNs, sink: &mut impl FnMut(Captured)) {
        let partial = self.deframer.take_partial();
        if !partial.is_empty() {
            self.state.reject(host_ns, CUT_OFF.into(), partial, sink);
        }
    }

    /// What was fed so far only told what the device is: counts and sequences begin with what follows.
    pub fn start_here(&mut self) {
        self.state.streams.clear();
        self.state.boots.start_here();
        self.state.counters = Counters::default();
    }

    /// The description in force; `None` before the first and after a boot that was not described yet.
    pub fn description(&self) -> Option<&DeviceDescription> {
        self.state.known.in_force()
    }

    pub fn counters(&self) -> &Counters {
        &self.state.counters
    }
}

impl State {
    fn reject(&mut self, host_ns: HostNs, refusal: Refusal, bytes: &[u8], sink: &mut impl FnMut(Captured)) {
        let Refusal { reason, detail } = refusal;
        *self.counters.refused.entry(reason).or_default() += 1;
        sink(Captured::Rejected(Rejected { host_ns, reason, detail, bytes: bytes.to_vec() }));
    }

    fn frame(&mut self, host_ns: HostNs, frame: &Frame<'_>, sink: &mut impl FnMut(Captured)) -> Result<(), Refusal> {
        self.counters.frames += 1;
        if matches!(
            frame.message,
            Message::DescribeRequest | Message::Start | Message::Stop | Message::TimeRequest(_) | Message::SetRate(_)
        ) {
            return Err(FROM_A_HOST.into());
        }
        self.follow_boot(host_ns, frame.header.boot_id, sink);
        self.follow_sequence(&frame.header);
        self.follow_tick(host_ns, frame, sink)?;
        let boot_id = self.boots.named().unwrap_or(frame.header.boot_id);
        let header = &Header { boot_id, ..frame.header };
        match &frame.message {
            Message::Describe(describe) => self.describe(description::owned(header, describe)?, sink),
            Message::Block(block) => self.block(host_ns, (header, frame.crc), block, sink)?,
            message => match plain(host_ns, boot_id, message) {
                Some(captured) => sink(captured),
                None => self.counters.unknown_kinds += 1,
            },
        }
        // Only of what was accepted: a frame that is refused for what it says is not believed in its ticks either.
        if let Some(tick) = sent_tick(&frame.message) {
            let stream = self.streams.entry(header.stream).or_default();
            stream.newest_sent_tick = stream.newest_sent_tick.max(Some(tick));
        }
        Ok(())
    }

    fn describe(&mut self, described: DeviceDescription, sink: &mut impl FnMut(Captured)) {
        if self.known.take(described.clone()) {
            sink(Captured::Description(described));
        }
    }

    /// A new boot starts indices and sequences afresh.
    fn follow_boot(&mut self, host_ns: HostNs, received: u32, sink: &mut impl FnMut(Captured)) {
        let earlier = self.boots.named();
        let seen = self.boots.follow(received);
        if earlier.is_none() || seen.is_some() {
            self.streams.clear();
        }
        if let (Some(earlier_boot_id), Some(seen)) = (earlier, seen) {
            self.known.clear();
            let boot_id = self.boots.named().unwrap_or(received);
            sink(Captured::Reboot(Reboot { host_ns, boot_id, received_boot_id: received, earlier_boot_id, seen }));
        }
    }

    /// Counts lost frames; notices a sequence that falls back.
    fn follow_sequence(&mut self, header: &Header) {
        let stream = self.streams.entry(header.stream).or_default();
        let ahead = stream.next_sequence.map_or(0, |next| header.sequence.wrapping_sub(next));
        stream.next_sequence = Some(header.sequence.wrapping_add(1));
        if ahead <= u32::MAX / 2 {
            self.counters.lost_frames += u64::from(ahead);
        } else if self.boots.sequence_fell_back() {
            self.known.doubt();
        }
    }

    /// Notices a device that starts again under its old boot id.
    fn follow_tick(
        &mut self,
        host_ns: HostNs,
        frame: &Frame<'_>,
        sink: &mut impl FnMut(Captured),
    ) -> Result<(), Refusal> {
        let Some(sent_tick) = sent_tick(&frame.message) else { return Ok(()) };
        let Some(tick_rate_hz) = self.known.in_force().map(|description| description.tick_rate_hz) else {
            return Ok(());
        };
        let header = &frame.header;
        let stream = self.streams.entry(header.stream).or_default();
        let (newest, again) = (stream.newest_sent_tick, stream.was_behind);
        let earlier_boot_id = self.boots.named().unwrap_or(header.boot_id);
        match self.boots.sent(sent_tick, newest, again, tick_rate_hz) {
            TickSays::GoesOn => {
                stream.was_behind = false;
                Ok(())
            }
            TickSays::Behind => {
                stream.was_behind = true;
                let newest = newest.unwrap_or_default();
                let detail = format!("stream {}: {sent_tick} after {newest}", header.stream);
                Err(Refusal { reason: SENT_BACKWARD, detail })
            }
            TickSays::Anew(seen) => {
                self.start_anew(host_ns, header, earlier_boot_id, seen, sink);
                Ok(())
            }
        }
    }

    /// The run under the old boot id gets an id of its own, and what the device said of itself since then goes with it.
    fn start_anew(
        &mut self,
        host_ns: HostNs,
        header: &Header,
        earlier_boot_id: u32,
        seen: RebootSeen,
        sink: &mut impl FnMut(Captured),
    ) {
        let received_boot_id = header.boot_id;
        let boot_id = self.boots.named().unwrap_or(received_boot_id);
        self.streams.clear();
        self.streams.entry(header.stream).or_default().next_sequence = Some(header.sequence.wrapping_add(1));
        sink(Captured::Reboot(Reboot { host_ns, boot_id, received_boot_id, earlier_boot_id, seen }));
        let described = self.known.move_to_boot(boot_id, seen == RebootSeen::ClockAnew);
        described.into_iter().for_each(|description| sink(Captured::Description(description)));
    }

    fn block(
        &mut self,
        host_ns: HostNs,
        (header, crc): (&Header, u32),
        block: &firmware_protocol::Block<'_>,
        sink: &mut impl FnMut(Captured),
    ) -> Result<(), Refusal> {
        let number = header.stream;
        let beyond = || Refusal { reason: BEYOND, detail: format!("stream {number}: index {}", block.first_index) };
        if block.first_index > INDEX_MAX {
            return Err(beyond());
        }
        let stream = self.streams.entry(number).or_default();
        let next_index = *stream.next_index.get_or_insert(block.first_index);
        let described = described(&self.known, header)?;
        let backward = || Refusal {
            reason: BACKWARD,
            detail: format!("stream {number}: {} after {next_index}", block.first_index),
        };
        let n_missing = block.first_index.checked_sub(next_index).ok_or_else(backward)?;
        if n_missing > MISSING_MAX {
            return Err(beyond());
        }
        let next_index = block.first_index.checked_add(block.n_samples.into()).ok_or_else(backward)?;
        let counts = unpack::unpack(block.samples, block.n_samples.into(), described).ok_or_else(|| Refusal {
            reason: ODD_SAMPLES,
            detail: format!(
                "stream {number}: {} samples of {} bytes, the description's channels take {}",
                block.n_samples,
                block.sample_len,
                unpack::sample_len(described)
            ),
        })?;
        if n_missing > 0 {
            self.counters.missing = self.counters.missing.saturating_add(n_missing);
            self.counters.gaps += 1;
            sink(Captured::Gap(Gap {
                host_ns,
                boot_id: header.boot_id,
                stream: number,
                first_missing_index: block.first_index - n_missing,
                n_missing,
            }));
        }
        stream.next_index = Some(next_index);
        self.counters.blocks += 1;
        sink(Captured::Block(owned_block(host_ns, header, crc, block, counts)));
        Ok(())
    }
}

fn sent_tick(message: &Message<'_>) -> Option<u64> {
    match message {
        Message::Block(block) => Some(block.sent_tick),
        Message::TimeReply(reply) => Some(reply.sent_tick),
        _ => None,
    }
}

/// The stream that the header names, in the description that it names.
fn described<'k>(known: &'k KnownDescriptions, header: &Header) -> Result<&'k StreamDescription, Refusal> {
    let Header { stream, description_id: id, .. } = *header;
    let detail = match known.named(id) {
        None => format!("block of stream {stream} with description id {id}, described: {}", known.ids()),
        Some(description) => match stream_of(description, stream) {
            Some(described) => return Ok(described),
            None => format!("description {id} has no stream {stream}"),
        },
    };
    Err(Refusal { reason: NO_DESCRIPTION, detail })
}

fn owned_block(
    host_ns: HostNs,
    header: &Header,
    crc: u32,
    block: &firmware_protocol::Block<'_>,
    counts: Vec<Counts>,
) -> Block {
    Block {
        host_ns,
        boot_id: header.boot_id,
        description_id: header.description_id,
        stream: header.stream,
        sequence: header.sequence,
        first_index: block.first_index,
        first_tick: block.tick,
        sent_tick: block.sent_tick,
        n_samples: block.n_samples.into(),
        overruns: block.overruns,
        crc,
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
