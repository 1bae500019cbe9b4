//! The greatest of what was measured lately, in as little memory as that takes.

use std::collections::VecDeque;

/// How far back "lately" reaches.
pub const LATELY_NS: i64 = 10_000_000_000;

/// Values with their times; those that a later one exceeds are forgotten at once, those from before [`LATELY_NS`] when told the
/// time.
#[derive(Debug, Clone, Default, PartialEq)]
pub(super) struct Lately<T> {
    /// (when, value), values falling.
    values: VecDeque<(i64, T)>,
}

impl<T: Copy + PartialOrd> Lately<T> {
    pub fn add(&mut self, now_ns: i64, value: T) {
        while self.values.back().is_some_and(|&(_, earlier)| earlier <= value) {
            self.values.pop_back();
        }
        self.values.push_back((now_ns, value));
        self.forget_old(now_ns);
    }

    pub fn forget_old(&mut self, now_ns: i64) {
        while self.values.front().is_some_and(|&(at_ns, _)| at_ns < now_ns - LATELY_NS) {
            self.values.pop_front();
        }
    }

    pub fn greatest(&self) -> Option<T> {
        self.values.front().map(|&(_, value)| value)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_greatest_is_forgotten_in_its_time_and_the_next_one_takes_its_place() {
        let mut lately = Lately::default();
        [(0, 0.9), (1, 0.2), (2, 0.5), (3, 0.1)].into_iter().for_each(|(at_ns, value)| lately.add(at_ns, value));
        let greatest = |now_ns| {
            let mut lately = lately.clone();
            lately.forget_old(now_ns);
            lately.greatest()
        };
        assert_eq!([LATELY_NS, LATELY_NS + 1].map(greatest), [Some(0.9), Some(0.5)]);
        assert_eq!([LATELY_NS + 2, LATELY_NS + 3, LATELY_NS + 4].map(greatest), [Some(0.5), Some(0.1), None]);
    }
}
