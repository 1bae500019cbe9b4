//! Kills the real daemon, its sealing and `recover` at random instants, starts them again, and counts what that cost.
//!
//!     cargo run --example kills -- [KILLS, 1000] [SEED, 1] [SESSIONS AT ONCE, 2]
//!
//! Each session plays one short trial of the virtual rig on ptys. The daemon is killed (SIGKILL) after a drawn time and
//! started again until the trial is over; then sealing is killed the same way, by `recover` and by the daemon. What is
//! compared, and with what:
//!
//! - *Lost*: blocks that a pty took whole 100 ms or more before the kill (by the rig's own log) and that the journal does
//!   not hold. Beside the daemon runs a sentinel, a process that does nothing but append to a file the stamps that a pty
//!   gives it each 5 ms, and is killed with it: how old its last stamp is beyond those 5 ms is how late this machine was
//!   with anything at all. Losses are told with and without that lateness.
//! - *Trial files*: each opens, verifies, holds exactly the blocks that the journal holds in its range, each one the rig's
//!   to the checksum, and says of what is missing just how much it is. Sealing again gives the same bytes.
//! - *Earlier trials*: every trial file that was ever seen is still there after every kill, with the same bytes.
//!
//! Prints Markdown. Exit code 1 if anything was lost, false or touched.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a tool that cannot go on stops here")]

mod account;
mod files;
mod process;
mod sentinel;
mod session;
mod tally;

use std::path::PathBuf;
use std::process::ExitCode;
use std::sync::Mutex;

use tally::Tally;

fn main() -> ExitCode {
    let args: Vec<String> = std::env::args().skip(1).collect();
    if let [word, port, stamps] = args.as_slice()
        && word == sentinel::WORD
    {
        sentinel::be(port.as_ref(), stamps.as_ref());
    }
    let number = |place: usize, otherwise: u64| -> u64 {
        args.get(place).map_or(otherwise, |arg| arg.parse().expect("KILLS, SEED and SESSIONS are numbers"))
    };
    let (n_kills, seed, n_at_once) = (number(0, 1000) as usize, number(1, 1), number(2, 2));
    let stage = session::Stage::new(program());
    let tally = Mutex::new(Tally::default());
    let next = Mutex::new(seed);
    std::thread::scope(|scope| {
        for _ in 0..n_at_once {
            scope.spawn(|| {
                while tally.lock().expect("a session panicked").n_kills() < n_kills {
                    let seed = {
                        let mut next = next.lock().expect("a session panicked");
                        *next += 1;
                        *next - 1
                    };
                    let told = session::run(&stage, seed);
                    told.complaints().for_each(|complaint| eprintln!("session {seed}: {complaint}"));
                    let mut tally = tally.lock().expect("a session panicked");
                    tally.add(told);
                    eprintln!("session {seed}: {}", tally.progress());
                }
            });
        }
    });
    let tally = tally.into_inner().expect("a session panicked");
    print!("{}", tally.table());
    if tally.is_sound() { ExitCode::SUCCESS } else { ExitCode::FAILURE }
}

/// The binary beside the examples' directory.
fn program() -> PathBuf {
    let own = std::env::current_exe().expect("the path of this tool");
    let program = own.ancestors().nth(2).expect("target/…/examples").join("tautrail");
    assert!(program.exists(), "{} is not there: cargo build first", program.display());
    program
}
