//! A hobby board on a pty that prints a number 30 times a second: a cell with whatever the test hangs on it.

use std::fs::File;
use std::io::{ErrorKind, Write};
use std::os::fd::OwnedFd;
use std::path::Path;
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex};
use std::thread::JoinHandle;
use std::time::{Duration, Instant};

use rustix::fs::OFlags;
use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
use rustix::termios::{OptionalActions, tcgetattr, tcsetattr};

const BETWEEN: Duration = Duration::from_micros(33_333);

/// What the board prints next.
pub trait Prints: Send + 'static {
    fn line(&mut self) -> String;
}

/// A board that prints until it is dropped. The slave is held open too, so that a port may be opened late.
pub struct Board<P> {
    pub shown: Arc<Mutex<P>>,
    stop: Arc<AtomicBool>,
    thread: Option<JoinHandle<()>>,
    _slave: OwnedFd,
}

impl<P: Prints> Board<P> {
    /// A board whose port is the link at `port`.
    pub fn at(port: &Path, shown: P) -> Self {
        let master = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC).unwrap();
        grantpt(&master).unwrap();
        unlockpt(&master).unwrap();
        let name = ptsname(&master, Vec::new()).unwrap();
        let slave =
            rustix::fs::open(name.as_c_str(), OFlags::RDWR | OFlags::NOCTTY, rustix::fs::Mode::empty()).unwrap();
        let mut modes = tcgetattr(&slave).unwrap();
        modes.make_raw();
        tcsetattr(&slave, OptionalActions::Now, &modes).unwrap();
        std::fs::create_dir_all(port.parent().unwrap()).unwrap();
        std::os::unix::fs::symlink(name.to_str().unwrap(), port).unwrap();
        let (shown, stop) = (Arc::new(Mutex::new(shown)), Arc::new(AtomicBool::new(false)));
        let (its_shown, its_stop) = (Arc::clone(&shown), Arc::clone(&stop));
        // Nobody may read for a while: a full pty must not hold the board up.
        rustix::io::ioctl_fionbio(&master, true).unwrap();
        let thread = std::thread::spawn(move || print(File::from(master), &its_shown, &its_stop));
        Self { shown, stop, thread: Some(thread), _slave: slave }
    }
}

fn print<P: Prints>(mut master: File, shown: &Mutex<P>, stop: &AtomicBool) {
    let started = Instant::now();
    for n in 1_u32.. {
        if stop.load(Ordering::Relaxed) {
            return;
        }
        let line = shown.lock().unwrap().line();
        match master.write_all(format!("{line}\r\n").as_bytes()) {
            Err(error) if error.kind() != ErrorKind::WouldBlock => panic!("the pty is gone: {error}"),
            _ => {}
        }
        std::thread::sleep((BETWEEN * n).saturating_sub(started.elapsed()));
    }
}

impl<P> Drop for Board<P> {
    fn drop(&mut self) {
        self.stop.store(true, Ordering::Relaxed);
        if let Some(thread) = self.thread.take() {
            // Its panic has been printed; a second one here would hide the test's own.
            let _ = thread.join();
        }
    }
}
