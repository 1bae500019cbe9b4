//! Pseudo-random numbers from a seed, the same on every machine and for every number of threads.
//!
//! xoshiro256++ started by SplitMix64 (D. Blackman, S. Vigna, *Scrambled linear pseudorandom number generators*, ACM Trans.
//! Math. Softw. 47 (2021) 36); normal deviates by the polar method (G. Marsaglia, T. A. Bray, SIAM Review 6 (1964)
//! 260-264). For simulation, not for secrets.

/// A stream of numbers.
#[derive(Debug, Clone)]
pub struct Random {
    state: [u64; 4],
    spare: Option<f64>,
}

impl Random {
    /// Stream number `stream` of a seed: streams of one seed are independent for every practical purpose.
    pub fn new(seed: u64, stream: u64) -> Self {
        let mut mixed = seed ^ stream.wrapping_mul(0xd134_2543_de82_ef95);
        let state = std::array::from_fn(|_| {
            mixed = mixed.wrapping_add(0x9e37_79b9_7f4a_7c15);
            let mut z = mixed;
            z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
            z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
            z ^ (z >> 31)
        });
        Self { state, spare: None }
    }

    pub fn next_u64(&mut self) -> u64 {
        let [a, b, c, d] = self.state;
        let result = a.wrapping_add(d).rotate_left(23).wrapping_add(a);
        let mut s = [a, b, c ^ a, d ^ b];
        s[1] ^= s[2];
        s[0] ^= s[3];
        s[2] ^= b << 17;
        s[3] = s[3].rotate_left(45);
        self.state = s;
        result
    }

    /// Even over 0 to 1.
    pub fn even(&mut self) -> f64 {
        (self.next_u64() >> 11) as f64 * (1.0 / (1_u64 << 53) as f64)
    }

    /// Normal with mean 0 and standard deviation 1.
    pub fn normal(&mut self) -> f64 {
        if let Some(spare) = self.spare.take() {
            return spare;
        }
        loop {
            let (u, v) = (2.0 * self.even() - 1.0, 2.0 * self.even() - 1.0);
            let s = u * u + v * v;
            if s > 0.0 && s < 1.0 {
                let factor = (-2.0 * s.ln() / s).sqrt();
                self.spare = Some(v * factor);
                return u * factor;
            }
        }
    }
}

#[cfg(test)]
mod tests {
    use super::Random;

    #[test]
    fn the_generator_gives_the_published_sequence() {
        // First outputs of xoshiro256++ from state {1, 2, 3, 4}: rand_xoshiro's test vector, from memory.
        let mut random = Random { state: [1, 2, 3, 4], spare: None };
        let found: Vec<u64> = (0..4).map(|_| random.next_u64()).collect();
        assert_eq!(found, [41_943_041, 58_720_359, 3_588_806_011_781_223, 3_591_011_842_654_386]);
    }

    #[test]
    fn normal_deviates_have_the_moments_of_the_normal_distribution() {
        let mut random = Random::new(1, 0);
        let n = 200_000;
        let draws: Vec<f64> = (0..n).map(|_| random.normal()).collect();
        let moment = |power: i32| draws.iter().map(|x| x.powi(power)).sum::<f64>() / f64::from(n);
        // Standard errors: √(1/n), √(2/n), √(96/n).
        let root = f64::from(n).sqrt();
        assert!(moment(1).abs() < 4.0 / root);
        assert!((moment(2) - 1.0).abs() < 4.0 * 2_f64.sqrt() / root);
        assert!((moment(4) - 3.0).abs() < 4.0 * 96_f64.sqrt() / root);
    }

    #[test]
    fn streams_of_a_seed_differ_and_repeat() {
        assert_eq!(Random::new(7, 3).next_u64(), Random::new(7, 3).next_u64());
        assert_ne!(Random::new(7, 3).next_u64(), Random::new(7, 4).next_u64());
    }
}
