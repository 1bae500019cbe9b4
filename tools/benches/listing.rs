//! Bench section `listing`: an archive of 10 000 trials, listed with no index, with a cold one and with a warm one, and the
//! warm one by the program as a user starts it.
//!
//! The archive is one small kept trial, hard-linked under 10 000 names: each name is a trial file of its own to the program,
//! which reads them one by one (from the page cache: the disk is left out).

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a bench that cannot go on stops here")]

#[path = "../../tests/support/kept.rs"]
mod kept_file;

use std::process::{Command, Stdio};
use std::time::{Duration, Instant, SystemTime};

use tautrail::archive::{Index, catalogue};

const N_TRIALS: usize = 10_000;
const N_RUNS: usize = 5;

fn main() {
    let dir = tempfile::tempdir().unwrap();
    let one = kept_file::kept("format-1.h5", dir.path());
    // Older than the moment in which a change might not show.
    std::fs::File::options()
        .append(true)
        .open(&one)
        .unwrap()
        .set_modified(SystemTime::now() - Duration::from_secs(3600))
        .unwrap();
    for k in 0..N_TRIALS {
        std::fs::hard_link(&one, dir.path().join(format!("trial-{:06}-{:06x}.h5", k + 1, k * 7919 % 0xff_ffff)))
            .unwrap();
    }
    let listed = |index: Index, n_read: usize| {
        let begun = Instant::now();
        let listed = catalogue(dir.path(), index, SystemTime::now(), |_, _| {}).unwrap();
        assert_eq!((listed.trials.len(), listed.n_read), (N_TRIALS, n_read));
        assert!(listed.trials.iter().all(|trial| trial.what.is_ok()));
        begun.elapsed().as_secs_f64()
    };
    let rebuild_s = listed(Index::Rebuilt, N_TRIALS);
    let warm_s = (0..N_RUNS).map(|_| listed(Index::Used, 0)).fold(f64::INFINITY, f64::min);
    let program = std::env::current_exe().unwrap().ancestors().nth(2).unwrap().join("tautrail");
    let command = |args: &[&str]| {
        let begun = Instant::now();
        let status = Command::new(&program).arg("trials").args(args).arg(dir.path()).stdout(Stdio::null()).status();
        assert!(status.unwrap().success());
        begun.elapsed().as_secs_f64()
    };
    let best = |args: &[&str]| (0..N_RUNS).map(|_| command(args)).fold(f64::INFINITY, f64::min);
    let index_bytes = std::fs::metadata(dir.path().join(".trials-index")).unwrap().len();
    println!("figure listing_rebuild value={rebuild_s:.2} unit=s reference=- ratio=- target=shown ({N_TRIALS} files)");
    println!("figure listing_index_size value={index_bytes} unit=byte reference=- ratio=- target=-");
    println!("figure listing_warm value={warm_s:.3} unit=s reference=- ratio=- target=under 1");
    println!("figure listing_warm_command value={:.3} unit=s reference=- ratio=- target=under 1", best(&[]));
    let asked = ["--outcome", "launched", "--sort", "hold_tension", "--reverse"];
    println!("figure listing_warm_selected value={:.3} unit=s reference=- ratio=- target=under 1", best(&asked));
}
