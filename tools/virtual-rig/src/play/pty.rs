//! Plays a performance on ptys in real time. The reader finds each device at `DIR/ports/<name>` and cannot tell it from
//! a serial port.
//!
//! - Raw mode is set before the first byte, and one slave stays open here, so that no reader's coming or going hangs it up.
//! - A full pty is waited for: blocks come late rather than never. A block is logged once its last byte was taken.
//! - The scenario's time zero is half a second after the last device was started.
//! - It ends some seconds after the timeline's end (at once when every device was told to stop by then), or on SIGTERM
//!   or SIGINT, and waits a while for readers to empty the ptys before it closes them.

use crate::device::{BlockTruth, DEVICES, Device, Outgoing, Request};
use crate::performance::Performance;
use crate::physics::trajectory::Row;
use crate::truth::{Played, Truth};
use firmware_protocol::EncodeError;
use rustix::event::{PollFd, PollFlags, Timespec, poll};
use rustix::fd::{AsFd, OwnedFd};
use rustix::fs::{Mode, OFlags};
use rustix::io::Errno;
use rustix::pty::OpenptFlags;
use rustix::termios::OptionalActions;
use std::os::unix::fs::symlink;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::Duration;

const SCENARIO_AFTER_START_NS: i64 = 500_000_000;
const LINGER_NS: i64 = 5_000_000_000;
const DRAIN_LONGEST: Duration = Duration::from_secs(3);
const POLL_LONGEST_NS: i64 = 50_000_000;
const READ_LEN: usize = 1024;

#[derive(Debug, thiserror::Error)]
#[non_exhaustive]
pub enum PlayError {
    #[error("cannot {doing}: {source}")]
    System { doing: String, source: std::io::Error },
    #[error("a frame could not be made: {0}")]
    Frame(#[from] EncodeError),
    #[error("no host started every device within {waited_s} s; open the ports in {ports} and send a start to each")]
    NobodyCame { waited_s: f64, ports: String },
}

fn system<E: Into<std::io::Error>>(doing: impl Into<String>) -> impl FnOnce(E) -> PlayError {
    let doing = doing.into();
    move |source| PlayError::System { doing, source: source.into() }
}

/// How long to wait, and for whom.
#[derive(Debug, Clone)]
pub struct PtySettings {
    /// `ports/` and `truth.json` appear here.
    pub dir: PathBuf,
    /// Give up when not every device was started by then.
    pub wait_for_start: Duration,
    /// Becomes true when the rig shall end.
    pub stop: Arc<AtomicBool>,
}

/// Host's CLOCK_MONOTONIC, ns.
pub fn monotonic_ns() -> i64 {
    let now = rustix::time::clock_gettime(rustix::time::ClockId::Monotonic);
    now.tv_sec * 1_000_000_000 + now.tv_nsec
}

/// One device on its pty.
struct Port {
    device: Device,
    master: OwnedFd,
    slave: OwnedFd,
    link: PathBuf,
    waiting: Option<Waiting>,
    queue: Vec<Outgoing>,
    blocks: Vec<BlockTruth>,
    ever_started: bool,
}

/// A frame on its way into the pty.
struct Waiting {
    outgoing: Outgoing,
    n_taken: usize,
}

struct Stage<'a> {
    performance: &'a Performance,
    zero_ns: Option<i64>,
}

impl Stage<'_> {
    fn rig_at(&self, host_ns: f64) -> Row {
        let t_s = self.zero_ns.map_or(f64::MIN, |zero_ns| (host_ns - zero_ns as f64) * 1e-9);
        self.performance.trajectory.at(t_s)
    }

    fn end_ns(&self) -> i64 {
        self.zero_ns.map_or(i64::MAX, |zero_ns| zero_ns + (self.performance.end_s * 1e9) as i64)
    }
}

