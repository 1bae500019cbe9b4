//! The same devices in virtual time: what a host would have read, and when, as an iterator. Same options, same bytes.
//!
//! A made-up host starts every device at once and again once a second, asks for the time about ten times a second, and
//! reads each frame a little after it was sent.

use crate::device::{BlockTruth, Device, Outgoing, Request};
use crate::draw::{Draw, Purpose};
use crate::line::{Change, ChangeKind, Line, PACKET_LEN};
use crate::performance::Performance;
use crate::truth::{Played, Truth};
use firmware_protocol::EncodeError;
use std::collections::VecDeque;

/// Host time at which the devices boot.
pub const BOOT_HOST_NS: i64 = 1_000_000_000_000;
const SCENARIO_AFTER_BOOT_NS: i64 = 250_000_000;
/// Devices keep sampling this long after the timeline's end.
const AFTER_END_NS: i64 = 500_000_000;
const START_INTERVAL_NS: i64 = 1_000_000_000;
const REQUEST_INTERVAL_NS: f64 = 100e6;
const REQUEST_DITHER_NS: f64 = 25e6;
/// Time from hand to hand, either way: at least, and mean of the rest (exponential).
const TRANSPORT_LEAST_NS: f64 = 60e3;
const TRANSPORT_SPREAD_NS: f64 = 120e3;
/// From the end of a block's last sample to its handing over.
const PACKING_NS: i64 = 150_000;
/// From a request's arrival to its answer.
const ANSWERING_NS: i64 = 30_000;
/// Between two polls of a device that prints when asked.
const POLL_INTERVAL_NS: i64 = 50_000_000;
const WINDOW_NS: i64 = 50_000_000;

/// Something the host saw or did.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Delivery {
    pub host_ns: i64,
    /// Index into [`Performance::devices`].
    pub device: usize,
    pub what: Delivered,
}

#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Delivered {
    /// One read.
    Bytes(Vec<u8>),
    /// The host sent a time request.
    TimeRequested { token: u32 },
    /// The port is gone.
    Down,
    /// The port is back.
    Up,
}

/// Plays a performance; iterate, then ask for the [`Truth`].
#[derive(Debug)]
pub struct VirtualPlay<'a> {
    performance: &'a Performance,
    hands: Vec<Hand>,
    window_end_ns: i64,
    pending: Vec<Delivery>,
    ready: VecDeque<Delivery>,
}

impl<'a> VirtualPlay<'a> {
    /// Begins to play.
    ///
    /// # Errors
    /// When a frame cannot be made.
    pub fn new(performance: &'a Performance) -> Result<Self, EncodeError> {
        let mut play = Self {
            performance,
            hands: (0..performance.devices.len()).map(|idx| Hand::new(idx, performance)).collect(),
            window_end_ns: BOOT_HOST_NS,
            pending: Vec::new(),
            ready: VecDeque::new(),
        };
        play.extend()?;
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
        let ended = self.window_end_ns == self.last_ns();
        for hand in &mut self.hands {
            hand.run_until(self.window_end_ns, self.performance)?;
            if ended {
                hand.flush(i64::MAX);
            }
            self.pending.append(&mut hand.delivered);
        }
        self.pending.sort_by_key(|delivery| delivery.host_ns);
        let end_ns = if ended { i64::MAX } else { self.window_end_ns };
        let n_ready = self.pending.partition_point(|delivery| delivery.host_ns < end_ns);
        self.ready.extend(self.pending.drain(..n_ready));
        Ok(())
    }

