//! CRC-32C (Castagnoli): RFC 3720 section 12.1, examples in its appendix B.4.

use crc::{CRC_32_ISCSI, Crc, Digest, Table};

#[cfg(not(feature = "large-tables"))]
type Lanes = Table<1>;
#[cfg(feature = "large-tables")]
type Lanes = Table<16>;

static CRC_32C: Crc<u32, Lanes> = Crc::<u32, Lanes>::new(&CRC_32_ISCSI);

/// The checksum of `bytes` as frames carry it: polynomial 0x1EDC6F41, reflected, initial value and final inversion
/// 0xFFFFFFFF.
pub fn crc32c(bytes: &[u8]) -> u32 {
    CRC_32C.checksum(bytes)
}

/// A checksum over bytes that come piece by piece.
pub(crate) fn running() -> Digest<'static, u32, Lanes> {
    CRC_32C.digest()
}

pub(crate) type Running = Digest<'static, u32, Lanes>;
