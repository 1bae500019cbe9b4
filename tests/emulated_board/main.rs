//! Firmware for a small board, written with the C header, on an emulated Cortex-M3 board: it is spoken to as the
//! protocol says, and recorded by the real daemon. And a device that somebody wrote who had the document alone.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

mod board;
mod conversation;
#[path = "../support/daemon_process.rs"]
mod daemon_process;
mod from_the_document;
mod place;
mod recording;
#[path = "../support/mod.rs"]
mod support;
