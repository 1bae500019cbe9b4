//! Processes that are started to be killed.

use std::path::{Path, PathBuf};
use std::process::{Child, Command, Stdio};
use std::time::Duration;

use super::sentinel::Sentinel;

pub fn monotonic_ns() -> i64 {
    virtual_rig::play::pty::monotonic_ns()
}

/// A daemon, or `recover`, with a sentinel beside it.
pub struct Victim {
    child: Child,
    sentinel: Sentinel,
    pub spawned_ns: i64,
}

/// When, and in what company, it died.
#[derive(Debug, Clone, Copy)]
pub struct Killed {
    pub spawned_ns: i64,
    /// Read before the signals were sent.
    pub killed_ns: i64,
    /// How late the machine was with the sentinel's last stamp.
    pub late_ns: i64,
    /// A sealing process ran below it.
    pub sealing: bool,
    /// It had ended by itself before.
    pub over: bool,
}

impl Victim {
    /// It works in `archive`, as does everything that it starts: by that they are found again.
    pub fn start(program: &Path, args: &[&str], archive: &Path, stamps: PathBuf) -> Self {
        let sentinel = Sentinel::start(stamps);
        let spawned_ns = monotonic_ns();
        let child = quiet(Command::new(program).args(args).current_dir(archive)).spawn().expect("tautrail starts");
        Self { child, sentinel, spawned_ns }
    }

    pub fn is_over(&mut self) -> bool {
        self.child.try_wait().expect("its state").is_some()
    }

    /// SIGKILL to it, to the sentinel, and, if said so, to the sealing below it.
    pub fn kill(mut self, with_sealing: bool) -> Killed {
        let below = children_of(self.child.id());
        let over = self.is_over();
        let killed_ns = monotonic_ns();
        // Refused only where it has ended by itself.
        let _ = self.child.kill();
        self.sentinel.kill();
        if with_sealing {
            below.iter().for_each(|&pid| kill(pid));
        }
        self.child.wait().expect("it ends");
        let late_ns = self.sentinel.lateness_ns(killed_ns);
        Killed { spawned_ns: self.spawned_ns, killed_ns, late_ns, sealing: !below.is_empty(), over }
    }

    /// Waits for its end; the exit code.
    pub fn finish(mut self) -> Option<i32> {
        let code = self.child.wait().expect("it ends").code();
        self.sentinel.kill();
        self.sentinel.lateness_ns(monotonic_ns());
        code
    }
}

pub fn quiet(command: &mut Command) -> &mut Command {
    command.stdin(Stdio::null()).stdout(Stdio::null()).stderr(Stdio::null())
}

fn kill(pid: i32) {
    // SAFETY: sends a signal; the process was a child of one of ours a moment ago, and ids are not reused that fast.
    unsafe { libc::kill(pid, libc::SIGKILL) };
}

fn children_of(parent: u32) -> Vec<i32> {
    let parent = parent.to_string();
    processes()
        .filter(|pid| {
            let stat = std::fs::read_to_string(format!("/proc/{pid}/stat")).unwrap_or_default();
            let after_name = stat.rsplit_once(')').map_or("", |(_, rest)| rest);
            after_name.split_whitespace().nth(1) == Some(parent.as_str())
        })
        .collect()
}

/// Waits until no process works in this directory any more: sealing that outlived its daemon.
pub fn wait_for_orphans(archive: &Path) {
    let works_there = |pid: i32| std::fs::read_link(format!("/proc/{pid}/cwd")).is_ok_and(|at| at == archive);
    while processes().any(works_there) {
        std::thread::sleep(Duration::from_millis(20));
    }
}

fn processes() -> impl Iterator<Item = i32> {
    let entries = std::fs::read_dir("/proc").expect("/proc");
    entries.filter_map(|entry| entry.ok()?.file_name().to_str()?.parse().ok())
}
