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
    let mut buffer = [0; 4096];
    while !end.load(Ordering::Relaxed) {
        let plugged = plug.lock().unwrap();
        let moved = pass(far, plugged.as_ref(), &mut buffer)
            | plugged.as_ref().is_some_and(|near| pass(near, Some(far), &mut buffer));
        drop(plugged);
        if !moved {
            std::thread::sleep(Duration::from_millis(1));
        }
    }
}

fn pass(mut from: &File, to: Option<&File>, buffer: &mut [u8]) -> bool {
    let n = match from.read(buffer) {
        Ok(n) => n,
        Err(error) if matches!(error.kind(), ErrorKind::WouldBlock) || error.raw_os_error() == Some(5) => return false,
        Err(error) => panic!("the cable: {error}"),
    };
    if let Some(mut to) = to {
        // What finds nobody reading and the queue full is gone, as with a real port.
        match to.write(&buffer[..n]) {
            Ok(_) => {}
            Err(error) if error.kind() == ErrorKind::WouldBlock => {}
            Err(error) => panic!("the cable: {error}"),
        }
    }
    n > 0
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
