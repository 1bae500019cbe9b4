//! Damaged copies of a file, each by its own number: the same number is the same damage.

/// A generator small enough to see through: SplitMix64 (G. Steele, D. Lea, C. Flood, "Fast splittable pseudorandom number
/// generators", OOPSLA 2014), constants as published there.
pub struct Random(u64);

impl Random {
    pub fn new(seed: u64) -> Self {
        Self(seed)
    }

    pub fn next(&mut self) -> u64 {
        self.0 = self.0.wrapping_add(0x9E37_79B9_7F4A_7C15);
        let mut z = self.0;
        z = (z ^ (z >> 30)).wrapping_mul(0xBF58_476D_1CE4_E5B9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94D0_49BB_1331_11EB);
        z ^ (z >> 31)
    }

    pub fn below(&mut self, n: usize) -> usize {
        (self.next() % n.max(1) as u64) as usize
    }
}

/// What was done, in words, and the damaged copy. `metadata` lists byte ranges outside of the samples, where damage does
/// more: half of the mutants are hit there.
pub fn mutant(whole: &[u8], metadata: &[std::ops::Range<usize>], number: u64) -> (String, Vec<u8>) {
    let mut random = Random::new(number.wrapping_mul(0x2545_F491_4F6C_DD1D));
    let mut bytes = whole.to_vec();
    let place = |random: &mut Random| match metadata.get(random.below(metadata.len())) {
        Some(range) if random.below(2) == 0 => range.start + random.below(range.len()),
        _ => random.below(whole.len()),
    };
    let done = match random.below(10) {
        0..=3 => {
            let (at, bit) = (place(&mut random), random.below(8));
            bytes[at] ^= 1 << bit;
            format!("bit {bit} of byte {at} flipped")
        }
        4 | 5 => {
            let (at, n) = (place(&mut random), 1 + random.below(8));
            let end = (at + n).min(bytes.len());
            bytes[at..end].iter_mut().for_each(|byte| *byte = random.next() as u8);
            format!("bytes {at} to {end} random")
        }
        6 => {
            let (at, value) = (place(&mut random), [0x00, 0xff, 0x7f, 0x80][random.below(4)]);
            let end = (at + 8).min(bytes.len());
            bytes[at..end].fill(value);
            format!("bytes {at} to {end} all {value:#04x}")
        }
        7 => {
            let (at, n) = (place(&mut random), 1 + random.below(4096));
            let end = (at + n).min(bytes.len());
            bytes[at..end].fill(0);
            format!("bytes {at} to {end} lost")
        }
        8 => {
            let (from, to, n) = (place(&mut random), place(&mut random), 1 + random.below(512));
            let n = n.min(bytes.len() - from.max(to));
            bytes.copy_within(from..from + n, to);
            format!("{n} bytes copied from {from} to {to}")
        }
        _ => {
            let length = random.below(bytes.len());
            bytes.truncate(length);
            format!("cut at {length}")
        }
    };
    (done, bytes)
}

/// Byte ranges between the stretches of compressed samples: runs in which at least one byte in eight is zero.
pub fn metadata(whole: &[u8]) -> Vec<std::ops::Range<usize>> {
    const WINDOW: usize = 256;
    let is_sparse = |part: &[u8]| part.iter().filter(|byte| **byte == 0).count() * 8 >= part.len();
    let mut ranges: Vec<std::ops::Range<usize>> = Vec::new();
    for (k, part) in whole.chunks(WINDOW).enumerate().filter(|(_, part)| is_sparse(part)) {
        let (start, end) = (k * WINDOW, k * WINDOW + part.len());
        match ranges.last_mut().filter(|last| last.end == start) {
            Some(last) => last.end = end,
            None => ranges.push(start..end),
        }
    }
    ranges
}
