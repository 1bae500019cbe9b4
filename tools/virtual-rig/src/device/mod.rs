//! A device on the rig: samples its sensors by its own clock, packs blocks, answers its host, boots anew.
//!
//! What it says and when follows SPEC.md of `firmware-protocol`, "What a device does".

pub mod catalogue;
mod frames;
mod text;

pub use catalogue::DEVICES;
pub use frames::{BlockTruth, Outgoing};

use crate::clock::{DeviceClock, TICK_RATE_HZ};
use crate::draw::{Draw, Purpose};
use crate::edges::Edge;
use crate::faults::{self, FaultKind, Timed};
use crate::launcher::STANDARD_GRAVITY_MPS2;
use crate::performance::Performance;
use crate::physics::trajectory::Row;
use crate::sensor::{ChannelSpec, Errors, OVERSAMPLING, Quantity, Sensor};
use catalogue::DeviceSpec;
use firmware_protocol::{EncodeError, Message, decode};
use std::collections::VecDeque;

pub const BLOCK_STREAM: u8 = 1;
const EVERY_SECOND_NS: i64 = 1_000_000_000;
/// Longer input without a delimiter is thrown away.
const REQUEST_LEN_MAX: usize = 4096;

/// What the host asked for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Request {
    Describe,
    Start,
    Stop,
    Time {
        token: u32,
    },
    /// The latest reading, of a device that prints when asked.
    Poll,
}

/// One boot of a device, and how many blocks had left before it.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Boot {
    pub boot_id: u32,
    pub clock: DeviceClock,
}

/// A device at work.
#[derive(Debug, Clone)]
pub struct Device {
    pub spec: DeviceSpec,
    pub device_id: u64,
    /// Channels as built into this device.
    pub channels: Vec<ChannelSpec>,
    pub sensors: Vec<Sensor>,
    pub boots: Vec<Boot>,
    pub faults: Vec<Timed>,
    boot_draw: Draw,
    description_id: u16,
    control_sequence: u32,
    block_sequence: u32,
    next_index: u64,
    next_second_ns: i64,
    running: bool,
    powered: bool,
    input: Vec<u8>,
    /// To be said before anything else.
    queue: VecDeque<Outgoing>,
    edges: VecDeque<Edge>,
    scenario_zero_ns: Option<i64>,
}

impl Device {
    /// Device `idx` of the performance, booted at `boot_host_ns`.
    pub fn boot(idx: u8, performance: &Performance, boot_host_ns: i64) -> Self {
        let spec = performance.devices[usize::from(idx)];
        let options = &performance.options;
        let faults = faults::of_device(spec.name, performance);
        let value = |kind| faults.iter().find(|fault| fault.kind == kind).map(|fault| fault.value);
        let mut clock = DeviceClock::drawn(options.seed, idx, boot_host_ns);
        clock.rate_error_ppm += value(FaultKind::Drift).unwrap_or(0.0);
        clock.wander_ppm = value(FaultKind::Wander).unwrap_or(0.0);
        let first_id = performance.devices[0].device_id;
        let device_id = value(FaultKind::DuplicateId).map_or(spec.device_id, |_| first_id);
        let mut boot_draw = Draw::new(options.seed, Purpose::Boot { device: idx });
        let boot = Boot { boot_id: boot_draw.bits() as u32, clock };
        let channels: Vec<ChannelSpec> = spec.channels.iter().map(|channel| built(channel, performance)).collect();
        let errors = drawn_errors(&spec, idx, options.seed, options.cell_offset_n);
        let sensor = |(number, (spec, errors)): (usize, (&ChannelSpec, Errors))| {
            let noise = Draw::new(options.seed, Purpose::Noise { device: idx, channel: number as u8 });
            Sensor::new(*spec, errors, performance.launcher(), noise).with_faults(&faults)
        };
        Self {
            spec,
            device_id,
            sensors: channels.iter().zip(errors).enumerate().map(sensor).collect(),
            channels,
            boots: vec![boot],
            faults,
            boot_draw,
            description_id: 1,
            control_sequence: 0,
            block_sequence: 0,
            next_index: 0,
            next_second_ns: boot_host_ns,
            running: false,
            powered: true,
            input: Vec::new(),
            queue: VecDeque::new(),
            edges: if spec.has_inputs { performance.edges.iter().copied().collect() } else { VecDeque::new() },
            scenario_zero_ns: None,
        }
    }

    /// The latest boot.
    pub fn now(&self) -> Boot {
        self.boots[self.boots.len() - 1]
    }

    fn clock(&self) -> DeviceClock {
        self.now().clock
    }

