//! The line that fits best between a clock's bounds, and how well it is known.

use super::hull::{Bin, Bound, Point, hull_of, least, range_of};
use super::{ClockMethod, NominalClock};
use crate::capture::sample::TimeBase;

/// No clock is believed to be farther off than this (ceramic resonators reach 1 %: common practice, no published
/// source).
pub(super) const STEEPEST_NS_PER_S: f64 = 2e7;
/// With arrivals alone, a delay that all of them share cannot be seen; it is taken to be at most this: 2 ms of path and
/// one USB frame whose phase the blocks may not sweep.
const HIDDEN_DELAY_NS: f64 = 3e6;
/// Part of the mean lateness that may hide under the earliest arrivals when their phase does not sweep.
const UNSWEPT_PART: f64 = 0.4;
/// Weight of the nominal rate while there is one second to go by; it falls with the square of the seconds.
const NOMINAL_WEIGHT_NS: f64 = 1e6;
/// A clock is taken to be worse than its stated tolerance when the corridor is wider at another rate by this and by
/// this many mean latenesses.
const DISTRUST_NS: f64 = 1e6;
const DISTRUST_LATENESS: f64 = 3.0;
/// Added to a clock's stated tolerance before it is used as a prior.
const TOLERANCE_MARGIN_PPM: f64 = 100.0;
const NS_PER_S_PER_PPM: f64 = 1e3;
const GOLDEN: f64 = 0.618_033_988_749_894_8;
const N_SECTIONS: u32 = 56;
/// To within a part per million.
const N_SECTIONS_ROUGH: u32 = 22;
/// Device time that a line may be fitted to.
const WINDOWS_S: [f64; 4] = [WINDOW_S, 15.0, 7.5, 3.75];
pub(super) const WINDOW_S: f64 = 30.0;
/// USB adapters may hold the first arrivals back by this (their default timer: field experience, no published source);
/// shared among the arrivals, because any of them may be early.
const FIRST_HOLD_NS: f64 = 1.6e7;
/// A shorter window must be steadier by this to be taken.
const STEADIER: f64 = 0.7;
/// Requests that miss the line by no more than this show no wander.
const STEADY_NS: f64 = 3e4;
/// Part of the seconds that may be late as a whole (stalls) and are not taken for scatter.
const PUNCTUAL_PART: f64 = 0.8;
/// Fewer bins than this say little about their own scatter.
const N_BINS_FOR_SCATTER: usize = 3;

/// Both bounds of one stretch of a clock.
#[derive(Debug, Clone, Default)]
pub(super) struct Bounds {
    /// Arrivals.
    pub(super) above: Bound,
    /// Requests, y turned over.
    pub(super) below: Bound,
}

impl Bounds {
    pub(super) fn range_s(&self) -> Option<(f64, f64)> {
        let ranges = [self.above.range_s(), self.below.range_s()];
        ranges.into_iter().flatten().reduce(|(first, last), (from, to)| (first.min(from), last.max(to)))
    }
}

/// A line through a corridor: host time gained, in ns, at nominal device time x.
#[derive(Debug, Clone, Copy)]
pub(super) struct Line {
    centre_s: f64,
    middle_ns: f64,
    pub(super) slope_ns_per_s: f64,
    /// Half the corridor's width.
    pub(super) asymmetry_ns: f64,
    jitter_ns: f64,
    /// By how much the requests of a second miss the line; more than that at its ends, where a bent clock leaves it.
    unsteady_ns: f64,
    u_slope_ns_per_s: f64,
    pub(super) method: ClockMethod,
}

impl Line {
    pub(super) fn y_ns(&self, x_s: f64) -> f64 {
        self.middle_ns + self.slope_ns_per_s * (x_s - self.centre_s)
    }

    /// Standard uncertainty at `x_s`: the asymmetry is as likely anywhere in the corridor (GUM 4.3.7).
    pub(super) fn u_ns(&self, x_s: f64) -> f64 {
        let rate_ns = self.u_slope_ns_per_s * (x_s - self.centre_s);
        (self.asymmetry_ns / 3_f64.sqrt()).hypot(self.jitter_ns).hypot(rate_ns)
    }
}

