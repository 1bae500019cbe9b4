//! Many trials in virtual time, one seed each, over all cores; and one trial's true motion as CSV.

use crate::performance::{Options, Performance, PrepareError, prepare};
use crate::play::virtual_time::{Delivered, VirtualPlay};
use crate::truth::Truth;
use firmware_protocol::EncodeError;
use std::fmt::Write;
use std::sync::Mutex;
use std::sync::atomic::{AtomicU64, Ordering};

#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum SweepError {
    #[error(transparent)]
    Prepare(#[from] PrepareError),
    #[error("a frame could not be made: {0}")]
    Frame(#[from] EncodeError),
}

/// One trial of a sweep.
#[derive(Debug, Clone, PartialEq)]
pub struct Swept {
    pub seed: u64,
    pub outcome: &'static str,
    /// Ground frame.
    pub launch_speed_mps: Option<f64>,
    pub n_blocks: usize,
    pub n_bytes: usize,
}

fn sweep_one(options: &Options) -> Result<Swept, SweepError> {
    let performance = prepare(options)?;
    let mut play = VirtualPlay::new(&performance)?;
    let mut n_bytes = 0;
    for delivery in play.by_ref() {
        if let Delivered::Bytes(bytes) = delivery?.what {
            n_bytes += bytes.len();
        }
    }
    let Truth { outcome, launch, devices, .. } = play.truth();
    let launch_speed_mps = launch.map(|launch| launch.speed_ground_mps);
    let n_blocks = devices.iter().flat_map(|device| &device.streams).map(|stream| stream.blocks.len()).sum();
    Ok(Swept { seed: options.seed, outcome, launch_speed_mps, n_blocks, n_bytes })
}

/// Plays seeds `options.seed` and on, `n_trials` of them, on every core; results in the order of seeds.
///
/// # Errors
/// The first error of any trial.
pub fn sweep(options: &Options, n_trials: u64) -> Result<Vec<Swept>, SweepError> {
    let next = AtomicU64::new(0);
    let done = Mutex::new(Vec::new());
    let n_threads = std::thread::available_parallelism().map_or(1, usize::from);
    std::thread::scope(|scope| {
        for _ in 0..n_threads {
            scope.spawn(|| {
                loop {
                    let idx = next.fetch_add(1, Ordering::Relaxed);
                    if idx >= n_trials {
                        return;
                    }
                    let swept = sweep_one(&Options { seed: options.seed + idx, ..options.clone() });
                    if let Ok(mut done) = done.lock() {
                        done.push((idx, swept));
                    }
                }
            });
        }
    });
    let mut done = done.into_inner().unwrap_or_default();
    done.sort_by_key(|(idx, _)| *idx);
    done.into_iter().map(|(_, swept)| swept).collect()
}

/// The true motion every `interval_s`, SI units in the header.
pub fn motion_csv(performance: &Performance, interval_s: f64) -> String {
    let mut csv = String::from(
        "t_s,x_m,v_mps,shuttle_a_ground_mps2,line_n,cords_n,anchor_n,contact_n,payload_x_m,payload_v_ground_mps,\
         payload_a_ground_mps2,rail_x_m,rail_v_mps,reservoir_pa,cylinder_pa\n",
    );
    let n = (performance.end_s / interval_s).floor() as usize;
    for idx in 0..=n {
        let row = performance.trajectory.at(idx as f64 * interval_s);
        let values = [
            row.t_s,
            row.x_m,
            row.v_mps,
            row.shuttle_a_ground_mps2,
            row.line_n,
            row.cords_n,
            row.anchor_n,
            row.contact_n,
            row.payload_x_m,
            row.payload_v_ground_mps,
            row.payload_a_ground_mps2,
            row.rail_x_m,
            row.rail_v_mps,
            row.reservoir_pa,
            row.cylinder_pa,
        ];
        for (place, value) in values.iter().enumerate() {
            // Writing to a text in memory cannot fail.
            let _ = write!(csv, "{}{value:.6}", if place == 0 { "" } else { "," });
        }
        csv.push('\n');
    }
    csv
}