    /// Tells the device (not the host) when the scenario begins.
    pub fn set_scenario_zero(&mut self, host_ns: i64) {
        self.scenario_zero_ns = Some(host_ns);
    }

    /// Seconds of the scenario at `host_ns`; before everything while the scenario has no beginning.
    pub fn scenario_s(&self, host_ns: f64) -> f64 {
        self.scenario_zero_ns.map_or(f64::MIN, |zero_ns| (host_ns - zero_ns as f64) * 1e-9)
    }

    /// Takes bytes from the host; hands out each whole request.
    pub fn hear(&mut self, bytes: &[u8], mut on_request: impl FnMut(Request)) {
        for &byte in bytes {
            if self.spec.text.is_some() {
                self.hear_text(byte).into_iter().for_each(&mut on_request);
                continue;
            }
            if byte != 0 {
                if self.input.len() < REQUEST_LEN_MAX {
                    self.input.push(byte);
                }
                continue;
            }
            if let Ok(frame) = decode(&mut self.input) {
                match frame.message {
                    // A rate that cannot be followed is answered by a description that says so.
                    Message::DescribeRequest | Message::SetRate(_) => on_request(Request::Describe),
                    Message::Start => on_request(Request::Start),
                    Message::Stop => on_request(Request::Stop),
                    Message::TimeRequest(request) => on_request(Request::Time { token: request.token }),
                    _ => {}
                }
            }
            self.input.clear();
        }
    }

    /// Answers a request that came in at `received_ns`; `clock_ns` tells the time at which the answer is made.
    ///
    /// # Errors
    /// When the answer does not fit a frame.
    pub fn answer(
        &mut self,
        request: Request,
        received_ns: i64,
        clock_ns: impl Fn() -> i64,
        rig_at: impl Fn(f64) -> Row,
    ) -> Result<Option<Outgoing>, EncodeError> {
        match request {
            _ if !self.powered => Ok(None),
            Request::Poll => Ok(self.poll(received_ns, rig_at)),
            Request::Describe | Request::Time { .. } if self.spec.text.is_some() => Ok(None),
            Request::Describe => self.description().map(Some),
            Request::Time { token } => self.time_reply(token, received_ns, clock_ns()).map(Some),
            Request::Start => {
                self.start(received_ns);
                Ok(None)
            }
            Request::Stop => {
                self.running = false;
                Ok(None)
            }
        }
    }

    pub fn running(&self) -> bool {
        self.running
    }

    /// Begins to sample at the next sample time after `host_ns`.
    pub fn start(&mut self, host_ns: i64) {
        if self.running || !self.powered {
            return;
        }
        self.running = true;
        self.next_second_ns = host_ns;
        if self.spec.ticks_per_sample == 0 {
            return;
        }
        let clock = self.clock();
        let ticks = clock.tick_at(host_ns).saturating_sub(clock.tick_at_epoch);
        self.next_index = self.next_index.max(ticks / u64::from(self.spec.ticks_per_sample) + 1);
        for sensor in &mut self.sensors {
            sensor.restart(TICK_RATE_HZ / f64::from(self.spec.ticks_per_sample));
        }
        self.header();
    }

    /// Loses power: says nothing until it boots again.
    pub fn power_off(&mut self) {
        (self.running, self.powered) = (false, false);
        self.queue.clear();
        self.input.clear();
    }

    /// Boots anew at `host_ns` and describes itself.
    ///
    /// # Errors
    /// When the description does not fit a frame.
    pub fn reboot(&mut self, host_ns: i64) -> Result<(), EncodeError> {
        self.powered = true;
        let boot = Boot { boot_id: self.boot_draw.bits() as u32, clock: self.clock().rebooted(host_ns) };
        self.boots.push(boot);
        (self.control_sequence, self.block_sequence, self.next_index) = (0, 0, 0);
        if self.spec.text.is_some() {
            return Ok(());
        }
        let description = self.description()?;
        self.queue.push_back(description);
        Ok(())
    }

    /// Takes a new description id with other channel delays, and says so.
    ///
    /// # Errors
    /// When the description does not fit a frame.
    pub fn change_description(&mut self) -> Result<(), EncodeError> {
        if self.spec.text.is_some() {
            return Ok(());
        }
        self.description_id += 1;
        let description = self.description()?;
        self.queue.push_back(description);
        Ok(())
    }

    fn tick_of(&self, index: u64) -> u64 {
        self.clock().tick_at_epoch + index * u64::from(self.spec.ticks_per_sample)
    }