/// The line for the longest window in which the rate is steady; the ends of windows `window` gives by their
/// length. `None` when no arrival is near.
///
/// Whether it is steady, the requests tell: their phase is dithered, while arrivals may beat with a USB timer for many
/// seconds. Without requests the longest window is taken.
pub(super) fn fit(bounds: &Bounds, nominal: NominalClock, window: impl Fn(f64) -> (f64, f64)) -> Option<Line> {
    let lines = WINDOWS_S.iter().filter_map(|&length_s| {
        let (from_s, to_s) = window(length_s);
        Some(Corridor::within(bounds, from_s, to_s)?.line(nominal))
    });
    lines.reduce(|long, short| {
        let wanders = long.unsteady_ns > STEADY_NS && short.unsteady_ns < STEADIER * long.unsteady_ns;
        if short.method == ClockMethod::Exchanges && wanders { short } else { long }
    })
}

fn hidden_delay_ns(nominal: NominalClock) -> f64 {
    let more_ns = if let TimeBase::Printed { hidden_delay_ns } = nominal.time_base { hidden_delay_ns } else { 0.0 };
    HIDDEN_DELAY_NS + more_ns
}

struct Corridor<'b> {
    above: Side<'b>,
    below: Option<Side<'b>>,
    centre_s: f64,
    span_s: f64,
}

/// One bound within a window.
struct Side<'b> {
    bins: Vec<&'b Bin>,
    hull: Vec<Point>,
}

impl<'b> Side<'b> {
    fn within(bound: &'b Bound, from_s: f64, to_s: f64) -> Option<Self> {
        let bins = bound.window(from_s, to_s);
        let hull = hull_of(&bins);
        (!hull.is_empty()).then_some(Self { bins, hull })
    }
}

impl<'b> Corridor<'b> {
    fn within(bounds: &'b Bounds, from_s: f64, to_s: f64) -> Option<Self> {
        let above = Side::within(&bounds.above, from_s, to_s)?;
        let below = Side::within(&bounds.below, from_s, to_s);
        let (first_s, last_s) = range_of(&above.bins)?;
        Some(Self { above, below, centre_s: 0.5 * (first_s + last_s), span_s: last_s - first_s })
    }

    fn line(&self, nominal: NominalClock) -> Line {
        let rate_prior = (2.0 * nominal.tolerance_ppm + TOLERANCE_MARGIN_PPM) * NS_PER_S_PER_PPM;
        let weight_ns = NOMINAL_WEIGHT_NS / (self.span_s * self.span_s).max(1.0);
        let (slope, rate_believed) = self.slope(rate_prior, weight_ns);
        let late = Lateness::of(&self.above, slope, self.centre_s);
        let unswept_ns = (UNSWEPT_PART * late.mean_ns).max(FIRST_HOLD_NS / late.n);
        let mut line = Line {
            centre_s: self.centre_s,
            middle_ns: late.bound_ns,
            slope_ns_per_s: slope,
            asymmetry_ns: hidden_delay_ns(nominal) + unswept_ns,
            jitter_ns: late.scatter_ns,
            unsteady_ns: 0.0,
            u_slope_ns_per_s: (2.0 * late.scatter_ns + weight_ns + unswept_ns) / self.span_s,
            method: ClockMethod::Arrivals,
        };
        if let Some(below) = &self.below {
            let early = Lateness::of(below, -slope, self.centre_s);
            let (top_ns, bottom_ns) = (late.bound_ns, -early.bound_ns);
            line.middle_ns = 0.5 * (top_ns + bottom_ns);
            line.asymmetry_ns = 0.5 * (top_ns - bottom_ns).abs();
            // Bounds that cross (the rate wandered) are at least as far off as they cross.
            line.unsteady_ns = early.unsteady_ns + (bottom_ns - top_ns).max(0.0);
            line.jitter_ns = 0.5 * late.scatter_ns.hypot(early.scatter_ns).hypot(line.unsteady_ns);
            line.u_slope_ns_per_s = (2.0 * line.jitter_ns + 4.0 * line.unsteady_ns + weight_ns) / self.span_s;
            line.method = ClockMethod::Exchanges;
        }
        line.u_slope_ns_per_s = line.u_slope_ns_per_s.min(rate_believed / 3_f64.sqrt());
        line
    }

