//! Edges of digital inputs as a trial file holds them, on the trial's time axis.

use crate::capture::{ClockPiece, Edge, piece_at};
use crate::reading::EdgeSeen;
use crate::trial::{ClockRow, TrialError, TrialFile};

use super::raw_pass::DevicePass;

/// All edges of all devices that have a clock map.
///
/// # Errors
/// [`TrialError`] when the file can't be read.
pub fn edges_of(trial: &TrialFile) -> Result<Vec<EdgeSeen>, TrialError> {
    let zero_host_ns = trial.header().zero_host_ns;
    let mut seen = Vec::new();
    for device in trial.device_names()? {
        let edges = trial.device(&device)?.edges;
        if edges.is_empty() {
            continue;
        }
        let (pieces, _) = trial.clock(&device)?;
        seen.extend(edges.iter().filter_map(|edge| edge_seen(&device, edge, &pieces, zero_host_ns)));
    }
    Ok(seen)
}

fn edge_seen(device: &str, edge: &Edge, pieces: &[ClockRow], zero_host_ns: i64) -> Option<EdgeSeen> {
    let outside = |piece: &&ClockRow| {
        if edge.tick < piece.first_tick {
            piece.first_tick - edge.tick
        } else {
            edge.tick.saturating_sub(piece.last_tick)
        }
    };
    let piece = pieces.iter().filter(|piece| piece.boot_id == edge.boot_id).min_by_key(outside)?;
    let ticks = i128::from(edge.tick) - i128::from(piece.origin_tick);
    let host_ns = piece.host_ns_at_origin + ticks as f64 * piece.ns_per_tick;
    Some(EdgeSeen {
        device: device.to_owned(),
        input: edge.input,
        rising: edge.rising,
        time_s: (host_ns - zero_host_ns as f64) * 1e-9,
        time_uncertainty_s: piece.standard_uncertainty_ns * 1e-9,
    })
}

/// The same while the file is being written.
pub(super) fn edges_seen(devices: &[DevicePass], clocks: &[Vec<ClockPiece>], zero_host_ns: i64) -> Vec<EdgeSeen> {
    let of_device = |(device, pieces): (&DevicePass, &Vec<ClockPiece>)| {
        let seen = |edge: &Edge| {
            let piece = piece_at(pieces, edge.boot_id, edge.tick)?;
            Some(EdgeSeen {
                device: device.name.clone(),
                input: edge.input,
                rising: edge.rising,
                time_s: (piece.host_ns(edge.tick) - zero_host_ns as f64) * 1e-9,
                time_uncertainty_s: piece.u_ns * 1e-9,
            })
        };
        device.edges.iter().filter_map(seen).collect::<Vec<_>>()
    };
    devices.iter().zip(clocks).flat_map(of_device).collect()
}
