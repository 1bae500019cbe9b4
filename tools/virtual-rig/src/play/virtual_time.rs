//! The same devices in virtual time: what a host would have read, and when, as an iterator. Same options, same bytes.
//!
//! A made-up host starts every device at once, asks for the time about ten times a second, and reads each frame a
//! little after it was sent.

use crate::device::{BlockTruth, DEVICES, Device, Outgoing};
use crate::draw::{Draw, Purpose};
use crate::performance::Performance;
use crate::truth::{Played, Truth};
use firmware_protocol::EncodeError;
use std::collections::VecDeque;

/// Host time at which the devices boot.
pub const BOOT_HOST_NS: i64 = 1_000_000_000_000;
const SCENARIO_AFTER_BOOT_NS: i64 = 250_000_000;
/// Devices keep sampling this long after the timeline's end.
const AFTER_END_NS: i64 = 500_000_000;
const REQUEST_INTERVAL_NS: f64 = 100e6;
const REQUEST_DITHER_NS: f64 = 25e6;
/// Time from hand to hand, either way: at least, and mean of the rest (exponential).
const TRANSPORT_LEAST_NS: f64 = 60e3;
const TRANSPORT_SPREAD_NS: f64 = 120e3;
const WINDOW_NS: i64 = 50_000_000;

/// Something the host saw or did.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Delivery {
    pub host_ns: i64,
    /// Index into [`DEVICES`].
    pub device: usize,
    pub what: Delivered,
}

#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Delivered {
    /// One read.
    Bytes(Vec<u8>),
    /// The host sent a time request.
    TimeRequested { token: u32 },
}

/// A device with its line to the host.
#[derive(Debug)]
struct Line {
    device: Device,
    blocks: Vec<BlockTruth>,
    transport: Draw,
    next_request_ns: i64,
    next_token: u32,
    last_read_ns: i64,
}

/// Plays a performance; iterate, then ask for the [`Truth`].
#[derive(Debug)]
pub struct VirtualPlay<'a> {
    performance: &'a Performance,
    lines: Vec<Line>,
    window_end_ns: i64,
    pending: Vec<Delivery>,
    ready: VecDeque<Delivery>,
}

impl<'a> VirtualPlay<'a> {
    /// # Errors
    /// When a description does not fit a frame.
    pub fn new(performance: &'a Performance) -> Result<Self, EncodeError> {
        let mut play = Self {
            performance,
            lines: (0..DEVICES.len()).map(|idx| Line::new(idx as u8, performance)).collect(),
            window_end_ns: BOOT_HOST_NS,
            pending: Vec::new(),
            ready: VecDeque::new(),
        };
        for (idx, line) in play.lines.iter_mut().enumerate() {
            let description = line.device.description()?;
            line.send(idx, BOOT_HOST_NS, description, &mut play.pending);
            line.device.start(BOOT_HOST_NS);
        }
        Ok(play)
    }

    /// Host time of the scenario's time zero.
    pub fn scenario_zero_host_ns(&self) -> i64 {
        BOOT_HOST_NS + SCENARIO_AFTER_BOOT_NS
    }

    fn last_ns(&self) -> i64 {
        self.scenario_zero_host_ns() + (self.performance.end_s * 1e9) as i64 + AFTER_END_NS
    }

    /// Works out one more window of time.
    fn extend(&mut self) -> Result<(), EncodeError> {
        self.window_end_ns = (self.window_end_ns + WINDOW_NS).min(self.last_ns());
        for (idx, line) in self.lines.iter_mut().enumerate() {
            line.run_until(idx, self.window_end_ns, self.performance, &mut self.pending)?;
        }
        self.pending.sort_by_key(|delivery| delivery.host_ns);
        let end_ns = if self.window_end_ns == self.last_ns() { i64::MAX } else { self.window_end_ns };
        let n_ready = self.pending.partition_point(|delivery| delivery.host_ns < end_ns);
        self.ready.extend(self.pending.drain(..n_ready));
        Ok(())
    }

    /// The truth of what was played so far.
    pub fn truth(&self) -> Truth {
        let played: Vec<Played> =
            self.lines.iter().map(|line| Played { device: &line.device, blocks: &line.blocks }).collect();
        Truth::of(self.performance, "virtual", self.scenario_zero_host_ns(), &played)
    }
}

impl Iterator for VirtualPlay<'_> {
    type Item = Result<Delivery, EncodeError>;

    fn next(&mut self) -> Option<Self::Item> {
        while self.ready.is_empty() {
            if self.window_end_ns >= self.last_ns() {
                return None;
            }
            if let Err(error) = self.extend() {
                return Some(Err(error));
            }
        }
        self.ready.pop_front().map(Ok)
    }
}

impl Line {
    fn new(idx: u8, performance: &Performance) -> Self {
        let mut transport = Draw::new(performance.options.seed, Purpose::Transport { device: idx });
        transport.bits();
        Self {
            device: Device::boot(idx, performance, BOOT_HOST_NS),
            blocks: Vec::new(),
            transport,
            next_request_ns: BOOT_HOST_NS + 20_000_000,
            next_token: 1,
            last_read_ns: BOOT_HOST_NS,
        }
    }

    fn transport_ns(&mut self) -> i64 {
        let share = self.transport.even(f64::MIN_POSITIVE, 1.0);
        (TRANSPORT_LEAST_NS - TRANSPORT_SPREAD_NS * share.ln()) as i64
    }

    /// Sends a frame at `host_ns`; the host reads it later, in order.
    fn send(&mut self, idx: usize, host_ns: i64, outgoing: Outgoing, to: &mut Vec<Delivery>) {
        self.last_read_ns = self.last_read_ns.max(host_ns + self.transport_ns());
        self.blocks.extend(outgoing.block);
        to.push(Delivery { host_ns: self.last_read_ns, device: idx, what: Delivered::Bytes(outgoing.bytes) });
    }

    fn run_until(
        &mut self,
        idx: usize,
        end_ns: i64,
        performance: &Performance,
        to: &mut Vec<Delivery>,
    ) -> Result<(), EncodeError> {
        loop {
            let block_ns = self.device.block_due_ns().unwrap_or(i64::MAX);
            if block_ns.min(self.next_request_ns) >= end_ns {
                return Ok(());
            }
            if self.next_request_ns < block_ns {
                self.ask_time(idx, to)?;
                continue;
            }
            let sent_ns = block_ns + 150_000;
            let zero_ns = (SCENARIO_AFTER_BOOT_NS) as f64;
            let block = self
                .device
                .block(sent_ns, |since_boot_ns| performance.trajectory.at((since_boot_ns - zero_ns) * 1e-9))?;
            self.send(idx, sent_ns, block, to);
            if let Some(status) = self.device.status_if_due(sent_ns)? {
                self.send(idx, sent_ns, status, to);
            }
        }
    }

    fn ask_time(&mut self, idx: usize, to: &mut Vec<Delivery>) -> Result<(), EncodeError> {
        let (asked_ns, token) = (self.next_request_ns, self.next_token);
        to.push(Delivery { host_ns: asked_ns, device: idx, what: Delivered::TimeRequested { token } });
        let received_ns = asked_ns + self.transport_ns();
        let sent_ns = received_ns + 30_000;
        let reply = self.device.time_reply(token, received_ns, sent_ns)?;
        self.send(idx, sent_ns, reply, to);
        self.next_token += 1;
        let wait_ns = REQUEST_INTERVAL_NS + self.transport.even(-REQUEST_DITHER_NS, REQUEST_DITHER_NS);
        self.next_request_ns = asked_ns + wait_ns as i64;
        Ok(())
    }
}
