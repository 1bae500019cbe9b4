//! Bench section `seal`: time and peak memory of sealing four channels at 10 kHz, against h5py writing the same arrays
//! with the same chunks and filters: single thread both, best of three each, in the same run.
//!
//! Sealing also decodes the journal twice, reads the trial and proves the file by reading it back. Processor time is
//! compared, since sealing runs niced and other work would count against it alone; wall time is printed beside it. Where the
//! control's own runs differ by more than a fifth the machine is unfit for a verdict.
//!
//!     cargo run --example bench-seal -- [TIMES THE NOMINAL SLOW PHASES, 10]

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a bench that cannot go on stops here")]

#[path = "../../tests/support/journal.rs"]
mod journal_file;
#[path = "shared/sealing.rs"]
mod sealing;

use std::path::{Path, PathBuf};
use std::process::Command;
use std::time::Instant;

use journal_file::{JOURNAL_ID, TRIAL_ID, nominal};

/// Ten times the nominal slow phases: about four and a half minutes.
const PACE: f64 = 10.0;
const N_RUNS: usize = 3;
const CONTROL_UNFIT: f64 = 1.2;

/// Prints the least and the greatest processor time of writing every large array of the file again, in seconds.
const H5PY: &str = r"
import sys, time, os, h5py
arrays = []
def take(name, o):
    if isinstance(o, h5py.Dataset) and o.chunks and o.dtype.kind in 'iuf':
        arrays.append((name, o[:], o.chunks))
with h5py.File(sys.argv[1]) as f: f.visititems(take)
taken = []
for _ in range(int(sys.argv[3])):
    begun = time.process_time()
    with h5py.File(sys.argv[2], 'w') as f:
        for name, values, chunks in arrays:
            f.create_dataset(name, data=values, chunks=chunks, maxshape=(None,), shuffle=True, compression='gzip', compression_opts=1, fletcher32=True)
    with open(sys.argv[2], 'rb') as f: os.fsync(f.fileno())
    taken.append(time.process_time() - begun)
print(min(taken), max(taken))
";

fn main() {
    let dir = tempfile::tempdir().unwrap();
    let pace = std::env::args().nth(1).map_or(PACE, |arg| arg.parse().expect("the pace is a number"));
    nominal(dir.path(), pace, true);
    let mut best = sealing::Run { wall_s: f64::INFINITY, processor_s: f64::INFINITY, peak_mib: 0.0 };
    let target = dir.path().join(format!("trial-{TRIAL_ID}.h5"));
    for _ in 0..N_RUNS {
        let _ = std::fs::remove_file(&target);
        let run = sealing::seal_once(dir.path(), JOURNAL_ID, TRIAL_ID);
        best.wall_s = best.wall_s.min(run.wall_s);
        best.processor_s = best.processor_s.min(run.processor_s);
        best.peak_mib = best.peak_mib.max(run.peak_mib);
    }
    let (h5py_s, h5py_worst_s) = h5py_seconds(&target, &dir.path().join("control.h5"));
    let (_, range) = journal_file::opened(dir.path());
    let trial_s = (range.last_host_ns - range.first_host_ns) as f64 * 1e-9;
    let mib = |path: &Path| std::fs::metadata(path).unwrap().len() as f64 / f64::from(1 << 20);
    let journal = dir.path().join("journal").join(tautrail::journal::segment_name(JOURNAL_ID, 1));
    println!("figure seal_trial_length value={trial_s:.1} unit=s reference=- ratio=- target=-");
    let sealing::Run { wall_s, processor_s, peak_mib } = best;
    let ratio = processor_s / h5py_s;
    println!(
        "figure seal_processor_time value={processor_s:.2} unit=s reference={h5py_s:.2} ratio={ratio:.2} target=1"
    );
    if h5py_worst_s > CONTROL_UNFIT * h5py_s {
        println!("inconclusive seal_processor_time: the control's own runs took {h5py_s:.2} to {h5py_worst_s:.2} s");
    }
    println!("figure seal_wall_time_niced value={wall_s:.2} unit=s reference=- ratio=- target=-");
    println!("figure seal_peak_memory value={peak_mib:.0} unit=MiB reference=- ratio=- target=-");
    let (file, journal) = (mib(&target), mib(&journal));
    start_up(dir.path());
    println!(
        "figure seal_file_size value={file:.1} unit=MiB reference={journal:.1} ratio={:.2} target={}",
        file / journal,
        tautrail::archive::FILE_SHARE
    );
}

/// What a start reads of the journal where nothing is noted as done with: seconds a GiB.
fn start_up(dir: &Path) {
    let (reader, _) = journal_file::opened(dir);
    let n_bytes: u64 = reader.segments().iter().map(|segment| segment.bytes).sum();
    let begun = Instant::now();
    reader.survey().unwrap();
    let s_per_gib = begun.elapsed().as_secs_f64() * f64::from(1 << 30) / n_bytes as f64;
    println!("figure start_up_unsettled value={s_per_gib:.2} unit=s/GiB reference=- ratio=- target=-");
}

fn h5py_seconds(trial: &Path, control: &Path) -> (f64, f64) {
    let setup = Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/oracles/setup");
    let python = PathBuf::from(String::from_utf8(Command::new(setup).output().unwrap().stdout).unwrap().trim());
    let output =
        Command::new(python).args(["-c", H5PY]).args([trial, control]).arg(N_RUNS.to_string()).output().unwrap();
    assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
    let text = String::from_utf8(output.stdout).unwrap();
    let mut taken = text.split_whitespace().map(|word| word.parse().unwrap());
    (taken.next().unwrap(), taken.next().unwrap())
}
