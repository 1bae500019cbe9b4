//! A cable between the rig and the daemon that can be pulled.

use std::fs::File;
use std::io::{ErrorKind, Read, Write};
use std::os::fd::OwnedFd;
use std::path::{Path, PathBuf};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex};
use std::thread::JoinHandle;
use std::time::Duration;

use rustix::fs::{Mode, OFlags};
use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
use rustix::termios::{OptionalActions, tcgetattr, tcsetattr};

use crate::stage::{DEVICES, Stage};

/// Passes bytes both ways while it is plugged in; what comes meanwhile otherwise is gone, as with a real cable.
struct Cable {
    plug: Arc<Mutex<Option<File>>>,
    end: Arc<AtomicBool>,
    path: PathBuf,
    thread: Option<JoinHandle<()>>,
}

impl Cable {
    fn from(far: &Path, path: PathBuf) -> Self {
        let far = rustix::fs::open(far, OFlags::RDWR | OFlags::NOCTTY | OFlags::NONBLOCK, Mode::empty()).unwrap();
        let plug: Arc<Mutex<Option<File>>> = Arc::default();
        let end = Arc::new(AtomicBool::new(false));
        let (theirs, over) = (Arc::clone(&plug), Arc::clone(&end));
        let thread = std::thread::spawn(move || relay(&File::from(far), &theirs, &over));
        let cable = Self { plug, end, path, thread: Some(thread) };
        cable.plug_in();
        cable
    }

    fn plug_in(&self) {
        let master: OwnedFd = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC).unwrap();
        grantpt(&master).unwrap();
        unlockpt(&master).unwrap();
        let mut settings = tcgetattr(&master).unwrap();
        settings.make_raw();
        tcsetattr(&master, OptionalActions::Now, &settings).unwrap();
        rustix::io::ioctl_fionbio(&master, true).unwrap();
        let name = ptsname(&master, Vec::new()).unwrap().into_string().unwrap();
        std::os::unix::fs::symlink(name, &self.path).unwrap();
        *self.plug.lock().unwrap() = Some(master.into());
    }

    fn pull(&self) {
        std::fs::remove_file(&self.path).unwrap();
        self.plug.lock().unwrap().take();
    }
}

impl Drop for Cable {
    fn drop(&mut self) {
        self.end.store(true, Ordering::Relaxed);
        if let Some(thread) = self.thread.take() {
            let _ = thread.join(); // a panic there was printed
        }
    }
}

fn relay(far: &File, plug: &Mutex<Option<File>>, end: &AtomicBool) {
    let (mut down, mut up) = (Way::default(), Way::default());
    while !end.load(Ordering::Relaxed) {
        let plugged = plug.lock().unwrap();
        let moved = match plugged.as_ref() {
            Some(near) => down.pass(far, Some(near)) | up.pass(near, Some(far)),
            None => {
                up.waiting.clear();
                down.pass(far, None)
            }
        };
        drop(plugged);
        if !moved {
            std::thread::sleep(Duration::from_millis(1));
        }
    }
}

/// One direction of the cable. What its end cannot take yet waits, and nothing more is read meanwhile: only a pulled cable
/// loses bytes, however slow the machine is.
#[derive(Default)]
struct Way {
    waiting: Vec<u8>,
}

impl Way {
    /// Whether anything moved. A cable without an end swallows what is sent.
    fn pass(&mut self, mut from: &File, to: Option<&File>) -> bool {
        let Some(mut to) = to else {
            self.waiting.clear();
            return read(&mut from).is_some();
        };
        if self.waiting.is_empty() {
            self.waiting = read(&mut from).unwrap_or_default();
        }
        if self.waiting.is_empty() {
            return false;
        }
        match to.write(&self.waiting) {
            Ok(n) => {
                self.waiting.drain(..n);
                n > 0
            }
            Err(error) if error.kind() == ErrorKind::WouldBlock => false,
            Err(error) => panic!("the cable: {error}"),
        }
    }
}

/// What is there to read, if anything; an end that nobody holds (EIO) gives nothing.
fn read(from: &mut &File) -> Option<Vec<u8>> {
    let mut buffer = vec![0; 4096];
    match from.read(&mut buffer) {
        Ok(0) => None,
        Ok(n) => {
            buffer.truncate(n);
            Some(buffer)
        }
        Err(error) if error.kind() == ErrorKind::WouldBlock || error.raw_os_error() == Some(5) => None,
        Err(error) => panic!("the cable: {error}"),
    }
}

#[test]
fn a_pulled_cable_leaves_a_gap_not_a_lie() {
    let stage = Stage::new();
    let rig = stage.play("far");
    std::fs::create_dir(stage.path("ports")).unwrap();
    let cables = DEVICES.map(|name| Cable::from(&stage.path("far/ports").join(name), stage.path("ports").join(name)));
    let mut daemon = stage.start_daemon();
    daemon.wait_for("trial", "opens");
    std::thread::sleep(Duration::from_millis(500));
    cables[0].pull();
    daemon.wait_for("alarm", "winch-node: link lost");
    std::thread::sleep(Duration::from_millis(400));
    cables[0].plug_in();
    daemon.wait_for("link", "is open");
    daemon.wait_for("trial", "closes");
    daemon.wait_for("seal", "is sealed");
    assert_eq!(daemon.stop(), Some(0));
    let truth = stage.truth(rig, "far");
    let trial = stage.trial();
    let winch = truth.holes("winch-node", &trial.blocks("winch-node").unwrap());
    assert_eq!(winch.len(), 1, "one hole where the cable was out: {winch:?}");
    let missing: u64 = trial.device("winch-node").unwrap().gaps.iter().map(|gap| gap.n_missing).sum();
    assert_eq!(missing, winch[0].1, "the file says how much is missing");
    assert!(missing >= 4000, "400 ms at 10 kHz: {missing}");
    assert_eq!(truth.holes("shuttle-node", &trial.blocks("shuttle-node").unwrap()), [], "the other cable held");
}
