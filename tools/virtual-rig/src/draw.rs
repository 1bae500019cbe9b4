//! Randomness: every purpose draws from its own stream of one seeded generator, so that one more draw here changes nothing there.

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal, Uniform};

/// What a stream of random numbers is for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Purpose {
    SensorErrors {
        device: u8,
    },
    Gates,
    Rig,
    Boot {
        device: u8,
    },
    Line {
        device: u8,
    },
    Clock {
        device: u8,
    },
    Noise {
        device: u8,
        channel: u8,
    },
    Transport {
        device: u8,
    },
    /// Scatter of one trial of a series.
    Cycle {
        cycle: u32,
    },
}

impl Purpose {
    fn stream(self) -> u64 {
        match self {
            Self::Gates => 2,
            Self::Rig => 3,
            Self::SensorErrors { device } => 0x500 + u64::from(device),
            Self::Boot { device } => 0x300 + u64::from(device),
            Self::Line { device } => 0x400 + u64::from(device),
            Self::Clock { device } => 0x100 + u64::from(device),
            Self::Transport { device } => 0x200 + u64::from(device),
            Self::Cycle { cycle } => 0x1_0000_0000 + u64::from(cycle),
            Self::Noise { device, channel } => 0x10000 + 0x100 * u64::from(device) + u64::from(channel),
        }
    }
}

/// A seeded stream of random numbers.
#[derive(Debug, Clone)]
pub struct Draw(ChaCha8Rng);

impl Draw {
    pub fn new(seed: u64, purpose: Purpose) -> Self {
        let mut generator = ChaCha8Rng::seed_from_u64(seed);
        generator.set_stream(purpose.stream());
        Self(generator)
    }

    /// Normal with mean 0.
    pub fn normal(&mut self, standard_deviation: f64) -> f64 {
        let unit: f64 = StandardNormal.sample(&mut self.0);
        unit * standard_deviation
    }

    /// Normal with mean 0, drawn again while outside ±`bound`.
    pub fn normal_within(&mut self, standard_deviation: f64, bound: f64) -> f64 {
        loop {
            let value = self.normal(standard_deviation);
            if value.abs() <= bound {
                return value;
            }
        }
    }

    /// Even between `low` and `high`; `low` when there is nothing between.
    pub fn even(&mut self, low: f64, high: f64) -> f64 {
        Uniform::new(low, high).map_or(low, |range| range.sample(&mut self.0))
    }

    /// True with the given probability.
    pub fn happens(&mut self, probability: f64) -> bool {
        probability > 0.0 && self.even(0.0, 1.0) < probability
    }

    pub fn bits(&mut self) -> u64 {
        use rand::Rng;
        self.0.next_u64()
    }
}