    /// The truth of what was played so far.
    pub fn truth(&self) -> Truth {
        let played: Vec<Played> = self.hands.iter().map(Hand::played).collect();
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

/// A device, its line, and the host's hand at the other end.
#[derive(Debug)]
struct Hand {
    idx: usize,
    device: Device,
    line: Line,
    changes: VecDeque<Change>,
    cable_in: bool,
    blocks: Vec<BlockTruth>,
    touched: Vec<u32>,
    transport: Draw,
    next_request_ns: i64,
    next_start_ns: i64,
    next_poll_ns: i64,
    next_token: u32,
    now_ns: i64,
    last_read_ns: i64,
    /// Bytes that wait for their USB packet to fill, and when they no longer wait.
    packet: Vec<u8>,
    packet_due_ns: i64,
    delivered: Vec<Delivery>,
}

impl Hand {
    fn new(idx: usize, performance: &Performance) -> Self {
        let (number, seed) = (idx as u8, performance.options.seed);
        let mut device = Device::boot(number, performance, BOOT_HOST_NS);
        device.set_scenario_zero(BOOT_HOST_NS + SCENARIO_AFTER_BOOT_NS);
        let line = Line::new(&device.faults, seed, number);
        let text = device.spec.text;
        let polled = text.is_some_and(|text| text.poll.is_some());
        Self {
            idx,
            changes: line.changes().into(),
            line,
            device,
            cable_in: true,
            blocks: Vec::new(),
            touched: Vec::new(),
            transport: Draw::new(seed, Purpose::Transport { device: number }),
            next_request_ns: if text.is_some() { i64::MAX } else { BOOT_HOST_NS + 20_000_000 },
            next_start_ns: if polled { i64::MAX } else { BOOT_HOST_NS },
            next_poll_ns: if polled { BOOT_HOST_NS } else { i64::MAX },
            next_token: 1,
            now_ns: BOOT_HOST_NS,
            last_read_ns: BOOT_HOST_NS,
            packet: Vec::new(),
            packet_due_ns: i64::MAX,
            delivered: Vec::new(),
        }
    }

    fn played(&self) -> Played<'_> {
        Played { device: &self.device, blocks: &self.blocks, touched: &self.touched, taken_ns: &[] }
    }

    fn transport_ns(&mut self) -> i64 {
        let share = self.transport.even(f64::MIN_POSITIVE, 1.0);
        (TRANSPORT_LEAST_NS - TRANSPORT_SPREAD_NS * share.ln()) as i64
    }

    fn host_ns(&self, t_s: f64) -> i64 {
        BOOT_HOST_NS + SCENARIO_AFTER_BOOT_NS + (t_s * 1e9) as i64
    }

    /// Everything that happens before `end_ns`, in the order of time.
    fn run_until(&mut self, end_ns: i64, performance: &Performance) -> Result<(), EncodeError> {
        loop {
            let device_ns = self.device.due_ns().map_or(i64::MAX, |due_ns| due_ns.max(self.now_ns));
            let change_ns = self.changes.front().map_or(i64::MAX, |change| self.host_ns(change.t_s));
            let next_ns =
                device_ns.min(change_ns).min(self.next_request_ns).min(self.next_start_ns).min(self.next_poll_ns);
            if next_ns >= end_ns {
                self.flush(end_ns);
                return Ok(());
            }
            self.now_ns = next_ns;
            if next_ns == change_ns {
                self.change(change_ns)?;
            } else if next_ns == self.next_poll_ns {
                self.next_poll_ns += POLL_INTERVAL_NS;
                self.ask(Request::Poll, next_ns, performance)?;
            } else if next_ns == self.next_start_ns {
                self.next_start_ns += START_INTERVAL_NS;
                self.ask(Request::Describe, next_ns, performance)?;
                self.ask(Request::Start, next_ns, performance)?;
            } else if next_ns == self.next_request_ns {
                self.ask_time(performance)?;
            } else {
                let sent_ns = next_ns + PACKING_NS;
                if let Some(outgoing) = self.device.next(sent_ns, |t_s| performance.trajectory.at(t_s))? {
                    self.send(sent_ns, outgoing);
                }
            }
        }
    }

    fn change(&mut self, host_ns: i64) -> Result<(), EncodeError> {
        let Some(change) = self.changes.pop_front() else { return Ok(()) };
        match change.what {
            ChangeKind::CableOut | ChangeKind::CableIn => {
                self.flush(host_ns);
                self.cable_in = change.what == ChangeKind::CableIn;
                let what = if self.cable_in { Delivered::Up } else { Delivered::Down };
                self.last_read_ns = self.last_read_ns.max(host_ns);
                self.delivered.push(Delivery { host_ns: self.last_read_ns, device: self.idx, what });
                // A host that finds its port again starts the device at once.
                if self.cable_in && self.next_start_ns != i64::MAX {
                    self.next_start_ns = host_ns;
                }
            }
            ChangeKind::PowerOff => self.device.power_off(),
            ChangeKind::Boot => self.device.reboot(host_ns)?,
            ChangeKind::NewDescription => self.device.change_description()?,
        }
        Ok(())
    }

    /// A request of the host's, which leaves at `asked_ns`.
    fn ask(&mut self, request: Request, asked_ns: i64, performance: &Performance) -> Result<(), EncodeError> {
        if !self.cable_in {
            return Ok(());
        }
        let received_ns = asked_ns + self.transport_ns();
        let sent_ns = received_ns + ANSWERING_NS;
        if let Some(answer) =
            self.device.answer(request, received_ns, || sent_ns, |t_s| performance.trajectory.at(t_s))?
        {
            self.send(sent_ns, answer);
        }
        Ok(())
    }

    fn ask_time(&mut self, performance: &Performance) -> Result<(), EncodeError> {
        let (asked_ns, token) = (self.next_request_ns, self.next_token);
        let wait_ns = REQUEST_INTERVAL_NS + self.transport.even(-REQUEST_DITHER_NS, REQUEST_DITHER_NS);
        self.next_request_ns = asked_ns + wait_ns as i64;
        if self.cable_in {
            self.next_token += 1;
            let what = Delivered::TimeRequested { token };
            self.delivered.push(Delivery { host_ns: asked_ns, device: self.idx, what });
            self.ask(Request::Time { token }, asked_ns, performance)?;
        }
        Ok(())
    }

    /// Sends a frame at `host_ns` over the line; the host reads it later, in order.
    fn send(&mut self, host_ns: i64, outgoing: Outgoing) {
        if !self.cable_in {
            return;
        }
        let t_s = self.device.scenario_s(host_ns as f64);
        let mut bytes = self.line.noise(t_s);
        let passed = self.line.pass(t_s, &outgoing.bytes);
        bytes.extend_from_slice(&passed.bytes);
        if let Some(block) = outgoing.block {
            self.touched.extend(passed.touched.then_some(self.blocks.len() as u32));
            self.blocks.push(block);
        }
        let out_ns = self.line.stalled_until_s(t_s).map_or(host_ns, |until_s| self.host_ns(until_s));
        match self.line.packet_timer_s() {
            None => self.deliver(out_ns, bytes),
            Some(timer_s) => self.pack(out_ns, &bytes, timer_s),
        }
    }

    fn deliver(&mut self, host_ns: i64, bytes: Vec<u8>) {
        self.last_read_ns = self.last_read_ns.max(host_ns + self.transport_ns());
        self.delivered.push(Delivery { host_ns: self.last_read_ns, device: self.idx, what: Delivered::Bytes(bytes) });
    }

    /// Full packets go at once; the rest waits for more, or for the timer.
    fn pack(&mut self, host_ns: i64, bytes: &[u8], timer_s: f64) {
        self.flush(host_ns);
        self.packet.extend_from_slice(bytes);
        let n_full = self.packet.len() / PACKET_LEN * PACKET_LEN;
        if n_full > 0 {
            let full: Vec<u8> = self.packet.drain(..n_full).collect();
            self.deliver(host_ns, full);
            self.packet_due_ns = i64::MAX;
        }
        if !self.packet.is_empty() && self.packet_due_ns == i64::MAX {
            self.packet_due_ns = host_ns + (timer_s * 1e9) as i64;
        }
    }

    /// Hands on a packet whose timer ran out before `host_ns`.
    fn flush(&mut self, host_ns: i64) {
        if self.packet_due_ns < host_ns {
            let rest = std::mem::take(&mut self.packet);
            let due_ns = std::mem::replace(&mut self.packet_due_ns, i64::MAX);
            self.deliver(due_ns, rest);
        }
    }
}
