//! Bounds by a change of variable, so that every parameter the model sees is allowed.
//!
//! F. James, *MINUIT reference manual*, CERN Program Library D506 (1994), section 1.3.1: p = a + (b − a)(sin q + 1)/2
//! between two bounds, p = a − 1 + √(q² + 1) above one. A parameter that ends on a bound is said to be there; its
//! uncertainty can't be had from the curvature and it counts as fixed.

/// Where a parameter may lie.
#[derive(Debug, Clone, Copy, PartialEq, Default)]
pub enum Bound {
    #[default]
    Free,
    AtLeast(f64),
    AtMost(f64),
    Between(f64, f64),
}

/// Share of the range, or of the bound's size, within which a parameter counts as being on its bound.
const NEAR: f64 = 1e-7;

impl Bound {
    /// Whether the value is allowed (a bound itself is).
    pub fn allows(self, value: f64) -> bool {
        match self {
            Self::Free => true,
            Self::AtLeast(low) => value >= low,
            Self::AtMost(high) => value <= high,
            Self::Between(low, high) => (low..=high).contains(&value),
        }
    }

    pub(super) fn holds(self, value: f64) -> bool {
        let near = |bound: f64, size: f64| (value - bound).abs() <= NEAR * size;
        match self {
            Self::Free => false,
            Self::AtLeast(bound) | Self::AtMost(bound) => near(bound, bound.abs().max(1e-3)),
            Self::Between(low, high) => near(low, high - low) || near(high, high - low),
        }
    }

    /// The free variable of a value, moved off the bound by a hundredth of the range: on it the slope is zero.
    pub(super) fn inside(self, value: f64) -> f64 {
        match self {
            Self::Free => value,
            Self::AtLeast(low) => free_of(value - low),
            Self::AtMost(high) => free_of(high - value),
            Self::Between(low, high) => {
                let share = ((value - low) / (high - low)).clamp(0.01, 0.99);
                (2.0 * share - 1.0).asin()
            }
        }
    }

    /// The value of a free variable, and its slope.
    pub(super) fn outside(self, free: f64) -> (f64, f64) {
        let root = (free * free + 1.0).sqrt();
        match self {
            Self::Free => (free, 1.0),
            Self::AtLeast(low) => (low + free * free / (root + 1.0), free / root),
            Self::AtMost(high) => (high - free * free / (root + 1.0), -free / root),
            Self::Between(low, high) => {
                let half = 0.5 * (high - low);
                (low + half * (free.sin() + 1.0), half * free.cos())
            }
        }
    }
}

/// q of √(q² + 1) − 1 = distance.
fn free_of(distance: f64) -> f64 {
    let distance = distance.max(1e-4);
    (distance * (distance + 2.0)).sqrt()
}

#[cfg(test)]
mod tests {
    use super::Bound;

    #[test]
    fn a_value_comes_back_from_its_free_variable_with_the_right_slope() {
        let bounds = [Bound::Free, Bound::AtLeast(-2.0), Bound::AtMost(5.0), Bound::Between(-1.0, 4.0)];
        for bound in bounds {
            let free = bound.inside(1.5);
            let (value, slope) = bound.outside(free);
            assert!((value - 1.5).abs() < 1e-14, "{bound:?}");
            let by_steps = (bound.outside(free + 1e-6).0 - bound.outside(free - 1e-6).0) / 2e-6;
            assert!((slope - by_steps).abs() < 1e-8, "{bound:?}");
            assert!(bound.allows(bound.outside(1e3).0) && bound.allows(bound.outside(-1e3).0));
        }
    }

    #[test]
    fn a_start_on_the_bound_is_moved_off_it() {
        for bound in [Bound::AtLeast(0.0), Bound::Between(0.0, 1.0), Bound::AtMost(0.0)] {
            let (value, slope) = bound.outside(bound.inside(0.0));
            assert!(bound.allows(value) && slope.abs() > 1e-3, "{bound:?}: {value}, {slope}");
            assert!(bound.holds(0.0) && !bound.holds(0.5));
        }
    }
}
