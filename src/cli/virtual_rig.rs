//! `tautrail virtual-rig …`: the virtual rig's own command line, carried inside for `rehearse`.

use std::ffi::OsString;

use super::{Failure, Verdict};

/// The virtual rig's own command line (`tautrail virtual-rig --help`)
#[derive(Debug, clap::Args)]
#[command(disable_help_flag = true)]
pub struct Args {
    #[arg(trailing_var_arg = true, allow_hyphen_values = true)]
    words: Vec<OsString>,
}

/// Runs it in this process; it prints its own refusals, and its exit code is ours.
pub fn run(args: &Args) -> Result<Verdict, Failure> {
    let words = std::iter::once(OsString::from("virtual-rig")).chain(args.words.iter().cloned());
    Ok(Verdict::EndedWith(virtual_rig::cli::run(words)))
}
