//! Bench section `seal_hour`: peak memory and time of sealing a hold of an hour, four channels at 10 kHz.
//!
//! Only the memory has a target, and that does not depend on what else the machine does: no control.
//!
//!     cargo run --example bench-seal_hour -- [TIMES THE NOMINAL SLOW PHASES, 133]

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a bench that cannot go on stops here")]

#[path = "../../tests/support/journal.rs"]
mod journal_file;
#[path = "shared/sealing.rs"]
mod sealing;

use journal_file::{JOURNAL_ID, TRIAL_ID, nominal};

/// Times the nominal slow phases: an hour.
const PACE: f64 = 133.0;

fn main() {
    let dir = tempfile::tempdir().unwrap();
    let pace = std::env::args().nth(1).map_or(PACE, |arg| arg.parse().expect("the pace is a number"));
    nominal(dir.path(), pace, true);
    let (_, range) = journal_file::opened(dir.path());
    let trial_s = (range.last_host_ns - range.first_host_ns) as f64 * 1e-9;
    let journal = dir.path().join("journal").join(tautrail::journal::segment_name(JOURNAL_ID, 1));
    let journal_mib = std::fs::metadata(journal).unwrap().len() as f64 / f64::from(1 << 20);
    let run = sealing::seal_once(dir.path(), JOURNAL_ID, TRIAL_ID);
    println!("figure seal_hour_length value={trial_s:.0} unit=s reference=- ratio=- target=-");
    println!("figure seal_hour_journal value={journal_mib:.1} unit=MiB reference=- ratio=- target=-");
    println!("figure seal_hour_processor_time value={:.1} unit=s reference=- ratio=- target=-", run.processor_s);
    println!("figure seal_hour_wall_time_niced value={:.1} unit=s reference=- ratio=- target=-", run.wall_s);
    let file_mib =
        std::fs::metadata(dir.path().join(format!("trial-{TRIAL_ID}.h5"))).unwrap().len() as f64 / f64::from(1 << 20);
    println!(
        "figure seal_hour_file_size value={file_mib:.1} unit=MiB reference={journal_mib:.1} ratio={:.2} target={}",
        file_mib / journal_mib,
        tautrail::archive::FILE_SHARE
    );
    println!("figure seal_hour_peak_memory value={:.0} unit=MiB reference=- ratio=- target=256", run.peak_mib);
}
