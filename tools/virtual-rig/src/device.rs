//! A device on the rig: samples its sensors by its own clock, packs blocks, answers its host.

use crate::clock::{DeviceClock, TICK_RATE_HZ, TICK_TOLERANCE_PPM};
use crate::draw::{Draw, Purpose};
use crate::performance::Performance;
use crate::physics::trajectory::Row;
use crate::sensor::{ChannelSpec, Errors, OVERSAMPLING, Quantity, SHUTTLE_CHANNELS, Sensor, WINCH_CHANNELS};
use firmware_protocol::{
    Block, CHECKSUM_LEN, Channel, Channels, Describe, EncodeError, Encoding, Header, MAX_FRAME_LEN, Message, Status,
    Stream, Streams, TimeReply, decode, encode, unstuff_in_place,
};

pub const BLOCK_STREAM: u8 = 1;
pub const TICKS_PER_SAMPLE: u32 = 100;
pub const SAMPLES_PER_BLOCK: u16 = 100;
const STATUS_INTERVAL_NS: i64 = 1_000_000_000;
const DESCRIPTION_ID: u16 = 1;
/// Longer input without a delimiter is thrown away.
const REQUEST_LEN_MAX: usize = 4096;

/// The parts of a device that never change.
#[derive(Debug, Clone, Copy)]
pub struct DeviceSpec {
    pub device_id: u64,
    pub name: &'static str,
    pub channels: &'static [ChannelSpec],
}

/// The devices of rig north-pier, in the order of all lists.
pub const DEVICES: [DeviceSpec; 2] = [
    DeviceSpec { device_id: 0x5741_0001, name: "winch-node", channels: &WINCH_CHANNELS },
    DeviceSpec { device_id: 0x5348_0001, name: "shuttle-node", channels: &SHUTTLE_CHANNELS },
];

/// One block as it left.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct BlockTruth {
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

/// What the host asked for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Request {
    Describe,
    Start,
    Stop,
    Time { token: u32 },
}

/// A device at work.
#[derive(Debug, Clone)]
pub struct Device {
    pub spec: DeviceSpec,
    pub boot_id: u32,
    pub clock: DeviceClock,
    pub sensors: Vec<Sensor>,
    control_sequence: u32,
    block_sequence: u32,
    next_index: u64,
    next_status_ns: i64,
    running: bool,
    input: Vec<u8>,
}

impl Device {
    /// Device `idx` of [`DEVICES`], booted at `boot_host_ns`.
    pub fn boot(idx: u8, performance: &Performance, boot_host_ns: i64) -> Self {
        let spec = DEVICES[usize::from(idx)];
        let options = &performance.options;
        let mut boot_draw = Draw::new(options.seed, Purpose::Transport { device: idx });
        let errors = drawn_errors(options.seed, options.cell_offset_n);
        let sensors =
            spec.channels.iter().zip(&errors[usize::from(idx)]).enumerate().map(|(channel, (spec, errors))| {
                Sensor::new(*spec, *errors, performance.launcher(), options.seed, idx, channel as u8)
            });
        Self {
            spec,
            boot_id: boot_draw.bits() as u32,
            clock: DeviceClock::drawn(options.seed, idx, boot_host_ns),
            sensors: sensors.collect(),
            control_sequence: 0,
            block_sequence: 0,
            next_index: 0,
            next_status_ns: boot_host_ns,
            running: false,
            input: Vec::new(),
        }
    }

    /// Takes bytes from the host; hands out each whole request.
    pub fn hear(&mut self, bytes: &[u8], mut on_request: impl FnMut(Request)) {
        for &byte in bytes {
            if byte != 0 {
                if self.input.len() < REQUEST_LEN_MAX {
                    self.input.push(byte);
                }
                continue;
            }
            if let Ok(frame) = decode(&mut self.input) {
                match frame.message {
                    Message::DescribeRequest => on_request(Request::Describe),
                    Message::Start => on_request(Request::Start),
                    Message::Stop => on_request(Request::Stop),
                    Message::TimeRequest(request) => on_request(Request::Time { token: request.token }),
                    _ => {}
                }
            }
            self.input.clear();
        }
    }