    /// The slope, and how far from the nominal rate the clock is believed to be at most. A stated tolerance is believed
    /// until the bounds leave clearly more room elsewhere; what they could not have shown yet is reckoned with.
    fn slope(&self, rate_prior: f64, weight_ns: f64) -> (f64, f64) {
        let slope = peak(N_SECTIONS, |slope| self.width_ns(slope) - weight_ns * (slope / rate_prior).powi(2));
        let free = peak(N_SECTIONS_ROUGH, |slope| self.width_ns(slope));
        let usual_ns =
            DISTRUST_NS + DISTRUST_LATENESS * Lateness::of(&self.above, free, self.centre_s).mean_ns.max(0.0);
        if self.width_ns(free) - self.width_ns(slope) > usual_ns {
            return (peak(N_SECTIONS, |slope| self.width_ns(slope)), STEEPEST_NS_PER_S);
        }
        let not_shown = (2.0 * usual_ns / self.span_s.max(f64::MIN_POSITIVE)).min(STEEPEST_NS_PER_S);
        (slope, rate_prior.max(not_shown))
    }

    /// How far apart two lines of this slope stay that touch the bounds.
    fn width_ns(&self, slope: f64) -> f64 {
        let below_ns = self.below.as_ref().map_or(0.0, |below| least(&below.hull, -slope, self.centre_s));
        least(&self.above.hull, slope, self.centre_s) + below_ns
    }
}

/// The slope where a concave function peaks, by golden section.
fn peak(n_sections: u32, height: impl Fn(f64) -> f64) -> f64 {
    let (mut low, mut high) = (-STEEPEST_NS_PER_S, STEEPEST_NS_PER_S);
    let mut inner = [high - GOLDEN * (high - low), low + GOLDEN * (high - low)];
    let mut heights = inner.map(&height);
    for _ in 0..n_sections {
        if heights[0] < heights[1] {
            low = inner[0];
            inner = [inner[1], low + GOLDEN * (high - low)];
            heights = [heights[1], height(inner[1])];
        } else {
            high = inner[1];
            inner = [high - GOLDEN * (high - low), inner[0]];
            heights = [height(inner[0]), heights[0]];
        }
    }
    0.5 * (low + high)
}

/// How late points are over the bound that they give.
struct Lateness {
    /// Number of points.
    n: f64,
    bound_ns: f64,
    /// Of the earliest point of a middling second, over the earliest of all: how well one second finds the bound.
    scatter_ns: f64,
    /// The same of all seconds but those late as a whole.
    unsteady_ns: f64,
    /// Of all points, in a middling second, so that a stall does not count.
    mean_ns: f64,
}

impl Lateness {
    fn of(side: &Side<'_>, slope: f64, centre_s: f64) -> Self {
        let bound_ns = least(&side.hull, slope, centre_s);
        let mean_ns = quantile(side.bins.iter().map(|bin| bin.mean(slope, centre_s) - bound_ns), 0.5);
        let leasts = || side.bins.iter().map(|bin| bin.least(slope, centre_s) - bound_ns);
        let few = side.bins.len() < N_BINS_FOR_SCATTER;
        let scatter_ns = if few { mean_ns } else { quantile(leasts(), 0.5) };
        let unsteady_ns = if few { mean_ns } else { quantile(leasts(), PUNCTUAL_PART) };
        Self { n: side.bins.iter().map(|bin| bin.n).sum(), bound_ns, scatter_ns, unsteady_ns, mean_ns }
    }
}

/// The value that `part` of the values do not exceed; 0 of none.
fn quantile(values: impl Iterator<Item = f64>, part: f64) -> f64 {
    let mut values: Vec<f64> = values.collect();
    values.sort_by(f64::total_cmp);
    let place = (part * values.len() as f64) as usize;
    values.get(place.min(values.len().saturating_sub(1))).copied().unwrap_or(0.0)
}
