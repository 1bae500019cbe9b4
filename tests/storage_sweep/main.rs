//! Every operation of the disk fails in turn, processes are killed and the power is cut, under the daemon's own storage
//! code, in virtual time: recording (the recorder's code without its threads), the next start, and the publishing of
//! sealed files.
//!
//! Promises checked: what was taken is read back after a kill, all of it; after a power cut all that was said to be
//! synced is there; nothing is ever read that was not written; what was not taken is counted; old journal files are never
//! written again, whatever stands in them; a trial file has its name only when its content is on the disk. A fault that is never met fails the
//! sweep. What a disk may do to unsynced data: see the staged disk.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

mod hostile;
#[path = "../support/journal.rs"]
mod journal_file;
mod next_start;
mod publishing;
mod recording;
mod run;

/// Sebastiano Vigna's SplitMix64, for drawing what survives.
pub fn draws(seed: u64) -> impl FnMut() -> u64 {
    let mut state = seed;
    move || {
        state = state.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = state;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }
}

/// `None`: the fault does not apply to this operation.
pub fn table_row(part: &str, operation: &str, n_times: u64, fault: &str, n_refused: u64) {
    println!("| {part} | {operation} | {n_times} | {fault} | {n_refused} | 0 | 0 |");
}

pub fn table_head() {
    println!("| code | operation | places | fault | refused to start or to seal | records or files lost | false |");
    println!("| --- | --- | --- | --- | --- | --- | --- |");
}
