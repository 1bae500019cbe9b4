//! The two-sided map: every piece is fitted to the times before and after it.

use super::corridor::{Bounds, Line, STEEPEST_NS_PER_S, WINDOW_S, fit};
use super::hull::Point;
use super::{Axes, BlockTimes, ClockPiece, NS, NominalClock, TimeExchange, stamps};
use crate::capture::sample::TimeBase;

/// Device time between the knots of a map.
const KNOT_EVERY_S: f64 = 2.5;
/// Host stamps may be this much off before times count as contradicting each other.
const STAMP_SLACK_NS: f64 = 1e7;

/// A device's clock map over everything given, piecewise affine and continuous between contradictions; per boot, in
/// order of time. The order of the input does not matter.
pub fn fit_clock(nominal: NominalClock, arrivals: &[BlockTimes], exchanges: &[TimeExchange]) -> Vec<ClockPiece> {
    if let TimeBase::Arrival { half_width_ns } = nominal.time_base {
        return stamps::pieces(arrivals, nominal.tick_rate_hz, half_width_ns);
    }
    let mut marks = marks(arrivals, exchanges);
    let mut pieces = Vec::new();
    let mut boots: Vec<u32> = Vec::new();
    for mark in &marks {
        if !boots.contains(&mark.boot_id) {
            boots.push(mark.boot_id);
        }
    }
    marks.sort_by_key(|mark| (mark.tick, mark.host_ns));
    for boot_id in boots {
        let of_boot = marks.iter().filter(|mark| mark.boot_id == boot_id);
        for stretch in stretches(nominal, of_boot) {
            pieces.extend(fit_stretch(nominal, boot_id, &stretch));
        }
    }
    pieces
}

/// The piece for a tick: the one that holds it, or the nearest of its boot.
pub fn piece_at(pieces: &[ClockPiece], boot_id: u32, tick: u64) -> Option<&ClockPiece> {
    let outside = |piece: &ClockPiece| {
        if tick < piece.first_tick { piece.first_tick - tick } else { tick.saturating_sub(piece.last_tick) }
    };
    pieces.iter().filter(|piece| piece.boot_id == boot_id).min_by_key(|piece| outside(piece))
}

/// One bound: the device's `tick` came before (`above`) or after `host_ns`.
#[derive(Debug, Clone, Copy)]
pub(super) struct Mark {
    pub(super) boot_id: u32,
    pub(super) tick: u64,
    pub(super) host_ns: i64,
    pub(super) above: bool,
}

/// In order of host time, so that boots come in their order.
fn marks(arrivals: &[BlockTimes], exchanges: &[TimeExchange]) -> Vec<Mark> {
    let mut marks: Vec<Mark> = arrivals.iter().map(Mark::of_arrival).collect();
    marks.extend(exchanges.iter().flat_map(Mark::of_exchange));
    marks.sort_by_key(|mark| mark.host_ns);
    marks
}

impl Mark {
    pub(super) fn of_arrival(times: &BlockTimes) -> Self {
        Self { boot_id: times.boot_id, tick: times.sent_tick, host_ns: times.host_ns, above: true }
    }

    pub(super) fn of_exchange(times: &TimeExchange) -> [Self; 2] {
        let (boot_id, asked_ns) = (times.boot_id, times.requested_host_ns);
        [
            Self { boot_id, tick: times.received_tick, host_ns: asked_ns, above: false },
            Self { boot_id, tick: times.sent_tick, host_ns: times.replied_host_ns, above: true },
        ]
    }
}

/// Marks that one continuous clock can explain.
#[derive(Debug, Clone)]
pub(super) struct Stretch {
    pub(super) axes: Axes,
    pub(super) bounds: Bounds,
    watch: Watch,
}

/// What the marks so far allow the clock to be at `x_s`, if its rate stays within reason.
#[derive(Debug, Clone, Copy)]
struct Watch {
    x_s: f64,
    at_most_ns: f64,
    at_least_ns: f64,
}

impl Stretch {
    pub(super) fn starting_at(nominal: NominalClock, mark: &Mark) -> Self {
        let s_per_tick = 1.0 / nominal.tick_rate_hz;
        let axes = Axes { origin_tick: mark.tick, origin_host_ns: mark.host_ns, s_per_tick };
        let watch = Watch { x_s: 0.0, at_most_ns: f64::INFINITY, at_least_ns: f64::NEG_INFINITY };
        let mut stretch = Self { axes, bounds: Bounds::default(), watch };
        stretch.add(mark);
        stretch
    }