/// Plays to the end and returns the truth, which is also in `DIR/truth.json`.
///
/// # Errors
/// When ptys or files cannot be made, or nobody starts the devices.
pub fn play(performance: &Performance, settings: &PtySettings) -> Result<Truth, PlayError> {
    let ports_dir = settings.dir.join("ports");
    std::fs::create_dir_all(&ports_dir).map_err(system(format!("make {}", ports_dir.display())))?;
    let boot_ns = monotonic_ns();
    let mut ports = Vec::new();
    for idx in 0..DEVICES.len() {
        ports.push(Port::open(Device::boot(idx as u8, performance, boot_ns), &ports_dir)?);
    }
    let mut stage = Stage { performance, zero_ns: None };
    while !over(&stage, &ports, settings) {
        turn(&mut ports, &mut stage)?;
        let waited = Duration::from_nanos((monotonic_ns() - boot_ns).unsigned_abs());
        if stage.zero_ns.is_none() && waited > settings.wait_for_start {
            let (waited_s, ports) = (waited.as_secs_f64(), ports_dir.display().to_string());
            return Err(PlayError::NobodyCame { waited_s, ports });
        }
    }
    close(&mut ports);
    let played: Vec<Played> = ports.iter().map(|port| Played { device: &port.device, blocks: &port.blocks }).collect();
    let zero_ns = stage.zero_ns.unwrap_or_else(monotonic_ns);
    let truth = Truth::of(performance, "CLOCK_MONOTONIC", zero_ns, &played);
    write_truth(&truth, &settings.dir)?;
    Ok(truth)
}

/// Writes `truth.json` under a temporary name and renames it.
///
/// # Errors
/// When the directory cannot be written.
pub fn write_truth(truth: &Truth, dir: &Path) -> Result<(), PlayError> {
    let (path, temporary) = (dir.join("truth.json"), dir.join("truth.json.part"));
    let text = serde_json::to_string_pretty(truth).map_err(system("write the truth as JSON"))?;
    std::fs::write(&temporary, text).map_err(system(format!("write {}", temporary.display())))?;
    std::fs::rename(&temporary, &path).map_err(system(format!("rename to {}", path.display())))
}

fn over(stage: &Stage, ports: &[Port], settings: &PtySettings) -> bool {
    let now_ns = monotonic_ns();
    settings.stop.load(Ordering::Relaxed)
        || now_ns > stage.end_ns().saturating_add(LINGER_NS)
        || (now_ns > stage.end_ns() && ports.iter().all(|port| !port.device.running()))
}

/// Serves every port once, then sleeps until something is due.
fn turn(ports: &mut [Port], stage: &mut Stage) -> Result<(), PlayError> {
    for port in ports.iter_mut() {
        port.read_requests()?;
        port.write(stage)?;
    }
    if stage.zero_ns.is_none() && ports.iter().all(|port| port.ever_started) {
        stage.zero_ns = Some(monotonic_ns() + SCENARIO_AFTER_START_NS);
    }
    let due_ns = ports.iter().filter_map(|port| port.due_ns()).min().unwrap_or(i64::MAX);
    let wait_ns = due_ns.saturating_sub(monotonic_ns()).clamp(0, POLL_LONGEST_NS);
    let mut fds: Vec<PollFd> = ports.iter().map(Port::poll_fd).collect();
    match poll(&mut fds, Some(&Timespec { tv_sec: 0, tv_nsec: wait_ns })) {
        Ok(_) | Err(Errno::INTR) => Ok(()),
        Err(errno) => Err(system("wait for the ports")(errno)),
    }
}

/// Waits until the readers have what is in the ptys, and removes the links.
fn close(ports: &mut [Port]) {
    let started = std::time::Instant::now();
    let mut n_empty = 0;
    while n_empty < 3 && started.elapsed() < DRAIN_LONGEST {
        let unread = ports.iter().any(|port| rustix::io::ioctl_fionread(&port.slave).is_ok_and(|n_bytes| n_bytes > 0));
        n_empty = if unread { 0 } else { n_empty + 1 };
        std::thread::sleep(Duration::from_millis(20));
    }
    for port in ports {
        // A link that is gone already is as good as removed.
        let _ = std::fs::remove_file(&port.link);
    }
}

