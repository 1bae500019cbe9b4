//! The real daemon, as a process of its own, against the virtual rig on ptys: what it must never lose, and how it says no.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

mod bring_up;
mod by_hand;
mod cable;
mod crash;
#[path = "../support/daemon_process.rs"]
mod daemon_process;
#[path = "../support/nobody.rs"]
mod nobody;
mod refusals;
#[path = "../support/rehearsal_rig.rs"]
mod rehearsal_rig;
mod service;
mod small_disk;
mod stage;
mod text;
mod whole_trial;
