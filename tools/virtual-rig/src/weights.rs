//! A bench that does not exist: masses hung on a force cell, in virtual time.
//!
//! Hidden from who calibrates: errors of the masses and of their reference, local gravity's anomaly, the air; the cell's
//! scale, bend, hysteresis, creep, drift of its zero, change of its scale with every mounting; and a load that swings for a while.
//! All numbers are invented and plausible for an ordinary cell of 1 kN (repeatable to some 0.01 %).

use rand::SeedableRng;
use rand_chacha::ChaCha8Rng;
use rand_distr::{Distribution, StandardNormal, Uniform};

pub const N_MASSES: usize = 10;
pub const NOMINAL_KG: f64 = 8.0;
pub const DENSITY_KG_PER_M3: f64 = 7850.0;
/// Standard uncertainties on the masses' certificate: each mass, and the reference of all (relative).
pub const MASS_UNCERTAINTY_KG: f64 = 0.0008;
pub const COMMON_RELATIVE: f64 = 2e-5;
/// What the site's gravity and air are taken to be.
pub const GRAVITY_MPS2: f64 = 9.8146;
pub const GRAVITY_UNCERTAINTY_MPS2: f64 = 5e-4;
pub const AIR_KG_PER_M3: f64 = 1.225;
pub const AIR_UNCERTAINTY_KG_PER_M3: f64 = 0.03;
/// Samples in one telling, thirty tellings a second.
pub const SAMPLES_PER_TELLING: u64 = 33;
pub const TELLINGS_PER_S: f64 = 30.0;

const RANGE_N: f64 = 785.0;
const NOISE_COUNTS: f64 = 40.0;
const STEP_S: f64 = 1.0 / TELLINGS_PER_S;

/// One telling: mean and standard deviation of its samples.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Telling {
    pub time_s: f64,
    pub mean_counts: f64,
    pub sd_counts: f64,
}

/// The bench: masses, cell, time.
#[derive(Debug, Clone)]
pub struct WeightBench {
    random: ChaCha8Rng,
    masses_kg: [f64; N_MASSES],
    gravity_mps2: f64,
    air_kg_per_m3: f64,
    counts_per_n: f64,
    bend: f64,
    hysteresis: f64,
    creep: [(f64, f64); 2],
    zero_counts: f64,
    drift_counts_per_s: f64,
    walk_counts: f64,
    mounting: f64,
    time_s: f64,
    force_n: f64,
    hung_s: f64,
    swing_n: f64,
    branch: f64,
    crept_n: [f64; 2],
}

impl WeightBench {
    pub fn new(seed: u64) -> Self {
        let mut random = ChaCha8Rng::seed_from_u64(seed);
        random.set_stream(0x700);
        let mut normal = || -> f64 { StandardNormal.sample(&mut random) };
        let common = COMMON_RELATIVE * normal();
        let masses_kg = std::array::from_fn(|_| NOMINAL_KG * (1.0 + common) + MASS_UNCERTAINTY_KG * normal());
        let gravity_mps2 = GRAVITY_MPS2 + GRAVITY_UNCERTAINTY_MPS2 * normal();
        let air_kg_per_m3 = AIR_KG_PER_M3 + AIR_UNCERTAINTY_KG_PER_M3 * normal();
        let counts_per_n = 2000.0 * (1.0 + 0.003 * normal());
        let bend = 3e-4 * normal();
        let hysteresis = 2.5e-4 * (1.0 + 0.3 * normal());
        let creep = [(1.2e-4 * (1.0 + 0.3 * normal()), 30.0), (1e-4 * (1.0 + 0.3 * normal()), 300.0)];
        let zero_counts = 12_000.0 + 4000.0 * normal();
        let drift_counts_per_s = 0.02 * normal();
        Self {
            masses_kg,
            gravity_mps2,
            air_kg_per_m3,
            counts_per_n,
            bend,
            hysteresis,
            creep,
            zero_counts,
            drift_counts_per_s,
            random,
            walk_counts: 0.0,
            mounting: 0.0,
            time_s: 0.0,
            force_n: 0.0,
            hung_s: 0.0,
            swing_n: 0.0,
            branch: 0.0,
            crept_n: [0.0; 2],
        }
    }

    /// The cell is taken off, turned and mounted again: rested, and its scale a little different.
    pub fn mount(&mut self) {
        self.mounting = 1e-4 * self.normal();
        self.hang_n(0.0);
        self.crept_n = [0.0; 2];
        self.branch = 0.0;
        self.time_s += 300.0;
    }

