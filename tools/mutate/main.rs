//! Damages a real trial file in thousands of ways and has each verified: no crash, no panic, no runaway memory, always an
//! answer. `cargo run --example mutate -- [N] [FIRST] [TRIAL]`; N 10 000, FIRST 1, TRIAL the kept one by default.
//! `cargo run --example mutate -- counts [N] [FIRST]` alters single counts through h5py instead and counts what is found.
//!
//! Numbers are never chosen: after 1 to N, the run with FIRST = N + 1 is the fresh one.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a tool that cannot go on stops here")]

mod counts;
#[path = "../../tests/support/kept.rs"]
mod kept_file;
mod mutants;
#[path = "../../tests/support/mod.rs"]
mod support;
mod verdicts;

use std::path::PathBuf;
use std::process::ExitCode;

use mutants::{metadata, mutant};
use verdicts::{Ended, verify};

/// Files a process looks at.
const BATCH: usize = 20;

fn main() -> ExitCode {
    let args: Vec<String> = std::env::args().skip(1).collect();
    // Built beside this one.
    let program: PathBuf = std::env::current_exe().unwrap().ancestors().nth(2).unwrap().join("tautrail");
    assert!(program.exists(), "{} is missing: cargo build first", program.display());
    let dir = tempfile::tempdir().unwrap();
    let kept = kept_file::kept("format-1.h5", dir.path());
    if args.first().is_some_and(|word| word == "counts") {
        let number = |at: usize, usual: usize| args.get(at).map_or(usual, |text| text.parse().expect("a number"));
        return counts::run(&program, &kept, number(1, 1000), number(2, 1));
    }
    let number = |at: usize, usual: u64| args.get(at).map_or(usual, |text| text.parse().expect("a number"));
    let (n, first) = (number(0, 10_000), number(1, 1));
    let whole = std::fs::read(args.get(2).map_or(kept, PathBuf::from)).unwrap();
    let ranges = metadata(&whole);
    let (mut n_sound, mut n_not, mut n_refused, mut bad) = (0, 0, 0, Vec::new());
    let numbers: Vec<u64> = (first..first + n).collect();
    for batch in numbers.chunks(BATCH) {
        let made: Vec<(u64, String, String)> = batch
            .iter()
            .map(|number| {
                let (done, bytes) = mutant(&whole, &ranges, *number);
                let path = dir.path().join(format!("trial-mutant-{number}.h5"));
                std::fs::write(&path, bytes).unwrap();
                (*number, done, path.to_str().unwrap().to_owned())
            })
            .collect();
        let files: Vec<String> = made.iter().map(|(_, _, path)| path.clone()).collect();
        let mut lines = String::new();
        match verify(&program, &[], &files) {
            Ended::Said { said, .. } => lines = said,
            Ended::Badly(_) => {
                for (number, done, path) in &made {
                    match verify(&program, &[], std::slice::from_ref(path)) {
                        Ended::Said { said, .. } => lines.push_str(&said),
                        Ended::Badly(how) => bad.push(format!("mutant {number}, {done}: {how}")),
                    }
                }
            }
        }
        n_sound += lines.matches(": sound, ").count();
        n_not += lines.matches(": NOT SOUND, ").count();
        n_refused += lines.matches("UNREADABLE").count();
        files.iter().for_each(|path| std::fs::remove_file(path).unwrap());
        eprint!("\r{} of {n}, {} ended badly ", batch.last().unwrap() + 1 - first, bad.len());
    }
    eprintln!();
    bad.iter().for_each(|line| println!("{line}"));
    println!(
        "mutants {n} from {first}: {n_sound} verified as sound, {n_not} not sound, {n_refused} refused, {} ended badly",
        bad.len()
    );
    if bad.is_empty() && n_sound + n_not + n_refused == n as usize { ExitCode::SUCCESS } else { ExitCode::FAILURE }
}
