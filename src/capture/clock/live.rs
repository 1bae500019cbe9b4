//! The causal map: what is known now, from the last half minute.

use super::corridor::{WINDOW_S, fit};
use super::seal::{Mark, Stretch};
use super::{BlockTimes, ClockPiece, NS, NominalClock, TimeExchange, stamps};
use crate::capture::sample::TimeBase;

/// The line is fitted again when the device's time has moved by this, or by a tenth of what is known.
const REFIT_S: f64 = 0.1;
const REFIT_PART: f64 = 0.1;

/// A device's clock map that never looks ahead. A new boot id starts afresh.
#[derive(Debug, Clone)]
pub struct LiveClock {
    nominal: NominalClock,
    boot_id: u32,
    stretch: Option<Stretch>,
    fitted: Option<Fitted>,
}

#[derive(Debug, Clone, Copy)]
struct Fitted {
    at_s: f64,
    piece: ClockPiece,
}

impl LiveClock {
    pub const fn new(nominal: NominalClock) -> Self {
        Self { nominal, boot_id: 0, stretch: None, fitted: None }
    }

    /// Takes note of a block's arrival.
    pub fn arrived(&mut self, times: &BlockTimes) {
        self.add(&Mark::of_arrival(times));
    }

    /// Takes note of an answered time request.
    pub fn exchanged(&mut self, times: &TimeExchange) {
        for mark in Mark::of_exchange(times) {
            self.add(&mark);
        }
    }

    /// The map as known now; `None` before the first arrival. Its uncertainty holds at its last tick.
    pub fn piece(&self) -> Option<&ClockPiece> {
        self.fitted.as_ref().map(|fitted| &fitted.piece)
    }

    fn add(&mut self, mark: &Mark) {
        if let TimeBase::Arrival { half_width_ns } = self.nominal.time_base {
            let piece = stamps::piece(mark.boot_id, mark.tick, mark.tick, self.nominal.tick_rate_hz, half_width_ns);
            self.fitted = Some(Fitted { at_s: 0.0, piece });
            return;
        }
        let same_clock = |stretch: &&mut Stretch| self.boot_id == mark.boot_id && !stretch.contradicts(mark);
        match self.stretch.as_mut().filter(same_clock) {
            Some(stretch) => stretch.add(mark),
            None => {
                self.boot_id = mark.boot_id;
                self.stretch = Some(Stretch::starting_at(self.nominal, mark));
                self.fitted = None;
            }
        }
        self.refit();
    }

    fn refit(&mut self) {
        let Some(stretch) = self.stretch.as_mut() else { return };
        let Some((first_s, now_s)) = stretch.bounds.range_s() else { return };
        let due_s = |fitted: Fitted| fitted.at_s + REFIT_S.min(REFIT_PART * (now_s - first_s));
        if self.fitted.is_some_and(|fitted| now_s < due_s(fitted)) {
            return;
        }
        stretch.bounds.above.forget_before(now_s - WINDOW_S);
        stretch.bounds.below.forget_before(now_s - WINDOW_S);
        let Some(line) = fit(&stretch.bounds, self.nominal, |length_s| (now_s - length_s, now_s)) else {
            return;
        };
        let axes = &stretch.axes;
        let origin_tick = axes.tick(now_s);
        let at_origin_s = axes.x_s(origin_tick);
        let piece = ClockPiece {
            boot_id: self.boot_id,
            first_tick: axes.tick(first_s),
            last_tick: origin_tick,
            origin_tick,
            host_ns_at_origin: axes.host_ns(at_origin_s, line.y_ns(at_origin_s)),
            ns_per_tick: (NS + line.slope_ns_per_s) * axes.s_per_tick,
            u_ns: line.u_ns(now_s),
            asymmetry_ns: line.asymmetry_ns,
            method: line.method,
        };
        self.fitted = Some(Fitted { at_s: now_s, piece });
    }
}
