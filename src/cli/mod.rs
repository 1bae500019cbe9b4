//! One file a command: parses, calls the library, prints. Exit codes: 0 done, 1 a check failed, 2 could not run.

use std::process::ExitCode;

pub fn run() -> ExitCode {
    eprintln!("tautrail: no command is built yet");
    ExitCode::from(2)
}