impl Port {
    fn open(device: Device, ports_dir: &Path) -> Result<Self, PlayError> {
        let name = device.spec.name;
        let flags = OpenptFlags::RDWR | OpenptFlags::NOCTTY;
        let master = rustix::pty::openpt(flags).map_err(system(format!("open a pty for {name}")))?;
        rustix::pty::grantpt(&master).map_err(system("grant the pty"))?;
        rustix::pty::unlockpt(&master).map_err(system("unlock the pty"))?;
        let mut settings = rustix::termios::tcgetattr(&master).map_err(system("read the pty's settings"))?;
        settings.make_raw();
        rustix::termios::tcsetattr(&master, OptionalActions::Now, &settings).map_err(system("make the pty raw"))?;
        rustix::io::ioctl_fionbio(&master, true).map_err(system("make the pty non-blocking"))?;
        let slave_name = rustix::pty::ptsname(&master, Vec::new()).map_err(system("name the pty"))?;
        let slave = rustix::fs::open(&slave_name, OFlags::RDWR | OFlags::NOCTTY, Mode::empty())
            .map_err(system("open the pty's other end"))?;
        let link = ports_dir.join(name);
        if link.symlink_metadata().is_ok() {
            std::fs::remove_file(&link).map_err(system(format!("remove the old {}", link.display())))?;
        }
        let target = slave_name.to_string_lossy().into_owned();
        symlink(&target, &link).map_err(system(format!("link {} to {target}", link.display())))?;
        Ok(Self {
            device,
            master,
            slave,
            link,
            waiting: None,
            queue: Vec::new(),
            blocks: Vec::new(),
            ever_started: false,
        })
    }

    fn poll_fd(&self) -> PollFd<'_> {
        let writing = if self.waiting.is_some() { PollFlags::OUT } else { PollFlags::empty() };
        PollFd::from_borrowed_fd(self.master.as_fd(), PollFlags::IN | writing)
    }

    /// When this port has something to do of itself; a full pty is waited for by poll.
    fn due_ns(&self) -> Option<i64> {
        if self.waiting.is_some() { None } else { self.device.block_due_ns() }
    }

    fn read_requests(&mut self) -> Result<(), PlayError> {
        let mut buffer = [0; READ_LEN];
        loop {
            let n_bytes = match rustix::io::read(&self.master, &mut buffer) {
                Ok(0) | Err(Errno::AGAIN | Errno::IO) => return Ok(()),
                Ok(n_bytes) => n_bytes,
                Err(Errno::INTR) => continue,
                Err(errno) => return Err(system("read from a pty")(errno)),
            };
            let received_ns = monotonic_ns();
            let mut requests = Vec::new();
            self.device.hear(&buffer[..n_bytes], |request| requests.push(request));
            for request in requests {
                self.answer(request, received_ns)?;
            }
        }
    }

    fn answer(&mut self, request: Request, received_ns: i64) -> Result<(), PlayError> {
        match request {
            Request::Describe => {
                let description = self.device.description()?;
                self.queue.push(description);
            }
            Request::Start => {
                self.device.start(received_ns);
                self.ever_started = true;
            }
            Request::Stop => self.device.stop(),
            Request::Time { token } => {
                let reply = self.device.time_reply(token, received_ns, monotonic_ns())?;
                self.queue.push(reply);
            }
        }
        Ok(())
    }

    /// Hands on what waits, then answers, then the blocks that are due, until the pty is full or all is said.
    fn write(&mut self, stage: &Stage) -> Result<(), PlayError> {
        loop {
            if self.waiting.is_none() {
                self.waiting = self.next_outgoing(stage)?.map(|outgoing| Waiting { outgoing, n_taken: 0 });
            }
            let Some(waiting) = &mut self.waiting else { return Ok(()) };
            match rustix::io::write(&self.master, &waiting.outgoing.bytes[waiting.n_taken..]) {
                Ok(n_bytes) => waiting.n_taken += n_bytes,
                Err(Errno::AGAIN) => return Ok(()),
                Err(Errno::INTR) => continue,
                Err(errno) => return Err(system("write to a pty")(errno)),
            }
            if waiting.n_taken == waiting.outgoing.bytes.len() {
                self.blocks.extend(waiting.outgoing.block);
                self.waiting = None;
            }
        }
    }

    fn next_outgoing(&mut self, stage: &Stage) -> Result<Option<Outgoing>, PlayError> {
        if !self.queue.is_empty() {
            return Ok(Some(self.queue.remove(0)));
        }
        let now_ns = monotonic_ns();
        if let Some(status) = self.device.status_if_due(now_ns)? {
            return Ok(Some(status));
        }
        if self.device.block_due_ns().is_none_or(|due_ns| due_ns > now_ns) {
            return Ok(None);
        }
        let epoch_ns = self.device.clock.epoch_host_ns as f64;
        Ok(Some(self.device.block(now_ns, |since_epoch_ns| stage.rig_at(epoch_ns + since_epoch_ns))?))
    }
}
