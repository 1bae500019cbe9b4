//! What the machine says of itself.

use std::fs::File;
use std::io::{self, Read};

/// Identifies the time since the machine started: host times compare only within it.
///
/// Where the kernel does not tell, a random one, so that nothing is taken for comparable that may not be.
pub fn kernel_boot_id() -> io::Result<String> {
    match std::fs::read_to_string("/proc/sys/kernel/random/boot_id") {
        Ok(id) => Ok(id.trim().to_owned()),
        Err(_) => Ok(format!("unknown-{:06x}-{:06x}", random_part()?, random_part()?)),
    }
}

/// 24 random bits from the kernel, for identifiers.
pub fn random_part() -> io::Result<u32> {
    let mut bytes = [0; 4];
    File::open("/dev/urandom")?.read_exact(&mut bytes)?;
    Ok(u32::from_le_bytes(bytes) & 0x00ff_ffff)
}

/// Running number and random part, as journals and trials are called.
pub fn identifier(number: u32) -> io::Result<String> {
    Ok(format!("{number:06}-{:06x}", random_part()?))
}

/// The running number of an identifier; `None` when it is not one.
pub fn number_of(identifier: &str) -> Option<u32> {
    let (number, random) = identifier.split_once('-')?;
    (number.len() == 6 && random.len() == 6).then(|| number.parse().ok())?
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn an_identifier_gives_its_number_back() {
        assert_eq!(number_of(&identifier(12).unwrap()), Some(12));
        assert_eq!(number_of("000012"), None);
        assert_eq!(number_of("x00012-abcdef"), None);
    }
}
