//! Bench section `read`: reading a sealed trial of about 30 s and four channels at 10 kHz, against h5py reading the same
//! file's signals and nothing more, in the same run. Process start is left out on both sides; best of several each.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a bench that cannot go on stops here")]

#[path = "../../tests/support/journal.rs"]
mod journal_file;
#[path = "../../tests/support/rehearsal_rig.rs"]
mod rehearsal_rig;
#[path = "../../tests/support/mod.rs"]
mod support;

use std::sync::Arc;
use std::time::Instant;

use journal_file::{nominal, opened};
use rehearsal_rig::rig_text;
use tautrail::archive::seal;
use tautrail::journal::{Disk, RealDisk};
use tautrail::reading::read;
use tautrail::trial::TrialFile;

/// Slow phases at 0.7 of their length: about 30 s in all.
const PACE: f64 = 0.7;
const N_RUNS: usize = 7;

/// Best wall time of reading every dataset of /signals that sealing took from the raw counts, in seconds.
const H5PY: &str = r#"
import sys, time, h5py
best = float("inf")
for _ in range(int(sys.argv[2])):
    begun = time.perf_counter()
    with h5py.File(sys.argv[1]) as f:
        for name, group in f["signals"].items():
            if isinstance(group, h5py.Group) and not name.startswith("motion_"):
                for data in group.values():
                    if isinstance(data, h5py.Dataset): data[()]
    best = min(best, time.perf_counter() - begun)
print(best)
"#;

fn main() {
    let dir = tempfile::tempdir().unwrap();
    nominal(dir.path(), PACE, true);
    let (reader, range) = opened(dir.path());
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let path = seal(&reader, &range, dir.path(), &disk).unwrap().path;
    let rig = tautrail::rig::parse(&rig_text("north-pier.toml")).unwrap();
    let (mut whole_s, mut derive_s, mut n_samples, mut length_s) = (f64::INFINITY, f64::INFINITY, 0, 0.0);
    for _ in 0..N_RUNS {
        let begun = Instant::now();
        let signals = TrialFile::open(&path).unwrap().signals().unwrap();
        let read_from_file = begun.elapsed().as_secs_f64();
        let reading = read(&signals, &rig);
        assert!(reading.result("launch_speed").is_some());
        let all = begun.elapsed().as_secs_f64();
        (whole_s, derive_s) = (whole_s.min(all), derive_s.min(all - read_from_file));
        n_samples = signals.iter().map(|signal| signal.value.len()).sum::<usize>();
        length_s = signals.iter().filter_map(|s| s.time_s.last()).copied().fold(0.0, f64::max);
    }
    let shown = path.to_str().unwrap();
    let h5py_s: f64 = support::run_oracle(H5PY, &[shown, &N_RUNS.to_string()]).trim().parse().unwrap();
    println!("figure read_trial_length value={length_s:.1} unit=s reference=- ratio=- target=about 30 s");
    println!("figure read_samples value={n_samples} unit=1 reference=- ratio=- target=-");
    println!("figure read_derive value={derive_s:.4} unit=s reference=- ratio=- target=-");
    println!(
        "figure read_trial value={whole_s:.4} unit=s reference={h5py_s:.4} ratio={:.2} target=at most 1 (h5py reading the signals)",
        whole_s / h5py_s
    );
}
