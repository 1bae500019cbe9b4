//! Sealing in a child process as the daemon does, measured.

use std::path::Path;
use std::process::Command;
use std::time::Instant;

/// What one sealing took.
pub struct Run {
    pub wall_s: f64,
    pub processor_s: f64,
    /// Greatest resident size.
    pub peak_mib: f64,
}

/// Seals in a child as the daemon does.
pub fn seal_once(dir: &Path, journal_id: &str, trial_id: &str) -> Run {
    let program = std::env::current_exe().unwrap().ancestors().nth(2).map(|target| target.join("tautrail")).unwrap();
    let begun = Instant::now();
    // Python hands out the resource usage of one child, which the standard library of Rust does not.
    let script = "import os,sys,resource\npid=os.fork()\nif pid==0: os.execv(sys.argv[1],sys.argv[1:])\n_,status,usage=os.wait4(pid,0)\nprint(os.waitstatus_to_exitcode(status),usage.ru_maxrss,usage.ru_utime+usage.ru_stime)";
    let args = ["seal-child", dir.to_str().unwrap(), journal_id, trial_id];
    let output = Command::new("python3").arg("-c").arg(script).arg(program).args(args).output().unwrap();
    let wall_s = begun.elapsed().as_secs_f64();
    let text = String::from_utf8(output.stdout).unwrap();
    let last: Vec<f64> = text.lines().last().unwrap().split(' ').map(|word| word.parse().unwrap()).collect();
    assert!(last[0] == 0.0, "sealing failed: {text}");
    Run { wall_s, processor_s: last[2], peak_mib: last[1] / 1024.0 }
}
