//! What a faulty line does to the bytes of one device, and when cable, power and description change.

use crate::draw::{Draw, Purpose};
use crate::faults::{FaultKind, Timed};

/// Bytes in one USB packet of a serial adapter (64 less two of status).
pub const PACKET_LEN: usize = 62;
/// Garbage at 1 Mbit/s, ten bits a byte.
const GARBAGE_BYTES_PER_S: f64 = 1e5;
/// Most garbage that is made up at once.
const GARBAGE_LEN_MAX: f64 = 4000.0;

/// A change at one second of the scenario.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Change {
    pub t_s: f64,
    pub what: ChangeKind,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ChangeKind {
    CableOut,
    CableIn,
    PowerOff,
    Boot,
    NewDescription,
}

/// The line of one device.
#[derive(Debug, Clone)]
pub struct Line {
    faults: Vec<Timed>,
    draw: Draw,
    last_noise_s: f64,
    said_oversize: bool,
}

/// What came out of the line.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct Passed {
    pub bytes: Vec<u8>,
    /// Not what went in.
    pub touched: bool,
}

impl Line {
    pub fn new(faults: &[Timed], seed: u64, device: u8) -> Self {
        let draw = Draw::new(seed, Purpose::Line { device });
        Self { faults: faults.to_vec(), draw, last_noise_s: f64::MIN, said_oversize: false }
    }

    /// Every change to come, in the order of time.
    pub fn changes(&self) -> Vec<Change> {
        let mut changes = Vec::new();
        for fault in &self.faults {
            let (first, last) = match fault.kind {
                FaultKind::CablePull => (ChangeKind::CableOut, Some(ChangeKind::CableIn)),
                FaultKind::Reboot => (ChangeKind::PowerOff, Some(ChangeKind::Boot)),
                FaultKind::ChangedDescription => (ChangeKind::NewDescription, None),
                _ => continue,
            };
            changes.push(Change { t_s: fault.from_s, what: first });
            changes.extend(last.map(|what| Change { t_s: fault.to_s, what }));
        }
        changes.sort_by(|a, b| a.t_s.total_cmp(&b.t_s));
        changes
    }

    fn value(&self, kind: FaultKind, t_s: f64) -> f64 {
        self.faults.iter().filter(|fault| fault.kind == kind && fault.holds_at(t_s)).map(|fault| fault.value).sum()
    }

    /// The end of the stall that holds at `t_s`.
    pub fn stalled_until_s(&self, t_s: f64) -> Option<f64> {
        let stall = |fault: &&Timed| fault.kind == FaultKind::Stall && fault.holds_at(t_s);
        self.faults.iter().find(stall).map(|fault| fault.to_s)
    }

    /// Timer of USB packets, when the line has them.
    pub fn packet_timer_s(&self) -> Option<f64> {
        self.faults.iter().find(|fault| fault.kind == FaultKind::Batch).map(|fault| fault.value * 1e-3)
    }

    /// Bytes of a frame as they come out at `t_s`.
    pub fn pass(&mut self, t_s: f64, bytes: &[u8]) -> Passed {
        let bit = self.value(FaultKind::BitErrors, t_s);
        let lost = self.value(FaultKind::LostBytes, t_s);
        let repeated = self.value(FaultKind::RepeatedBytes, t_s);
        if bit + lost + repeated <= 0.0 {
            return Passed { bytes: bytes.to_vec(), touched: false };
        }
        let mut out = Vec::with_capacity(bytes.len() + 8);
        for &byte in bytes {
            if self.draw.happens(lost) {
                continue;
            }
            let flips = (0..8).filter(|_| self.draw.happens(bit)).fold(0, |flips, place| flips | 1 << place);
            out.push(byte ^ flips);
            if self.draw.happens(repeated) {
                out.push(byte ^ flips);
            }
        }
        let touched = out != bytes;
        Passed { bytes: out, touched }
    }

    /// Bytes that nobody sent, which stand on the line before what is sent at `t_s`.
    pub fn noise(&mut self, t_s: f64) -> Vec<u8> {
        let mut noise = Vec::new();
        if self.faults.iter().any(|fault| fault.kind == FaultKind::Garbage && fault.holds_at(t_s)) {
            let n_bytes = ((t_s - self.last_noise_s) * GARBAGE_BYTES_PER_S).clamp(0.0, GARBAGE_LEN_MAX) as usize;
            noise.extend((0..n_bytes).map(|_| self.draw.bits() as u8));
        }
        self.last_noise_s = t_s;
        let oversize = self.faults.iter().find(|fault| fault.kind == FaultKind::Oversize && t_s >= fault.from_s);
        if let (Some(fault), false) = (oversize, self.said_oversize) {
            self.said_oversize = true;
            noise.push(0);
            noise.extend((0..fault.value as usize).map(|idx| 1 + (idx % 255) as u8));
            noise.push(0);
        }
        noise
    }
}
