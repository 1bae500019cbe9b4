//! The map of a device without a clock: its ticks are the host's stamps, and what is known is how early a reading may
//! have been taken before its line came.

use super::{BlockTimes, ClockMethod, ClockPiece, NS};

/// One piece for the ticks from `first_tick` to `last_tick`: the middle of what is possible, a rectangle wide (GUM 4.3.7).
pub(super) fn piece(
    boot_id: u32,
    first_tick: u64,
    last_tick: u64,
    tick_rate_hz: f64,
    half_width_ns: f64,
) -> ClockPiece {
    let ns_per_tick = NS / tick_rate_hz;
    ClockPiece {
        boot_id,
        first_tick,
        last_tick,
        origin_tick: first_tick,
        host_ns_at_origin: first_tick as f64 * ns_per_tick - half_width_ns,
        ns_per_tick,
        u_ns: half_width_ns / 3_f64.sqrt(),
        asymmetry_ns: half_width_ns,
        method: ClockMethod::Stamps,
    }
}

/// One piece a boot, in the order in which the boots came.
pub(super) fn pieces(arrivals: &[BlockTimes], tick_rate_hz: f64, half_width_ns: f64) -> Vec<ClockPiece> {
    let mut pieces: Vec<ClockPiece> = Vec::new();
    for BlockTimes { boot_id, sent_tick, .. } in arrivals {
        match pieces.iter_mut().find(|piece| piece.boot_id == *boot_id) {
            Some(piece) => piece.last_tick = piece.last_tick.max(*sent_tick),
            None => pieces.push(piece(*boot_id, *sent_tick, *sent_tick, tick_rate_hz, half_width_ns)),
        }
    }
    pieces
}
