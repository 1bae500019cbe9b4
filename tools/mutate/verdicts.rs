//! Has `tautrail verify` look at damaged files in a process of its own, held to a memory limit and a time.

use std::io::Read;
use std::path::Path;
use std::process::{Command, Stdio};
use std::time::{Duration, Instant};

/// Address space a process may take, KiB: what the program needs for a sound file many times over.
const MEMORY_KIB_MAX: u64 = 4 << 20;
/// A file of a few hundred kilobytes is verified in far less.
const SECONDS_MAX: u64 = 120;

/// How the process ended.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Ended {
    /// With a verdict: sound or not, or a sentence.
    Said { code: i32, said: String },
    /// Killed by a signal, a panic, out of memory, or out of time: never right.
    Badly(String),
}

/// Runs the program at `program` on these files.
pub fn verify(program: &Path, options: &[&str], files: &[String]) -> Ended {
    let script = format!("ulimit -v {MEMORY_KIB_MAX}; exec \"$0\" \"$@\"");
    let mut child = Command::new("sh")
        .args(["-c", &script])
        .arg(program)
        .arg("verify")
        .args(options)
        .args(files)
        .env("NO_COLOR", "1")
        .stdout(Stdio::piped())
        .stderr(Stdio::piped())
        .spawn()
        .expect("sh starts");
    let mut pipes = (child.stdout.take().expect("piped"), child.stderr.take().expect("piped"));
    let readers = std::thread::spawn(move || {
        let (mut said, mut complained) = (Vec::new(), Vec::new());
        let _ = pipes.0.read_to_end(&mut said);
        let _ = pipes.1.read_to_end(&mut complained);
        String::from_utf8_lossy(&[said, complained].concat()).into_owned()
    });
    let begun = Instant::now();
    let status = loop {
        if let Some(status) = child.try_wait().expect("the child can be waited for") {
            break status;
        }
        if begun.elapsed() > Duration::from_secs(SECONDS_MAX) {
            let _ = child.kill();
            let _ = child.wait();
            return Ended::Badly(format!("not done in {SECONDS_MAX} s"));
        }
        std::thread::sleep(Duration::from_millis(5));
    };
    let said = readers.join().unwrap_or_default();
    match status.code() {
        Some(code @ 0..=2) => Ended::Said { code, said },
        _ => Ended::Badly(format!("{status}: {}", said.lines().last().unwrap_or_default())),
    }
}
