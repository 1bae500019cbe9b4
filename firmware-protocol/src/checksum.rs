//! CRC-32C (Castagnoli): RFC 3720 section 12.1, examples in its appendix B.4.

#[cfg(any(test, not(feature = "host")))]
use crc::{CRC_32_ISCSI, Crc, Table};

/// One table of 1 KiB, which a small board can afford.
#[cfg(any(test, not(feature = "host")))]
static CRC_32C: Crc<u32, Table<1>> = Crc::<u32, Table<1>>::new(&CRC_32_ISCSI);

/// The checksum of `bytes` as frames carry it: polynomial 0x1EDC6F41, reflected, initial value and final inversion
/// 0xFFFFFFFF.
pub fn crc32c(bytes: &[u8]) -> u32 {
    let mut running = Running::default();
    running.update(bytes);
    running.sum()
}

/// A checksum over bytes that come piece by piece: the sum so far.
#[derive(Debug, Clone, Copy, Default)]
pub(crate) struct Running(u32);

impl Running {
    #[cfg(feature = "host")]
    pub(crate) fn update(&mut self, bytes: &[u8]) {
        self.0 = crc32c::crc32c_append(self.0, bytes);
    }

    #[cfg(not(feature = "host"))]
    pub(crate) fn update(&mut self, bytes: &[u8]) {
        self.0 = by_table(self.0, bytes);
    }

    pub(crate) fn sum(self) -> u32 {
        self.0
    }
}

/// Goes on from the sum of what came before.
#[cfg(any(test, not(feature = "host")))]
fn by_table(sum: u32, bytes: &[u8]) -> u32 {
    // The crate takes the register's start value before reflection.
    let mut digest = CRC_32C.digest_with_initial((!sum).reverse_bits());
    digest.update(bytes);
    digest.finalize()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn the_sum_of_pieces_is_the_sum_of_the_whole_by_either_way() {
        let bytes: [u8; 100] = core::array::from_fn(|at| (at * 37) as u8);
        for cut in 0..bytes.len() {
            let (first, rest) = bytes.split_at(cut);
            let mut running = Running::default();
            running.update(first);
            running.update(rest);
            assert_eq!(running.sum(), crc32c(&bytes), "cut at {cut}");
            assert_eq!(by_table(by_table(0, first), rest), crc32c(&bytes), "cut at {cut}, by table");
        }
    }
}
