//! Bench section `read_signal`: one signal of a sealed trial of about 30 s at 10 kHz, whole and a window of one second from
//! its middle, against h5py reading the same datasets in the same run. Opening the file is part of both; process start of
//! neither. Best of several each. The window of both sides is by time: h5py reads the axis, finds it, reads the slice.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a bench that cannot go on stops here")]
#![allow(dead_code, reason = "the support file serves tests too")]

#[path = "../../tests/support/journal.rs"]
mod journal_file;
#[path = "../../tests/support/mod.rs"]
mod support;

use std::sync::Arc;
use std::time::Instant;

use journal_file::{nominal, opened};
use tautrail::archive::seal;
use tautrail::journal::{Disk, RealDisk};
use tautrail::trial::TrialFile;

/// Slow phases at 0.7 of their length: about 30 s in all.
const PACE: f64 = 0.7;
const N_RUNS: usize = 15;
const SIGNAL: &str = "line";
const WINDOW_S: f64 = 1.0;

const H5PY: &str = r#"
import sys, time, h5py, numpy as np
path, n, middle, width = sys.argv[1], int(sys.argv[2]), float(sys.argv[3]), float(sys.argv[4])
def whole(group):
    return group["time"][:], group["value"][:]
def window(group):
    t = group["time"][:]
    first, last = np.searchsorted(t, [middle, middle + width])
    return t[first:last], group["value"][first:last]
for deed in (whole, window):
    best = float("inf")
    for _ in range(n):
        begun = time.perf_counter()
        with h5py.File(path) as f:
            t, v = deed(f["signals/line"])
        best = min(best, time.perf_counter() - begun)
    print(best, len(v))
"#;

fn main() {
    let dir = tempfile::tempdir().unwrap();
    nominal(dir.path(), PACE, true);
    let (reader, range) = opened(dir.path());
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let path = seal(&reader, &range, dir.path(), &disk).unwrap().path;
    let (first_s, last_s) = {
        let signal = TrialFile::open(&path).unwrap().signal(SIGNAL).unwrap();
        (signal.time_s[0], *signal.time_s.last().unwrap())
    };
    let middle_s = f64::midpoint(first_s, last_s);
    let best = |from_s: f64, to_s: f64| {
        let (mut best_s, mut n) = (f64::INFINITY, 0);
        for _ in 0..N_RUNS {
            let begun = Instant::now();
            let signal = TrialFile::open(&path).unwrap().signal_between(SIGNAL, from_s, to_s).unwrap();
            best_s = best_s.min(begun.elapsed().as_secs_f64());
            n = signal.value.len();
        }
        (best_s, n)
    };
    let ours = [best(f64::NEG_INFINITY, f64::INFINITY), best(middle_s, middle_s + WINDOW_S)];
    let args = [path.to_str().unwrap(), &N_RUNS.to_string(), &middle_s.to_string(), &WINDOW_S.to_string()];
    let said = support::run_oracle(H5PY, &args);
    for ((name, (seconds, n)), line) in ["whole", "window"].iter().zip(ours).zip(said.lines()) {
        let (h5py_s, h5py_n) = line.split_once(' ').unwrap();
        assert_eq!(h5py_n.parse::<usize>().unwrap(), n, "both read the same samples");
        let h5py_s: f64 = h5py_s.parse().unwrap();
        println!(
            "figure read_signal_{name} value={seconds:.5} unit=s reference={h5py_s:.5} ratio={:.2} target=at most 1 (h5py, {n} samples)",
            seconds / h5py_s
        );
    }
}
