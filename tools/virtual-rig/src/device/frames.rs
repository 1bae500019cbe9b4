//! What a device says, as frames.

use super::{BLOCK_STREAM, Device};
use crate::clock::{TICK_RATE_HZ, TICK_TOLERANCE_PPM};
use crate::faults::FaultKind;
use crate::physics::trajectory::Row;
use crate::sensor::ChannelSpec;
use firmware_protocol::{
    Block, CHECKSUM_LEN, CONTROL_STREAM, Channel, Channels, Describe, Edge, EncodeError, Encoding, Header,
    MAX_FRAME_LEN, Message, Status, Stream, Streams, TimeReply, encode, unstuff_in_place,
};

/// By how much a changed description shifts the stated delays.
const CHANGED_DELAY_S: f64 = 1e-4;

/// One block as it left.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct BlockTruth {
    pub boot_id: u32,
    pub sequence: u32,
    pub first_index: u64,
    pub n_samples: u16,
    pub crc: u32,
}

/// Bytes of a frame; what to log once they are accepted.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Outgoing {
    pub bytes: Vec<u8>,
    pub block: Option<BlockTruth>,
}

impl Device {
    /// # Errors
    /// When the description does not fit a frame.
    pub fn description(&mut self) -> Result<Outgoing, EncodeError> {
        let more_delay_s = f64::from(self.description_id - 1) * CHANGED_DELAY_S;
        let specs = self.channels.clone();
        let channels: Vec<Channel> = specs.iter().map(|channel| described(channel, more_delay_s)).collect();
        let stream = Stream {
            id: BLOCK_STREAM,
            ticks_per_sample: self.spec.ticks_per_sample,
            channels: Channels::given(&channels),
        };
        let streams = if channels.is_empty() { Vec::new() } else { vec![stream] };
        let message = Message::Describe(Describe {
            device_id: self.device_id,
            name: self.spec.name,
            firmware: "virtual-rig 0.1.0",
            tick_rate_hz: TICK_RATE_HZ,
            tick_tolerance_ppm: TICK_TOLERANCE_PPM,
            streams: Streams::given(&streams),
        });
        self.control(&message)
    }

    /// Answer to a time request that came in at `received_ns`, handed to the port at `sent_ns`.
    pub(super) fn time_reply(&mut self, token: u32, received_ns: i64, sent_ns: i64) -> Result<Outgoing, EncodeError> {
        let clock = self.now().clock;
        let (received_tick, sent_tick) = (clock.tick_at(received_ns), clock.tick_at(sent_ns));
        self.control(&Message::TimeReply(TimeReply { token, received_tick, sent_tick }))
    }

    pub(super) fn status(&mut self, host_ns: i64) -> Result<Outgoing, EncodeError> {
        let tick = self.now().clock.tick_at(host_ns);
        let (temperature_c, supply_v, excitation_v) = (21.5, 4.98, 3.3);
        self.control(&Message::Status(Status { tick, temperature_c, supply_v, excitation_v, overruns: 0 }))
    }

    pub(super) fn edge(&mut self) -> Result<Option<Outgoing>, EncodeError> {
        let (Some(due_ns), Some(edge)) = (self.edge_due_ns(), self.edges.pop_front()) else { return Ok(None) };
        let tick = self.now().clock.tick_at(due_ns);
        self.control(&Message::Edge(Edge { input: edge.input, rising: edge.rising, tick })).map(Some)
    }

    pub(super) fn block(&mut self, host_ns: i64, rig_at: impl Fn(f64) -> Row) -> Result<Outgoing, EncodeError> {
        let (first_index, n_samples) = (self.next_index, self.spec.samples_per_block);
        let samples = self.samples(rig_at);
        let message = Message::Block(Block {
            first_index,
            tick: self.tick_of(first_index).saturating_add_signed(self.glitch_ticks(first_index)),
            sent_tick: self.now().clock.tick_at(host_ns),
            overruns: 0,
            n_samples,
            sample_len: self.sample_len() as u16,
            samples: &samples,
        });
        let sequence = self.block_sequence;
        let (bytes, crc) = self.frame(BLOCK_STREAM, sequence, &message)?;
        self.block_sequence = sequence.wrapping_add(1);
        self.next_index += u64::from(n_samples);
        let block = BlockTruth { boot_id: self.now().boot_id, sequence, first_index, n_samples, crc };
        Ok(Outgoing { bytes, block: Some(block) })
    }

    /// What a glitch adds to the tick of the block that spans its start.
    pub(super) fn glitch_ticks(&self, first_index: u64) -> i64 {
        let clock = self.now().clock;
        let scenario_s =
            |index| self.scenario_s(clock.epoch_host_ns as f64 + clock.since_epoch_ns(self.tick_of(index)));
        let (from_s, to_s) =
            (scenario_s(first_index), scenario_s(first_index + u64::from(self.spec.samples_per_block)));
        let hit = |kind, start_s: f64| kind == FaultKind::TickGlitch && start_s >= from_s && start_s < to_s;
        self.faults.iter().find(|fault| hit(fault.kind, fault.from_s)).map_or(0, |fault| fault.value as i64)
    }

    fn control(&mut self, message: &Message) -> Result<Outgoing, EncodeError> {
        let sequence = self.control_sequence;
        self.control_sequence = sequence.wrapping_add(1);
        let (bytes, _) = self.frame(CONTROL_STREAM, sequence, message)?;
        Ok(Outgoing { bytes, block: None })
    }

    /// Bytes of a frame and the checksum it carries.
    fn frame(&self, stream: u8, sequence: u32, message: &Message) -> Result<(Vec<u8>, u32), EncodeError> {
        let boot_id = self.now().boot_id;
        let header = Header { flags: 0, stream, sequence, boot_id, description_id: self.description_id };
        let mut bytes = vec![0; MAX_FRAME_LEN];
        let n_bytes = encode(&header, message, &mut bytes)?;
        bytes.truncate(n_bytes);
        let crc = own_checksum(&bytes[1..n_bytes - 1]);
        Ok((bytes, crc))
    }
}

/// CRC-32C of header and payload, worked out apart from the protocol crate.
fn own_checksum(stuffed: &[u8]) -> u32 {
    let mut plain = stuffed.to_vec();
    let len = unstuff_in_place(&mut plain).unwrap_or(0);
    crc32c::crc32c(&plain[..len.saturating_sub(CHECKSUM_LEN)])
}

fn described(channel: &ChannelSpec, more_delay_s: f64) -> Channel<'static> {
    Channel {
        name: channel.name,
        quantity: channel.quantity.word(),
        encoding: channel.encoding,
        nominal_min: -channel.counts_max,
        nominal_max: channel.counts_max,
        group_delay_s: (channel.group_delay_s() + more_delay_s) as f32,
        bandwidth_hz: channel.bandwidth_hz.map(|hz| hz as f32),
    }
}

/// Appends one sample as the wire wants it.
pub(super) fn pack(encoding: Encoding, counts: i32, out: &mut Vec<u8>) {
    let bytes = counts.to_le_bytes();
    match encoding {
        Encoding::I16 => out.extend_from_slice(&bytes[..2]),
        Encoding::I24 => out.extend_from_slice(&bytes[..3]),
        Encoding::I32 => out.extend_from_slice(&bytes),
        Encoding::F32 => out.extend_from_slice(&(counts as f32).to_le_bytes()),
    }
}
