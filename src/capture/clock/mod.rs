//! Device ticks to host time.
//!
//! What is known for certain: an answer or a block cannot arrive before it was sent, and a request cannot be received
//! before it left. So arrivals bound the device's clock from above and requests bound it from below; the map is a line
//! in the corridor between. Half the corridor's width is the part that two-way timing cannot see (the paths may differ);
//! it is stated as [`ClockPiece::asymmetry_ns`] and enters the standard uncertainty. Without requests there is only the
//! upper bound, and the uncertainty says so.
//!
//! Two maps of the same kind: [`fit_clock`] looks at all times on both sides (for sealing), [`LiveClock`] only back.
//!
//! Method: widest corridor of one slope between the two point sets, by linear programming over their convex hulls, after
//! Moon, Skelly & Towsley, "Estimation and removal of clock skew from network delay measurements", IEEE INFOCOM 1999
//! (from memory), with both directions at once.
//!
//! Refuses to guess: times that contradict each other (the host was suspended, the device's clock stood still) start a
//! new piece; nothing is averaged across.

mod corridor;
mod gather;
mod hull;
mod live;
mod seal;
mod stamps;

pub use gather::{ClockSamples, TimeRequests};
pub use live::LiveClock;
pub use seal::{fit_clock, piece_at};

use super::sample::{Block, DeviceDescription, HostNs, TimeBase};

/// What a device says of its clock.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct NominalClock {
    pub tick_rate_hz: f64,
    pub tolerance_ppm: f64,
    pub time_base: TimeBase,
}

impl NominalClock {
    /// A clock of which the device counts the ticks.
    pub const fn ticking(tick_rate_hz: f64, tolerance_ppm: f64) -> Self {
        Self { tick_rate_hz, tolerance_ppm, time_base: TimeBase::Ticks }
    }
}

impl From<&DeviceDescription> for NominalClock {
    fn from(description: &DeviceDescription) -> Self {
        Self {
            tick_rate_hz: description.tick_rate_hz,
            tolerance_ppm: description.tick_tolerance_ppm,
            time_base: description.time_base,
        }
    }
}

/// Something left the device at `sent_tick` and its read was stamped `host_ns`.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct BlockTimes {
    pub boot_id: u32,
    pub sent_tick: u64,
    pub host_ns: HostNs,
}

impl From<&Block> for BlockTimes {
    fn from(block: &Block) -> Self {
        Self { boot_id: block.boot_id, sent_tick: block.sent_tick, host_ns: block.host_ns }
    }
}

/// A time request with its answer.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct TimeExchange {
    pub boot_id: u32,
    /// Stamped before the request was written to the port.
    pub requested_host_ns: HostNs,
    pub received_tick: u64,
    pub sent_tick: u64,
    /// Stamp of the read that completed the answer.
    pub replied_host_ns: HostNs,
}

/// What bounds a piece of the map.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum ClockMethod {
    /// Requests from below and arrivals from above.
    Exchanges,
    /// Arrivals alone.
    Arrivals,
    /// None: the ticks are the host's own stamps.
    Stamps,
}

/// A straight piece of a device's clock map: `host_ns = host_ns_at_origin + (tick − origin_tick) · ns_per_tick`.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct ClockPiece {
    pub boot_id: u32,
    /// The piece was fitted for ticks from here…
    pub first_tick: u64,
    /// …to here; beyond, it is an extrapolation.
    pub last_tick: u64,
    pub origin_tick: u64,
    pub host_ns_at_origin: f64,
    pub ns_per_tick: f64,
    /// Standard uncertainty of the mapped host time within the piece: asymmetry, jitter and rate together.
    pub u_ns: f64,
    /// How far off the map may be for all that two-way timing can see (half the least round trip), already in `u_ns`.
    /// With arrivals alone: the delay that may hide under the earliest of them, on one side only.
    pub asymmetry_ns: f64,
    pub method: ClockMethod,
}

impl ClockPiece {
    /// How fast the device's clock runs against the host's, in parts per million of its stated rate; `None` where the
    /// ticks are the host's own stamps.
    pub fn drift_ppm(&self, tick_rate_hz: f64) -> Option<f64> {
        (self.method != ClockMethod::Stamps).then(|| (NS / (tick_rate_hz * self.ns_per_tick) - 1.0) * 1e6)
    }

    /// Host monotonic time at device tick `tick`, nanoseconds.
    pub fn host_ns(&self, tick: u64) -> f64 {
        self.host_ns_at_origin + ticks_between(self.origin_tick, tick) * self.ns_per_tick
    }
}

/// `to − from`, exact below 2^53 ticks.
fn ticks_between(from: u64, to: u64) -> f64 {
    if to >= from { (to - from) as f64 } else { -((from - to) as f64) }
}

/// Nanoseconds in a second.
const NS: f64 = 1e9;

/// Coordinates in which a perfect clock is a level line: x is nominal device time, y is what the host's clock gained.
#[derive(Debug, Clone, Copy)]
struct Axes {
    origin_tick: u64,
    origin_host_ns: HostNs,
    s_per_tick: f64,
}

impl Axes {
    fn x_s(&self, tick: u64) -> f64 {
        ticks_between(self.origin_tick, tick) * self.s_per_tick
    }

    fn y_ns(&self, tick: u64, host_ns: HostNs) -> f64 {
        host_ns.saturating_sub(self.origin_host_ns) as f64 - self.x_s(tick) * NS
    }

    fn point(&self, tick: u64, host_ns: HostNs) -> hull::Point {
        hull::Point { x_s: self.x_s(tick), y_ns: self.y_ns(tick, host_ns) }
    }

    /// The tick nearest to `x_s`.
    fn tick(&self, x_s: f64) -> u64 {
        let ticks = (x_s / self.s_per_tick).round();
        if ticks < 0.0 {
            self.origin_tick.saturating_sub(-ticks as u64)
        } else {
            self.origin_tick.saturating_add(ticks as u64)
        }
    }

    /// Host time on the line through (`x_s`, `y_ns`).
    fn host_ns(&self, x_s: f64, y_ns: f64) -> f64 {
        self.origin_host_ns as f64 + x_s * NS + y_ns
    }
}

#[cfg(test)]
mod tests;