    pub fn running(&self) -> bool {
        self.running
    }

    /// Begins to sample at the next sample time after `host_ns`.
    pub fn start(&mut self, host_ns: i64) {
        if self.running {
            return;
        }
        self.running = true;
        let ticks = self.clock.tick_at(host_ns).saturating_sub(self.clock.tick_at_epoch);
        self.next_index = self.next_index.max(ticks / u64::from(TICKS_PER_SAMPLE) + 1);
        for sensor in &mut self.sensors {
            sensor.restart(TICK_RATE_HZ / f64::from(TICKS_PER_SAMPLE));
        }
    }

    pub fn stop(&mut self) {
        self.running = false;
    }

    fn tick_of(&self, index: u64) -> u64 {
        self.clock.tick_at_epoch + index * u64::from(TICKS_PER_SAMPLE)
    }

    /// Host time at which the next block is complete.
    pub fn block_due_ns(&self) -> Option<i64> {
        let last = self.tick_of(self.next_index + u64::from(SAMPLES_PER_BLOCK) - 1) + 1;
        self.running.then(|| self.clock.epoch_host_ns + self.clock.since_epoch_ns(last).ceil() as i64)
    }

    /// The next block, handed to the port at `host_ns`. `rig_at` gives the rig at a host time in ns after the clock's epoch.
    ///
    /// # Errors
    /// When the block does not fit a frame.
    pub fn block(&mut self, host_ns: i64, rig_at: impl Fn(f64) -> Row) -> Result<Outgoing, EncodeError> {
        let (first_index, n_samples) = (self.next_index, SAMPLES_PER_BLOCK);
        let mut samples = Vec::with_capacity(usize::from(n_samples) * self.sample_len());
        for index in first_index..first_index + u64::from(n_samples) {
            let at_ns = self.clock.since_epoch_ns(self.tick_of(index));
            let interval_ns = 1e9 * f64::from(TICKS_PER_SAMPLE) / TICK_RATE_HZ / OVERSAMPLING as f64;
            let rows = std::array::from_fn(|back| rig_at(at_ns - (OVERSAMPLING - 1 - back) as f64 * interval_ns));
            for sensor in &mut self.sensors {
                pack(sensor.spec.encoding, sensor.counts(&rows), &mut samples);
            }
        }
        let message = Message::Block(Block {
            first_index,
            tick: self.tick_of(first_index),
            sent_tick: self.clock.tick_at(host_ns),
            overruns: 0,
            n_samples,
            sample_len: self.sample_len() as u16,
            samples: &samples,
        });
        let sequence = self.block_sequence;
        let (bytes, crc) = self.frame(BLOCK_STREAM, sequence, &message)?;
        self.block_sequence = sequence.wrapping_add(1);
        self.next_index += u64::from(n_samples);
        Ok(Outgoing { bytes, block: Some(BlockTruth { sequence, first_index, n_samples, crc }) })
    }

    /// # Errors
    /// When the description does not fit a frame.
    pub fn description(&mut self) -> Result<Outgoing, EncodeError> {
        let channels: Vec<Channel> = self.spec.channels.iter().map(described).collect();
        let streams =
            [Stream { id: BLOCK_STREAM, ticks_per_sample: TICKS_PER_SAMPLE, channels: Channels::given(&channels) }];
        let message = Message::Describe(Describe {
            device_id: self.spec.device_id,
            name: self.spec.name,
            firmware: "virtual-rig 0.1.0",
            tick_rate_hz: TICK_RATE_HZ,
            tick_tolerance_ppm: TICK_TOLERANCE_PPM,
            streams: Streams::given(&streams),
        });
        self.control(&message)
    }

    /// Answer to a time request that came in at `received_ns`, handed to the port at `sent_ns`.
    ///
    /// # Errors
    /// When the reply does not fit a frame.
    pub fn time_reply(&mut self, token: u32, received_ns: i64, sent_ns: i64) -> Result<Outgoing, EncodeError> {
        let (received_tick, sent_tick) = (self.clock.tick_at(received_ns), self.clock.tick_at(sent_ns));
        self.control(&Message::TimeReply(TimeReply { token, received_tick, sent_tick }))
    }

