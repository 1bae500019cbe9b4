//! The virtual rig's own binary.

use std::process::ExitCode;

fn main() -> ExitCode {
    ExitCode::from(virtual_rig::cli::run(std::env::args_os()))
}
