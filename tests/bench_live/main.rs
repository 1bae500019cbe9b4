//! Work at the bench beside the real daemon, with a board on a pty whose cell this test loads.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

mod board;
mod calibrate;
mod cord;
#[expect(dead_code, reason = "here no test asks when something was told")]
#[path = "../support/daemon_process.rs"]
mod daemon_process;
mod guided;
#[path = "../support/rehearsal_rig.rs"]
mod rehearsal_rig;
mod standing;
mod tare;