    /// A status once a second while running.
    ///
    /// # Errors
    /// When the status does not fit a frame.
    pub fn status_if_due(&mut self, host_ns: i64) -> Result<Option<Outgoing>, EncodeError> {
        if !self.running || host_ns < self.next_status_ns {
            return Ok(None);
        }
        self.next_status_ns = host_ns + STATUS_INTERVAL_NS;
        let (tick, temperature_c, supply_v) = (self.clock.tick_at(host_ns), 21.5, 4.98);
        self.control(&Message::Status(Status { tick, temperature_c, supply_v, excitation_v: 3.3, overruns: 0 }))
            .map(Some)
    }

    fn control(&mut self, message: &Message) -> Result<Outgoing, EncodeError> {
        let sequence = self.control_sequence;
        self.control_sequence = sequence.wrapping_add(1);
        let (bytes, _) = self.frame(firmware_protocol::CONTROL_STREAM, sequence, message)?;
        Ok(Outgoing { bytes, block: None })
    }

    /// Bytes of a frame and the checksum it carries.
    fn frame(&self, stream: u8, sequence: u32, message: &Message) -> Result<(Vec<u8>, u32), EncodeError> {
        let header = Header { flags: 0, stream, sequence, boot_id: self.boot_id, description_id: DESCRIPTION_ID };
        let mut bytes = vec![0; MAX_FRAME_LEN];
        let n_bytes = encode(&header, message, &mut bytes)?;
        bytes.truncate(n_bytes);
        let crc = own_checksum(&bytes[1..n_bytes - 1]);
        Ok((bytes, crc))
    }

    fn sample_len(&self) -> usize {
        self.spec.channels.iter().map(|channel| channel.encoding.width()).sum()
    }
}

/// The hidden errors of every channel of every device.
pub fn drawn_errors(seed: u64, cell_offset_n: Option<f64>) -> Vec<Vec<Errors>> {
    let mut draw = Draw::new(seed, Purpose::SensorErrors);
    let mut of_channel = |channel: &ChannelSpec| {
        let mut errors = Errors::drawn(&channel.spread, &mut draw);
        if matches!(channel.quantity, Quantity::LineTension | Quantity::AnchorTension) {
            errors.zero += cell_offset_n.unwrap_or(0.0);
        }
        errors
    };
    DEVICES.iter().map(|device| device.channels.iter().map(&mut of_channel).collect()).collect()
}

/// CRC-32C of header and payload, worked out apart from the protocol crate.
fn own_checksum(stuffed: &[u8]) -> u32 {
    let mut plain = stuffed.to_vec();
    let len = unstuff_in_place(&mut plain).unwrap_or(0);
    crc32c::crc32c(&plain[..len.saturating_sub(CHECKSUM_LEN)])
}

fn described(channel: &ChannelSpec) -> Channel<'static> {
    Channel {
        name: channel.name,
        quantity: match channel.quantity {
            Quantity::LineTension | Quantity::AnchorTension => "force",
            Quantity::Position => "position",
            Quantity::SpecificForce => "acceleration",
        },
        encoding: channel.encoding,
        nominal_min: -channel.counts_max,
        nominal_max: channel.counts_max,
        group_delay_s: channel.group_delay_s() as f32,
        bandwidth_hz: channel.bandwidth_hz.map(|hz| hz as f32),
    }
}

fn pack(encoding: Encoding, counts: i32, out: &mut Vec<u8>) {
    let bytes = counts.to_le_bytes();
    match encoding {
        Encoding::I16 => out.extend_from_slice(&bytes[..2]),
        Encoding::I24 => out.extend_from_slice(&bytes[..3]),
        Encoding::I32 => out.extend_from_slice(&bytes),
        Encoding::F32 => out.extend_from_slice(&(counts as f32).to_le_bytes()),
    }
}
