//! One chunk of a dataset as it lies in the file: shuffled, deflated, with its checksum.
//!
//! The same filters as the library would apply; done here, its one global lock stays free while they run. Any HDF5 reads the
//! result by its own filters; every sealed file is read back that way before it is published.

use hdf5::Dataset;
use libdeflater::{CompressionLvl, Compressor};

use super::error::{Doing, TrialError};

/// Makes chunks and writes them; keeps its buffers.
pub(super) struct ChunkWriter {
    compressor: Compressor,
    shuffled: Vec<u8>,
    filtered: Vec<u8>,
}

impl ChunkWriter {
    /// `level` is a deflate level of 1 to 9.
    pub(super) fn new(level: u8) -> Self {
        let level = CompressionLvl::new(i32::from(level)).unwrap_or_default();
        Self { compressor: Compressor::new(level), shuffled: Vec::new(), filtered: Vec::new() }
    }

    /// Writes the elements in `bytes`, each of `width` bytes, as the chunk that begins at element `first`.
    ///
    /// # Errors
    /// What the library says of writing the chunk.
    pub(super) fn write(
        &mut self,
        dataset: &Dataset,
        first: usize,
        bytes: &[u8],
        width: usize,
    ) -> Result<(), TrialError> {
        shuffle(bytes, width, &mut self.shuffled);
        self.filtered.resize(self.compressor.zlib_compress_bound(self.shuffled.len()) + CHECKSUM_BYTES, 0);
        // The bound is the compressor's own: there is always room.
        let n = self.compressor.zlib_compress(&self.shuffled, &mut self.filtered).unwrap_or(0);
        let checksum = fletcher32(&self.filtered[..n]).to_le_bytes();
        self.filtered[n..n + CHECKSUM_BYTES].copy_from_slice(&checksum);
        put(dataset, first, &self.filtered[..n + CHECKSUM_BYTES]).doing("appending to", dataset.name())
    }
}

const CHECKSUM_BYTES: usize = 4;

fn put(dataset: &Dataset, first: usize, chunk: &[u8]) -> hdf5::Result<()> {
    let offset = [first as u64];
    let status = hdf5::sync::sync(|| {
        // SAFETY: under the library's lock; the handle is alive; `offset` has the dataset's one dimension and `chunk`
        // is `chunk.len()` bytes long. A filter mask of 0 says that every filter of the dataset was applied.
        unsafe {
            hdf5_sys::h5d::H5Dwrite_chunk(
                dataset.id(),
                hdf5_sys::h5p::H5P_DEFAULT,
                0,
                offset.as_ptr(),
                chunk.len(),
                chunk.as_ptr().cast(),
            )
        }
    });
    if status < 0 { Err(hdf5::Error::query().unwrap_or_else(|error| error)) } else { Ok(()) }
}

/// First bytes of all elements, then their second bytes, and so on: the library's shuffle filter.
fn shuffle(bytes: &[u8], width: usize, out: &mut Vec<u8>) {
    out.clear();
    if width < 2 {
        out.extend_from_slice(bytes);
        return;
    }
    for place in 0..width {
        out.extend(bytes.iter().skip(place).step_by(width));
    }
}

/// Fletcher's checksum over big-endian 16-bit words, as the library has it (HDF5 2.0, H5checksum.c,
/// `H5_checksum_fletcher32`; from memory, proved by reading back through the library).
fn fletcher32(bytes: &[u8]) -> u32 {
    /// Sums of this many words do not overflow.
    const WORDS: usize = 360;
    let fold = |sum: u32| (sum & 0xffff) + (sum >> 16);
    let (mut sum1, mut sum2) = (0_u32, 0_u32);
    let words = bytes.chunks_exact(2);
    let odd = words.remainder().first().copied();
    let mut n_left = 0;
    for word in words {
        sum1 += u32::from(u16::from_be_bytes([word[0], word[1]]));
        sum2 += sum1;
        n_left += 1;
        if n_left == WORDS {
            (sum1, sum2, n_left) = (fold(sum1), fold(sum2), 0);
        }
    }
    (sum1, sum2) = (fold(sum1), fold(sum2));
    if let Some(byte) = odd {
        sum1 += u32::from(byte) << 8;
        sum2 += sum1;
        (sum1, sum2) = (fold(sum1), fold(sum2));
    }
    (fold(sum2) << 16) | fold(sum1)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn shuffling_gathers_the_bytes_of_each_place() {
        let mut out = Vec::new();
        shuffle(&[1, 2, 3, 4, 5, 6, 7, 8], 4, &mut out);
        assert_eq!(out, [1, 5, 2, 6, 3, 7, 4, 8]);
        shuffle(&[1, 2, 3], 1, &mut out);
        assert_eq!(out, [1, 2, 3]);
    }

    /// The library refuses a chunk whose checksum is wrong, and unshuffles and inflates by its own code.
    #[test]
    fn the_library_reads_every_chunk_back_by_its_own_filters() {
        let dir = tempfile::tempdir().unwrap();
        let file = hdf5::File::create(dir.path().join("chunks.h5")).unwrap();
        let mut chunks = ChunkWriter::new(1);
        for chunk in [1_usize, 2, 7, 359, 4096, 32 * 1024] {
            let n = 3 * chunk;
            let builder = file.new_dataset::<f64>().chunk(chunk).shuffle().deflate(1).fletcher32();
            let dataset = builder.shape(n).create(format!("of {chunk}").as_str()).unwrap();
            let noisy = |i: usize| (i as f64 * 0.1).sin() + ((i * 7919) % 1009) as f64 * 1e-9;
            let values: Vec<f64> = (0..n).map(noisy).collect();
            for (index, part) in values.chunks(chunk).enumerate() {
                let bytes: Vec<u8> = part.iter().flat_map(|value| value.to_le_bytes()).collect();
                chunks.write(&dataset, index * chunk, &bytes, 8).unwrap();
            }
            assert_eq!(dataset.read_raw::<f64>().unwrap(), values, "chunks of {chunk}");
        }
        let bytes = file.new_dataset::<u8>().chunk(5).shuffle().deflate(1).fletcher32();
        let dataset = bytes.shape(5).create("odd").unwrap();
        chunks.write(&dataset, 0, &[9, 8, 7, 6, 5], 1).unwrap();
        assert_eq!(dataset.read_raw::<u8>().unwrap(), [9, 8, 7, 6, 5]);
    }
}