    /// Host time at which the device has something to say of itself.
    pub fn due_ns(&self) -> Option<i64> {
        if !self.queue.is_empty() {
            return Some(i64::MIN);
        }
        if !self.running {
            return None;
        }
        if let Some(text) = self.spec.text {
            return if text.poll.is_none() { self.block_due_ns() } else { None };
        }
        [Some(self.next_second_ns), self.edge_due_ns(), self.block_due_ns()].into_iter().flatten().min()
    }

    fn edge_due_ns(&self) -> Option<i64> {
        let edge = self.edges.front()?;
        Some(self.scenario_zero_ns? + (edge.t_s * 1e9) as i64)
    }

    /// Host time at which the next block is complete.
    fn block_due_ns(&self) -> Option<i64> {
        if self.spec.ticks_per_sample == 0 {
            return None;
        }
        let last = self.tick_of(self.next_index + u64::from(self.spec.samples_per_block) - 1) + 1;
        Some(self.clock().epoch_host_ns + self.clock().since_epoch_ns(last).ceil() as i64)
    }

    /// The next thing to say at `host_ns`, if any is due. `rig_at` gives the rig at a second of the scenario.
    ///
    /// # Errors
    /// When it does not fit a frame.
    pub fn next(&mut self, host_ns: i64, rig_at: impl Fn(f64) -> Row) -> Result<Option<Outgoing>, EncodeError> {
        if let Some(outgoing) = self.queue.pop_front() {
            return Ok(Some(outgoing));
        }
        let due = |due_ns: Option<i64>| due_ns.is_some_and(|due_ns| due_ns <= host_ns);
        if !self.running {
            return Ok(None);
        }
        if self.spec.text.is_some() {
            return Ok(due(self.due_ns()).then(|| self.line(&rig_at)));
        }
        if self.next_second_ns <= host_ns {
            self.next_second_ns += EVERY_SECOND_NS;
            let status = self.status(host_ns)?;
            self.queue.push_back(status);
            return self.description().map(Some);
        }
        if due(self.edge_due_ns()) {
            return self.edge();
        }
        if due(self.block_due_ns()) {
            return self.block(host_ns, rig_at).map(Some);
        }
        Ok(None)
    }

    /// Samples of the next block, packed.
    fn samples(&mut self, rig_at: impl Fn(f64) -> Row) -> Vec<u8> {
        let mut samples = Vec::with_capacity(usize::from(self.spec.samples_per_block) * self.sample_len());
        for index in self.next_index..self.next_index + u64::from(self.spec.samples_per_block) {
            for (counts, channel) in self.counts_at(index, &rig_at).into_iter().zip(&self.channels) {
                frames::pack(channel.encoding, counts, &mut samples);
            }
        }
        samples
    }

    /// Counts of every channel at a sample index.
    fn counts_at(&mut self, index: u64, rig_at: &impl Fn(f64) -> Row) -> Vec<i32> {
        let clock = self.clock();
        let interval_ns = 1e9 * f64::from(self.spec.ticks_per_sample) / TICK_RATE_HZ / OVERSAMPLING as f64;
        let since_boot_ns = clock.since_epoch_ns(self.tick_of(index));
        let at_ns = clock.epoch_host_ns as f64 + since_boot_ns;
        let rows = std::array::from_fn(|back| {
            let before_ns = (OVERSAMPLING - 1 - back) as f64 * interval_ns;
            rig_at(self.scenario_s(at_ns - before_ns))
        });
        self.sensors.iter_mut().map(|sensor| sensor.counts(&rows, since_boot_ns * 1e-9)).collect()
    }

    fn sample_len(&self) -> usize {
        self.channels.iter().map(|channel| channel.encoding.width()).sum()
    }
}

/// A channel as this scenario's crew built it in.
fn built(channel: &ChannelSpec, performance: &Performance) -> ChannelSpec {
    let mut built = *channel;
    if channel.quantity == Quantity::SpecificForce {
        let range_mps2 = performance.scenario.accelerometer_range_g * STANDARD_GRAVITY_MPS2;
        let range_counts = (range_mps2 / channel.scale).round();
        built.counts_max = built.counts_max.min(range_counts);
    }
    built
}

/// The hidden errors of every channel of a device.
pub fn drawn_errors(spec: &DeviceSpec, idx: u8, seed: u64, cell_offset_n: Option<f64>) -> Vec<Errors> {
    let mut draw = Draw::new(seed, Purpose::SensorErrors { device: idx });
    let of_channel = |channel: &ChannelSpec| {
        let mut errors = Errors::drawn(&channel.spread, &mut draw);
        if channel.quantity.word() == "force" {
            errors.zero += cell_offset_n.unwrap_or(0.0);
        }
        errors
    };
    spec.channels.iter().map(of_channel).collect()
}
