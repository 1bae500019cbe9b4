//! Bench section `corruption`: 10⁸ bytes of frames at each bit error rate. No damaged frame may be accepted, and every
//! frame that was not touched (its own bytes and both its delimiters) must be.
//!
//! Bits are turned over independently of each other. By chance alone one damaged frame in 2³² would be accepted.

#![allow(clippy::unwrap_used, reason = "a bench that cannot go on stops here")]

#[path = "../../firmware-protocol/tests/support/bad_line.rs"]
mod bad_line;

use bad_line::{Random, sweep};

const BYTES_PER_RATE: usize = 100_000_000;

fn main() {
    println!("# bit error rate: bytes, frames, touched, accepted, of those touched at a delimiter only");
    for (seed, rate) in [(1, 1e-6), (2, 1e-5), (3, 1e-4), (4, 1e-3)] {
        let tally = sweep(&mut Random(seed), BYTES_PER_RATE, rate);
        println!(
            "# {rate:e}: {}, {}, {}, {}, {}",
            tally.bytes, tally.frames, tally.touched, tally.accepted, tally.accepted_touched
        );
        let figure = |name: &str, value: usize, of: usize| {
            println!("figure corruption_{name}_at_{rate:e} value={value} unit=frames reference={of} ratio=- target=0");
        };
        figure("damaged_accepted", tally.accepted_damaged, tally.touched);
        figure("untouched_lost", tally.lost_untouched, tally.frames - tally.touched);
    }
}