    /// True force of the masses with these numbers (from 0), N.
    pub fn weight_n(&self, masses: &[usize]) -> f64 {
        let buoyancy = 1.0 - self.air_kg_per_m3 / DENSITY_KG_PER_M3;
        masses.iter().map(|index| self.masses_kg[*index] * self.gravity_mps2 * buoyancy).sum()
    }

    /// Hangs a force; it swings for a while.
    pub fn hang_n(&mut self, force_n: f64) {
        let change_n = force_n - self.force_n;
        // The way back lies beside the way there and is reached after some change of the load.
        let target = if change_n < 0.0 { 1.0 } else { 0.0 };
        self.branch = target + (self.branch - target) * (-change_n.abs() / (0.12 * RANGE_N)).exp();
        self.force_n = force_n;
        self.hung_s = 0.0;
        self.swing_n = 0.004 * change_n.abs();
    }

    /// Lets time pass to the next telling.
    pub fn tell(&mut self) -> Telling {
        self.time_s += STEP_S;
        self.hung_s += STEP_S;
        let walk = 0.5 * STEP_S.sqrt() * self.normal();
        self.walk_counts += walk;
        let force_n = self.force_n;
        for (crept_n, (_, time_s)) in self.crept_n.iter_mut().zip(self.creep) {
            *crept_n = force_n + (*crept_n - force_n) * (-STEP_S / time_s).exp();
        }
        let swing_n = self.swing_n * (-self.hung_s / 2.5).exp() * (5.0 * self.hung_s).cos();
        let n = SAMPLES_PER_TELLING as f64;
        let noise = NOISE_COUNTS / n.sqrt() * self.normal();
        let sd_counts = NOISE_COUNTS * (1.0 + self.normal() / (2.0 * n).sqrt());
        let mean_counts = self.quiet_counts(swing_n) + noise;
        Telling { time_s: self.time_s, mean_counts, sd_counts }
    }

    /// Lets time pass unread.
    pub fn pass(&mut self, seconds: f64) {
        (0..(seconds * TELLINGS_PER_S) as usize).for_each(|_| {
            self.tell();
        });
    }

    fn quiet_counts(&self, swing_n: f64) -> f64 {
        let force_n = self.force_n + swing_n;
        let share = force_n / RANGE_N;
        let bent_n = force_n * (1.0 + self.bend * (share - 1.0));
        let back_n = self.hysteresis * RANGE_N * self.branch * (1.0 - share * share).max(0.0);
        let crept_n: f64 = self.crept_n.iter().zip(self.creep).map(|(crept_n, (part, _))| part * crept_n).sum();
        let zero = self.zero_counts + self.drift_counts_per_s * self.time_s + self.walk_counts;
        zero + self.counts_per_n * (1.0 + self.mounting) * (bent_n + back_n + crept_n)
    }

    fn normal(&mut self) -> f64 {
        StandardNormal.sample(&mut self.random)
    }

    /// Even between two numbers, from the bench's own randomness.
    pub fn even(&mut self, low: f64, high: f64) -> f64 {
        Uniform::new(low, high).map_or(low, |uniform| uniform.sample(&mut self.random))
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    fn settled(bench: &mut WeightBench, seconds: f64) -> f64 {
        let n = (seconds * TELLINGS_PER_S) as usize;
        let tellings: Vec<f64> = (0..n).map(|_| bench.tell().mean_counts).collect();
        let last = &tellings[n - 60..];
        last.iter().sum::<f64>() / 60.0
    }

    #[test]
    fn unloading_reads_more_than_loading_and_a_held_load_creeps_up() {
        let mut bench = WeightBench::new(1);
        bench.mount();
        bench.hang_n(400.0);
        let up = settled(&mut bench, 20.0);
        let crept = settled(&mut bench, 200.0) - up;
        bench.hang_n(785.0);
        bench.hang_n(400.0);
        let down = settled(&mut bench, 20.0);
        assert!(crept > 20.0, "{crept} counts");
        assert!(down - up > 100.0, "{} counts", down - up);
    }

    #[test]
    fn the_same_seed_is_the_same_bench() {
        let (mut one, mut other) = (WeightBench::new(7), WeightBench::new(7));
        assert_eq!(one.weight_n(&[0, 3]), other.weight_n(&[0, 3]));
        assert_eq!(one.tell(), other.tell());
        assert_ne!(WeightBench::new(8).tell(), WeightBench::new(7).tell());
    }
}
