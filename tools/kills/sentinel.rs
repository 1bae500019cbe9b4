//! The sentinel: as little as a recorder can be. A stamp is written into a pty each 5 ms; a process reads the pty and
//! appends what it read to a file. Killed with the daemon, the age of its last stamp says how late this machine was with
//! the way of every byte: the writer's thread, the kernel's side of the pty, a process that wakes, reads and writes.

use std::fs::File;
use std::io::{Read, Seek, SeekFrom, Write};
use std::os::fd::OwnedFd;
use std::path::{Path, PathBuf};
use std::process::{Child, Command};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::thread::JoinHandle;
use std::time::Duration;

use rustix::pty::OpenptFlags;
use rustix::termios::OptionalActions;

use super::process::{monotonic_ns, quiet};

pub const WORD: &str = "sentinel";
const STAMP_EVERY: Duration = Duration::from_millis(5);
const STAMP_BYTES: usize = 8;

pub struct Sentinel {
    child: Child,
    stamps: PathBuf,
    stop: Arc<AtomicBool>,
    writer: JoinHandle<()>,
    started_ns: i64,
}

/// Appends to a file what a pty gives, until killed.
pub fn be(port: &Path, stamps: &Path) -> ! {
    let mut port = File::open(port).expect("the sentinel's pty");
    let mut file = File::options().append(true).create(true).open(stamps).expect("the sentinel's file");
    let mut buffer = [0; 4096];
    loop {
        let n = port.read(&mut buffer).expect("the sentinel reads");
        file.write_all(&buffer[..n]).expect("the sentinel writes");
    }
}

impl Sentinel {
    pub fn start(stamps: PathBuf) -> Self {
        let (master, slave, port) = raw_pty();
        let program = std::env::current_exe().expect("the path of this tool");
        let mut command = Command::new(program);
        let child = quiet(command.arg(WORD).arg(&port).arg(&stamps)).spawn().expect("the sentinel starts");
        let stop = Arc::new(AtomicBool::new(false));
        let stopped = Arc::clone(&stop);
        let writer = std::thread::spawn(move || {
            let _open_all_along = slave;
            let mut master = File::from(master);
            while !stopped.load(Ordering::Relaxed) {
                master.write_all(&monotonic_ns().to_le_bytes()).expect("the pty takes a stamp");
                std::thread::sleep(STAMP_EVERY);
            }
        });
        Self { child, stamps, stop, writer, started_ns: monotonic_ns() }
    }

    /// SIGKILL; reaped by [`Self::lateness_ns`].
    pub fn kill(&mut self) {
        // It ends in no other way.
        let _ = self.child.kill();
    }

    /// How late the machine was with the last stamp at `killed_ns`.
    pub fn lateness_ns(mut self, killed_ns: i64) -> i64 {
        self.child.wait().expect("the sentinel ends");
        self.stop.store(true, Ordering::Relaxed);
        self.writer.join().expect("the stamps' writer ends");
        let last_ns = last_stamp(&self.stamps).unwrap_or(self.started_ns);
        let _ = std::fs::remove_file(&self.stamps);
        (killed_ns - last_ns - STAMP_EVERY.as_nanos() as i64).max(0)
    }
}

fn raw_pty() -> (OwnedFd, OwnedFd, PathBuf) {
    let flags = OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC;
    let master = rustix::pty::openpt(flags).expect("a pty");
    rustix::pty::grantpt(&master).expect("the pty is granted");
    rustix::pty::unlockpt(&master).expect("the pty is unlocked");
    let mut settings = rustix::termios::tcgetattr(&master).expect("the pty's settings");
    settings.make_raw();
    rustix::termios::tcsetattr(&master, OptionalActions::Now, &settings).expect("a raw pty");
    let name = rustix::pty::ptsname(&master, Vec::new()).expect("the pty's name");
    let port = PathBuf::from(name.to_str().expect("a plain path"));
    let slave = File::options().read(true).write(true).open(&port).expect("the pty's other end");
    (master, slave.into(), port)
}

fn last_stamp(path: &Path) -> Option<i64> {
    let mut file = File::open(path).ok()?;
    let n_whole = file.metadata().ok()?.len() / STAMP_BYTES as u64;
    file.seek(SeekFrom::Start(n_whole.checked_sub(1)? * STAMP_BYTES as u64)).ok()?;
    let mut stamp = [0; STAMP_BYTES];
    file.read_exact(&mut stamp).ok()?;
    Some(i64::from_le_bytes(stamp))
}
