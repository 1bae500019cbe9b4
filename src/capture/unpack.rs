//! Packed samples to counts, channel by channel.

use super::sample::{Counts, Encoding, StreamDescription};

/// Takes a block's samples apart (all channels of the first sample, then the next). `None` when the number of bytes does
/// not fit the description.
pub(super) fn unpack(samples: &[u8], n_samples: usize, stream: &StreamDescription) -> Option<Vec<Counts>> {
    let sample_len = sample_len(stream);
    if samples.len() != n_samples * sample_len || sample_len == 0 {
        return None;
    }
    let mut offset = 0;
    let channels = stream.channels.iter().map(|channel| {
        let at = offset;
        offset += width(channel.encoding);
        one_channel(samples, sample_len, at, channel.encoding)
    });
    Some(channels.collect())
}

/// Bytes of one sample of all channels.
pub(super) fn sample_len(stream: &StreamDescription) -> usize {
    stream.channels.iter().map(|channel| width(channel.encoding)).sum()
}

const fn width(encoding: Encoding) -> usize {
    match encoding {
        Encoding::I16 => 2,
        Encoding::I24 => 3,
        Encoding::I32 | Encoding::F32 => 4,
    }
}

fn one_channel(samples: &[u8], sample_len: usize, at: usize, encoding: Encoding) -> Counts {
    match encoding {
        Encoding::I16 => Counts::Integer(collect(samples, sample_len, at, |b| i16::from_le_bytes(b).into())),
        // The three bytes go to the top of the word, so that the shift down carries the sign.
        Encoding::I24 => {
            Counts::Integer(collect(samples, sample_len, at, |[a, b, c]| i32::from_le_bytes([0, a, b, c]) >> 8))
        }
        Encoding::I32 => Counts::Integer(collect(samples, sample_len, at, i32::from_le_bytes)),
        Encoding::F32 => Counts::Float(collect(samples, sample_len, at, f32::from_le_bytes)),
    }
}

fn collect<T, const WIDTH: usize>(
    samples: &[u8],
    sample_len: usize,
    at: usize,
    value: impl Fn([u8; WIDTH]) -> T,
) -> Vec<T> {
    // Whole samples only, so that every piece from `at` on holds the channel; the fallback is never taken.
    let channel = samples.get(at..).unwrap_or_default().chunks(sample_len);
    channel.map(|sample| value(sample.first_chunk().copied().unwrap_or([0; WIDTH]))).collect()
}