    /// Whether the mark contradicts the ones before it, or comes too long after them to say.
    pub(super) fn contradicts(&self, mark: &Mark) -> bool {
        let Point { x_s, y_ns } = self.axes.point(mark.tick, mark.host_ns);
        let apart_s = (x_s - self.watch.x_s).abs();
        if apart_s > WINDOW_S {
            return true;
        }
        let slack_ns = STAMP_SLACK_NS + STEEPEST_NS_PER_S * apart_s;
        if mark.above { y_ns < self.watch.at_least_ns - slack_ns } else { y_ns > self.watch.at_most_ns + slack_ns }
    }

    pub(super) fn add(&mut self, mark: &Mark) {
        let point = self.axes.point(mark.tick, mark.host_ns);
        let drift_ns = STEEPEST_NS_PER_S * (point.x_s - self.watch.x_s).abs();
        let Watch { at_most_ns, at_least_ns, .. } = self.watch;
        self.watch = Watch {
            x_s: point.x_s,
            at_most_ns: if mark.above { point.y_ns.min(at_most_ns + drift_ns) } else { at_most_ns + drift_ns },
            at_least_ns: if mark.above { at_least_ns - drift_ns } else { point.y_ns.max(at_least_ns - drift_ns) },
        };
        if mark.above {
            self.bounds.above.add(point);
        } else {
            self.bounds.below.add(Point { y_ns: -point.y_ns, ..point });
        }
    }
}

fn stretches<'m>(nominal: NominalClock, marks: impl Iterator<Item = &'m Mark>) -> Vec<Stretch> {
    let mut stretches: Vec<Stretch> = Vec::new();
    for mark in marks {
        match stretches.last_mut().filter(|stretch| !stretch.contradicts(mark)) {
            Some(stretch) => stretch.add(mark),
            None => stretches.push(Stretch::starting_at(nominal, mark)),
        }
    }
    stretches
}

fn fit_stretch(nominal: NominalClock, boot_id: u32, stretch: &Stretch) -> Vec<ClockPiece> {
    let Some((first_s, last_s)) = stretch.bounds.range_s() else { return Vec::new() };
    let n_pieces = ((last_s - first_s) / KNOT_EVERY_S).round().max(1.0);
    let knot = |number: f64| -> Option<(f64, Line)> {
        let x_s = first_s + (last_s - first_s) * number / n_pieces;
        let window = |length_s: f64| {
            let from_s = (x_s - 0.5 * length_s).min(last_s - length_s).max(first_s);
            (from_s, from_s + length_s)
        };
        Some((x_s, fit(&stretch.bounds, nominal, window)?))
    };
    let knots: Vec<_> = (0..=n_pieces as u32).filter_map(|number| knot(number.into())).collect();
    knots.windows(2).map(|pair| piece(&stretch.axes, boot_id, pair[0], pair[1])).collect()
}

/// The piece that joins two knots.
fn piece(axes: &Axes, boot_id: u32, (from_s, from): (f64, Line), (to_s, to): (f64, Line)) -> ClockPiece {
    let (from_ns, to_ns) = (from.y_ns(from_s), to.y_ns(to_s));
    let length_s = to_s - from_s;
    let slope = if length_s > 0.0 { (to_ns - from_ns) / length_s } else { from.slope_ns_per_s };
    let worse = if to.u_ns(to_s) > from.u_ns(from_s) { (to_s, to) } else { (from_s, from) };
    let origin_tick = axes.tick(from_s);
    let at_origin_s = axes.x_s(origin_tick);
    ClockPiece {
        boot_id,
        first_tick: origin_tick,
        last_tick: axes.tick(to_s),
        origin_tick,
        host_ns_at_origin: axes.host_ns(at_origin_s, from_ns + slope * (at_origin_s - from_s)),
        ns_per_tick: (NS + slope) * axes.s_per_tick,
        u_ns: worse.1.u_ns(worse.0),
        asymmetry_ns: worse.1.asymmetry_ns,
        method: worse.1.method,
    }
}
