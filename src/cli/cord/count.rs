//! `tautrail count-cords DIR` (hidden): what the daemon starts to count what each cord has served, niced, beside itself.

use std::path::PathBuf;

use tautrail::archive::cord_service;

use crate::cli::screen::Screen;
use crate::cli::{Failure, Verdict};

/// Count what each cord has served by the trials of an archive; the daemon starts this
#[derive(Debug, clap::Args)]
pub struct Args {
    /// The archive directory
    dir: PathBuf,
    /// Added to the process's niceness: counting must never be in the way of acquisition
    #[arg(long, value_name = "N", default_value_t = 15, value_parser = clap::value_parser!(i32).range(0..=19))]
    niceness: i32,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    // Refused, counting goes on at ordinary priority.
    let _ = rustix::process::nice(args.niceness);
    let service = cord_service(&args.dir, |_, _| {})?;
    if let Some(one) = service.not_counted.first() {
        let (n, path, why) = (service.not_counted.len(), one.path.display(), &one.why);
        return Err(format!("{n} trials can't be counted, so the cords' service is not known: {path}: {why}").into());
    }
    screen.value(&serde_json::to_value(&service.by_serial)?);
    Ok(Verdict::Done)
}
