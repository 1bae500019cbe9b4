//! In which steps a channel moves that comes as floats: one count of an integer is one step, a printed number's is not said.

use std::collections::BTreeMap;

use super::sample::{Block, Counts};

/// The least step between neighbouring readings of each channel that comes as floats: what its display resolves, where
/// it ever moved by one step.
#[derive(Debug, Clone, Default)]
pub struct LeastSteps {
    by_channel: BTreeMap<(u8, usize), Steps>,
}

#[derive(Debug, Clone, Copy)]
struct Steps {
    last: f32,
    least: Option<f64>,
}

impl LeastSteps {
    pub fn take(&mut self, block: &Block) {
        for (place, counts) in block.counts.iter().enumerate() {
            let Counts::Float(values) = counts else { continue };
            for &value in values.iter().filter(|value| value.is_finite()) {
                let steps = self.by_channel.entry((block.stream, place)).or_insert(Steps { last: value, least: None });
                let step = (f64::from(value) - f64::from(steps.last)).abs();
                if step > 0.0 {
                    steps.least = Some(steps.least.map_or(step, |least| least.min(step)));
                }
                steps.last = value;
            }
        }
    }

    /// In counts: 1 for integers, and for floats that never moved.
    pub fn of(&self, stream: u8, place: usize) -> f64 {
        self.by_channel.get(&(stream, place)).and_then(|steps| steps.least).unwrap_or(1.0)
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn block(counts: Vec<Counts>) -> Block {
        Block {
            host_ns: 0,
            boot_id: 1,
            description_id: 1,
            stream: 1,
            sequence: 0,
            first_index: 0,
            first_tick: 0,
            sent_tick: 0,
            n_samples: 1,
            overruns: 0,
            crc: 0,
            counts,
        }
    }

    #[test]
    fn a_display_resolves_its_least_step_and_an_integer_one_count() {
        let mut steps = LeastSteps::default();
        for printed in [612.3_f32, 612.3, 612.5, 612.4, 611.0] {
            steps.take(&block(vec![Counts::Float(vec![printed]), Counts::Integer(vec![7]), Counts::Float(vec![3.0])]));
        }
        assert!((steps.of(1, 0) - 0.1).abs() < 1e-4, "{}", steps.of(1, 0));
        assert_eq!((steps.of(1, 1), steps.of(1, 2), steps.of(2, 0)), (1.0, 1.0, 1.0));
    }
}
