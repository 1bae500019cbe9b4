//! Damaged trial files, as `tools/mutate` makes them by the ten thousand: always an answer, never a crash.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]

#[path = "support/kept.rs"]
mod kept_file;
#[path = "../tools/mutate/mutants.rs"]
mod mutants;
#[path = "../tools/mutate/verdicts.rs"]
mod verdicts;

use std::path::Path;

use mutants::{metadata, mutant};
use verdicts::{Ended, verify};

/// The first of the tool's numbers.
const N: u64 = 100;

#[test]
fn a_damaged_trial_is_answered_with_a_sentence() {
    let dir = tempfile::tempdir().unwrap();
    let whole = std::fs::read(kept_file::kept("format-1.h5", dir.path())).unwrap();
    let ranges = metadata(&whole);
    let mut n_answers = 0;
    for numbers in (1..=N).collect::<Vec<_>>().chunks(25) {
        let made: Vec<(String, String)> = numbers
            .iter()
            .map(|number| {
                let (done, bytes) = mutant(&whole, &ranges, *number);
                let path = dir.path().join(format!("trial-mutant-{number}.h5"));
                std::fs::write(&path, bytes).unwrap();
                (done, path.to_str().unwrap().to_owned())
            })
            .collect();
        let files: Vec<String> = made.iter().map(|(_, path)| path.clone()).collect();
        match verify(Path::new(env!("CARGO_BIN_EXE_tautrail")), &[], &files) {
            Ended::Said { said, .. } => {
                n_answers += [": sound, ", ": NOT SOUND, ", "UNREADABLE"]
                    .map(|word| said.matches(word).count())
                    .iter()
                    .sum::<usize>();
            }
            Ended::Badly(how) => panic!("{how}: one of mutants {numbers:?}, {made:?}"),
        }
    }
    assert_eq!(n_answers as u64, N, "every file is answered for");
}
