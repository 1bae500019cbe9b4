//! The reading beside the truth: results, and every block of the trial's range.

use serde::Serialize;
use tautrail::reading::Reading;
use tautrail::trial::{BlockRow, TrialError, TrialFile};

use super::truth::Truth;

/// One result beside what really happened.
#[derive(Debug, Serialize)]
pub struct Beside {
    pub name: &'static str,
    pub unit: String,
    pub truth: f64,
    pub reading: f64,
    pub low: f64,
    pub high: f64,
}

impl Beside {
    pub fn error(&self) -> f64 {
        self.reading - self.truth
    }

    /// Whether the reading's own interval holds the truth.
    pub fn covered(&self) -> bool {
        (self.low..=self.high).contains(&self.truth)
    }
}

/// Results for which there is a truth, where the reading has them.
pub fn results(reading: &Reading, truth: &Truth, zero_host_ns: i64) -> Vec<Beside> {
    let seconds = |host_ns: i64| (host_ns - zero_host_ns) as f64 * 1e-9;
    let known = [
        ("launch_speed", truth.launch.as_ref().map(|launch| launch.speed_ground_mps)),
        ("separation_x", truth.launch.as_ref().map(|launch| launch.separation_x_m)),
        ("peak_g_cfc60_specific", truth.specific_peak_g("cfc60")),
        ("release_time", truth.event_host_ns("release").map(seconds)),
        ("hold_tension", Some(truth.tension.hold_line_n)),
    ];
    let beside = |(name, truth): (&'static str, Option<f64>)| {
        let row = reading.result(name)?;
        let (reading, low, high) = (row.value, row.low, row.high);
        Some(Beside { name, unit: row.unit.clone(), truth: truth?, reading, low, high })
    };
    known.into_iter().filter_map(beside).collect()
}

/// A stream's blocks in the file beside those that left the device.
#[derive(Debug, Serialize)]
pub struct Blocks {
    pub device: String,
    pub stream: u8,
    pub in_file: usize,
    /// Between the file's first and last block, left the device, not in the file.
    pub missing: usize,
    /// In the file, but not as it left the device.
    pub differing: usize,
}

/// Compares sequence, first index, length and CRC of every block in the file's own range.
pub fn blocks(file: &TrialFile, truth: &Truth) -> Result<Vec<Blocks>, TrialError> {
    let mut compared = Vec::new();
    for device in &truth.devices {
        let rows = file.blocks(&device.name)?;
        for stream in &device.streams {
            compared.push(compare_stream(&device.name, stream.stream, &rows, &stream.blocks));
        }
    }
    Ok(compared)
}

fn compare_stream(device: &str, stream: u8, rows: &[BlockRow], left: &[(u32, u64, u32, u32)]) -> Blocks {
    let found: Vec<_> = rows
        .iter()
        .filter(|row| row.stream == stream)
        .map(|row| (row.sequence, row.first_index, row.n_samples, row.crc))
        .collect();
    let range = found.first().zip(found.last()).map(|(first, last)| first.1..=last.1);
    let expected: Vec<_> =
        left.iter().filter(|block| range.as_ref().is_some_and(|range| range.contains(&block.1))).copied().collect();
    let missing = expected.iter().filter(|block| !found.iter().any(|row| row.1 == block.1)).count();
    let differing = found.iter().filter(|row| !expected.contains(row)).count();
    Blocks { device: device.to_owned(), stream, in_file: found.len(), missing, differing }
}
