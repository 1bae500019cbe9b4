//! `tautrail bundle TRIAL --out FILE`: everything about a trial in one archive.

use std::path::PathBuf;
use std::sync::Arc;

use jiff::Timestamp;
use tautrail::archive::{Extras, bundle, file_sha256};
use tautrail::journal::{Disk, RealDisk};

use super::screen::{Screen, Tone};
use super::{Failure, Verdict};

/// Bundle a trial, its amendments, holds and journal, logs and named files into one archive with a manifest
///
/// The archive is plain tar; manifest.json in it names every file with its SHA-256, and SHA256SUMS is for `sha256sum -c`.
#[derive(Debug, clap::Args)]
#[command(after_help = BUNDLE_HELP)]
pub struct Args {
    /// The trial file
    trial: PathBuf,
    /// The archive to write; it must not be there yet
    #[arg(long, value_name = "FILE")]
    out: PathBuf,
    /// A log to put in (repeat for several)
    #[arg(long = "log", value_name = "FILE")]
    logs: Vec<PathBuf>,
    /// A file to put in: camera, photograph, form (repeat for several)
    #[arg(long = "attach", value_name = "FILE")]
    attachments: Vec<PathBuf>,
}

const BUNDLE_HELP: &str = "\
Examples:
  tautrail bundle trials/trial-000012-7f3a9c.h5 --out incident.tar --attach film.mov --attach hook.jpg
  journalctl -u tautrail --since 13:30 > daemon.log; tautrail bundle TRIAL --out incident.tar --log daemon.log
  tar -xf incident.tar && cd trial-000012-7f3a9c-bundle && sha256sum -c SHA256SUMS

A hash proves nothing alone: write the archive's own SHA-256, which is printed, and the report's raw SHA-256 down elsewhere.

Exit code: 0 bundled, 1 bundled, but something is missing or doubtful, 2 no bundle.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let extras = Extras { logs: args.logs.clone(), attachments: args.attachments.clone() };
    let told = |path: &std::path::Path| screen.progress(&format!("packing {}", path.display()), true);
    let bundled = bundle(&args.trial, &extras, &args.out, &disk, Timestamp::now(), told)?;
    let sha256 = file_sha256(&args.out)?;
    if screen.json {
        let mut value = serde_json::to_value(&bundled)?;
        value["bundle"] = serde_json::json!(args.out);
        value["bundle_sha256"] = serde_json::json!(sha256);
        screen.value(&value);
    } else {
        for file in &bundled.files {
            screen.line(format!("  {:<10} {:>12} bytes  {}", file.kind, file.bytes, file.path));
        }
        for remark in &bundled.remarks {
            screen.line(format!("  {} {remark}", screen.toned("look at:", Tone::Caution)));
        }
        screen.line(format!("raw sha256    {}", bundled.raw_sha256));
        screen.line(format!("bundle sha256 {sha256}  {}", args.out.display()));
    }
    Ok(if bundled.remarks.is_empty() { Verdict::Done } else { Verdict::CheckFailed })
}
