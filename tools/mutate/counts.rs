//! Alters single counts of a trial through h5py, which keeps the file's own checksums right, and has `verify` find each.

use std::path::Path;
use std::process::ExitCode;

use crate::support::run_oracle;
use crate::verdicts::{Ended, verify};

/// Files a process looks at.
const BATCH: usize = 100;

/// Each file `k` gets one count of one channel changed by one bit or by one, drawn from the seed `k`.
const ALTER_PY: &str = r"
import sys, random, h5py
for number, path in zip(map(int, sys.argv[1].split(',')), sys.argv[2:]):
    random.seed(number)
    with h5py.File(path, 'r+') as f:
        channels = []
        f['raw'].visititems(lambda name, o: channels.append(name) if isinstance(o, h5py.Dataset) and 'encoding' in o.attrs else None)
        counts = f['raw'][random.choice(sorted(channels))]
        i = random.randrange(len(counts))
        was = int(counts[i])
        counts[i] = random.choice([was ^ (1 << random.randrange(24)), was + 1, was - 1])
        assert counts[i] != was
";

pub fn run(program: &Path, trial: &Path, n: usize, first: usize) -> ExitCode {
    let dir = tempfile::tempdir().unwrap();
    let numbers: Vec<usize> = (first..first + n).collect();
    let mut n_found = 0;
    for batch in numbers.chunks(BATCH) {
        let path = |number: &usize| dir.path().join(format!("altered-{number}.h5")).to_str().unwrap().to_owned();
        let files: Vec<String> = batch.iter().map(path).collect();
        for file in &files {
            std::fs::copy(trial, file).unwrap();
        }
        let listed = batch.iter().map(usize::to_string).collect::<Vec<_>>().join(",");
        let mut args = vec![listed.as_str()];
        args.extend(files.iter().map(String::as_str));
        run_oracle(ALTER_PY, &args);
        match verify(program, &["--stored-only"], &files) {
            Ended::Said { said, .. } => n_found += said.matches("raw data of ").count(),
            Ended::Badly(how) => println!("one of {batch:?} ended badly: {how}"),
        }
        files.iter().for_each(|file| std::fs::remove_file(file).unwrap());
        eprint!("\r{} of {n} ", batch.last().unwrap() + 1 - first);
    }
    eprintln!();
    println!("single altered counts {n} from {first}: {n_found} found");
    if n_found == n { ExitCode::SUCCESS } else { ExitCode::FAILURE }
}
