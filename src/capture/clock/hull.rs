//! Bounds of a clock, second by second, each kept as a convex hull: of thousands of points only the few that can touch
//! a line from below remain, whatever its slope.

use std::collections::VecDeque;

/// Seconds of device time in one bin.
const BIN_S: f64 = 1.0;

#[derive(Debug, Clone, Copy, PartialEq)]
pub(super) struct Point {
    pub(super) x_s: f64,
    pub(super) y_ns: f64,
}

/// Points from above, within one second.
#[derive(Debug, Clone, Default)]
pub(super) struct Bin {
    /// Lower convex hull, x rising.
    hull: Vec<Point>,
    pub(super) n: f64,
    sum_x_s: f64,
    sum_y_ns: f64,
}

impl Bin {
    fn add(&mut self, point: Point) {
        self.n += 1.0;
        self.sum_x_s += point.x_s;
        self.sum_y_ns += point.y_ns;
        let in_order = self.hull.last().is_none_or(|last| last.x_s < point.x_s);
        if in_order {
            push(&mut self.hull, point);
        } else {
            let mut points = std::mem::take(&mut self.hull);
            points.push(point);
            points.sort_by(|a, b| a.x_s.total_cmp(&b.x_s).then(a.y_ns.total_cmp(&b.y_ns)));
            points.dedup_by(|later, first| later.x_s == first.x_s);
            points.into_iter().for_each(|point| push(&mut self.hull, point));
        }
    }

    /// Least height of the bin's points over the line of slope `slope` through zero at `centre_s`.
    pub(super) fn least(&self, slope: f64, centre_s: f64) -> f64 {
        least(&self.hull, slope, centre_s)
    }

    /// Mean height, likewise.
    pub(super) fn mean(&self, slope: f64, centre_s: f64) -> f64 {
        (self.sum_y_ns - slope * (self.sum_x_s - self.n * centre_s)) / self.n
    }

    fn range_s(&self) -> Option<(f64, f64)> {
        Some((self.hull.first()?.x_s, self.hull.last()?.x_s))
    }
}

/// Least height of points over the line of slope `slope` through zero at `centre_s`; infinite for no points.
pub(super) fn least(points: &[Point], slope: f64, centre_s: f64) -> f64 {
    points.iter().map(|p| p.y_ns - slope * (p.x_s - centre_s)).fold(f64::INFINITY, f64::min)
}

/// The lower hull of all points of bins that come in order.
pub(super) fn hull_of(bins: &[&Bin]) -> Vec<Point> {
    let mut hull = Vec::new();
    bins.iter().flat_map(|bin| &bin.hull).for_each(|point| push(&mut hull, *point));
    hull
}

/// Adds a point to the right of a lower hull; points that it leaves above go.
fn push(hull: &mut Vec<Point>, point: Point) {
    while let [.., a, b] = hull[..] {
        let turn = (b.x_s - a.x_s) * (point.y_ns - a.y_ns) - (point.x_s - a.x_s) * (b.y_ns - a.y_ns);
        if turn > 0.0 {
            break;
        }
        hull.pop();
    }
    hull.push(point);
}

/// One bound of a clock: points that the clock's line lies below. (Points from below come with y turned over.)
#[derive(Debug, Clone, Default)]
pub(super) struct Bound {
    bins: VecDeque<(i64, Bin)>,
}

impl Bound {
    pub(super) fn add(&mut self, point: Point) {
        let number = (point.x_s / BIN_S).floor() as i64;
        let place = self.bins.partition_point(|(at, _)| *at < number);
        if self.bins.get(place).is_none_or(|(at, _)| *at != number) {
            self.bins.insert(place, (number, Bin::default()));
        }
        self.bins[place].1.add(point);
    }

    /// Lets go of bins that end before `x_s`.
    pub(super) fn forget_before(&mut self, x_s: f64) {
        while self.bins.front().is_some_and(|(number, _)| (*number as f64 + 1.0) * BIN_S < x_s) {
            self.bins.pop_front();
        }
    }

    /// Bins that touch the window.
    pub(super) fn window(&self, from_s: f64, to_s: f64) -> Vec<&Bin> {
        let inside = |bin: &Bin| bin.range_s().is_some_and(|(first, last)| last >= from_s && first <= to_s);
        self.bins.iter().map(|(_, bin)| bin).filter(|bin| inside(bin)).collect()
    }

    pub(super) fn range_s(&self) -> Option<(f64, f64)> {
        let first = self.bins.front()?.1.range_s()?.0;
        let last = self.bins.back()?.1.range_s()?.1;
        Some((first, last))
    }
}

/// First and last second of several bins.
pub(super) fn range_of(bins: &[&Bin]) -> Option<(f64, f64)> {
    let ranges = bins.iter().filter_map(|bin| bin.range_s());
    ranges.reduce(|(first, last), (from, to)| (first.min(from), last.max(to)))
}
