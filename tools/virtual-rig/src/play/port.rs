//! One device on its pty: requests in, bytes out, cable in or out.

use super::pty::{PlayError, monotonic_ns, system};
use crate::device::{BlockTruth, Device, Outgoing};
use crate::line::{Change, ChangeKind, Line, PACKET_LEN};
use crate::performance::Performance;
use crate::truth::Played;
use rustix::event::{PollFd, PollFlags};
use rustix::fd::{AsFd, OwnedFd};
use rustix::fs::{Mode, OFlags};
use rustix::io::Errno;
use rustix::pty::OpenptFlags;
use rustix::termios::OptionalActions;
use std::collections::VecDeque;
use std::os::unix::fs::symlink;
use std::path::{Path, PathBuf};

const READ_LEN: usize = 1024;

/// A pty in raw mode with a link to its slave. Dropped, it hangs up and the link goes.
#[derive(Debug)]
struct Pty {
    master: OwnedFd,
    /// Held open so that no reader's coming or going hangs the port up.
    slave: OwnedFd,
    link: PathBuf,
}

impl Drop for Pty {
    fn drop(&mut self) {
        // A link that is gone already is as good as removed.
        let _ = std::fs::remove_file(&self.link);
    }
}

impl Pty {
    fn open(link: &Path) -> Result<Self, PlayError> {
        // Inherited by a child of the test's, an end would stay open when the cable is pulled.
        let flags = OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC;
        let master = rustix::pty::openpt(flags).map_err(system(format!("open a pty for {}", link.display())))?;
        rustix::pty::grantpt(&master).map_err(system("grant the pty"))?;
        rustix::pty::unlockpt(&master).map_err(system("unlock the pty"))?;
        let mut settings = rustix::termios::tcgetattr(&master).map_err(system("read the pty's settings"))?;
        settings.make_raw();
        rustix::termios::tcsetattr(&master, OptionalActions::Now, &settings).map_err(system("make the pty raw"))?;
        rustix::io::ioctl_fionbio(&master, true).map_err(system("make the pty non-blocking"))?;
        let slave_name = rustix::pty::ptsname(&master, Vec::new()).map_err(system("name the pty"))?;
        let slave = rustix::fs::open(&slave_name, OFlags::RDWR | OFlags::NOCTTY | OFlags::CLOEXEC, Mode::empty())
            .map_err(system("open the pty's other end"))?;
        if link.symlink_metadata().is_ok() {
            std::fs::remove_file(link).map_err(system(format!("remove the old {}", link.display())))?;
        }
        let target = slave_name.to_string_lossy().into_owned();
        symlink(&target, link).map_err(system(format!("link {} to {target}", link.display())))?;
        Ok(Self { master, slave, link: link.to_path_buf() })
    }
}

/// A block whose last byte stands at `end` of all bytes put out.
#[derive(Debug)]
struct Mark {
    end: u64,
    block: BlockTruth,
    touched: bool,
}

/// One device on its pty.
#[derive(Debug)]
pub struct Port {
    device: Device,
    line: Line,
    changes: VecDeque<Change>,
    link: PathBuf,
    /// `None` while the cable is out.
    pty: Option<Pty>,
    answers: VecDeque<Outgoing>,
    /// Bytes that the pty has not taken yet.
    out: Vec<u8>,
    n_put: u64,
    /// When the last, partly filled USB packet goes all the same.
    packet_due_ns: Option<i64>,
    marks: VecDeque<Mark>,
    blocks: Vec<BlockTruth>,
    touched: Vec<u32>,
    taken_ns: Vec<i64>,
    ever_started: bool,
}

impl Port {
    /// Device `idx`, booted at `boot_ns`, at `ports_dir/<name>`.
    ///
    /// # Errors
    /// When no pty can be had or linked to.
    pub fn open(idx: u8, performance: &Performance, boot_ns: i64, ports_dir: &Path) -> Result<Self, PlayError> {
        let device = Device::boot(idx, performance, boot_ns);
        let line = Line::new(&device.faults, performance.options.seed, idx);
        let link = ports_dir.join(device.spec.name);
        Ok(Self {
            pty: Some(Pty::open(&link)?),
            changes: line.changes().into(),
            device,
            line,
            link,
            answers: VecDeque::new(),
            out: Vec::new(),
            n_put: 0,
            packet_due_ns: None,
            marks: VecDeque::new(),
            blocks: Vec::new(),
            touched: Vec::new(),
            taken_ns: Vec::new(),
            ever_started: false,
        })
    }

    pub fn played(&self) -> Played<'_> {
        Played { device: &self.device, blocks: &self.blocks, touched: &self.touched, taken_ns: &self.taken_ns }
    }

    pub fn ever_started(&self) -> bool {
        self.ever_started
    }

    pub fn running(&self) -> bool {
        self.device.running()
    }

    pub fn set_scenario_zero(&mut self, host_ns: i64) {
        self.device.set_scenario_zero(host_ns);
    }

    /// Whether a reader has still to take bytes out of the pty.
    pub fn has_unread(&self) -> bool {
        let unread = |pty: &Pty| rustix::io::ioctl_fionread(&pty.slave).is_ok_and(|n_bytes| n_bytes > 0);
        self.pty.as_ref().is_some_and(unread)
    }

    pub fn poll_fd(&self) -> Option<PollFd<'_>> {
        let pty = self.pty.as_ref()?;
        let writing = if self.n_ready(monotonic_ns()) > 0 { PollFlags::OUT } else { PollFlags::empty() };
        Some(PollFd::from_borrowed_fd(pty.master.as_fd(), PollFlags::IN | writing))
    }

    /// When this port has something to do of itself; a full pty is waited for by poll.
    pub fn due_ns(&self) -> Option<i64> {
        let device_ns = if self.out.len() < PACKET_LEN { self.device.due_ns() } else { None };
        [device_ns, self.packet_due_ns].into_iter().flatten().min()
    }

    /// # Errors
    /// When the pty cannot be read or an answer not be made.
    pub fn read_requests(&mut self, performance: &Performance) -> Result<(), PlayError> {
        let mut buffer = [0; READ_LEN];
        while let Some(pty) = &self.pty {
            let n_bytes = match rustix::io::read(&pty.master, &mut buffer) {
                Ok(0) | Err(Errno::AGAIN | Errno::IO) => return Ok(()),
                Ok(n_bytes) => n_bytes,
                Err(Errno::INTR) => continue,
                Err(errno) => return Err(system("read from a pty")(errno)),
            };
            let received_ns = monotonic_ns();
            let mut requests = Vec::new();
            self.device.hear(&buffer[..n_bytes], |request| requests.push(request));
            for request in requests {
                let answer =
                    self.device.answer(request, received_ns, monotonic_ns, |t_s| performance.trajectory.at(t_s))?;
                self.answers.extend(answer);
            }
            self.ever_started |= self.device.running();
        }
        Ok(())
    }

    /// Puts out what is due and hands it on until the pty is full or all is said.
    ///
    /// # Errors
    /// When the pty cannot be written or opened again, or a frame not be made.
    pub fn write(&mut self, performance: &Performance) -> Result<(), PlayError> {
        loop {
            let now_ns = monotonic_ns();
            self.apply_changes(now_ns)?;
            let said = if self.out.len() < PACKET_LEN { self.next_outgoing(performance, now_ns)? } else { None };
            let nothing_said = said.is_none();
            if let Some(outgoing) = said {
                self.put(outgoing, now_ns);
            }
            let n_ready = self.n_ready(now_ns);
            if n_ready == 0 {
                if nothing_said {
                    return Ok(());
                }
                continue;
            }
            let Some(pty) = &self.pty else { return Ok(()) };
            match rustix::io::write(&pty.master, &self.out[..n_ready]) {
                Ok(n_bytes) => self.taken(n_bytes),
                Err(Errno::AGAIN) => return Ok(()),
                Err(Errno::INTR) => {}
                Err(errno) => return Err(system("write to a pty")(errno)),
            }
        }
    }

    fn next_outgoing(&mut self, performance: &Performance, now_ns: i64) -> Result<Option<Outgoing>, PlayError> {
        if let Some(answer) = self.answers.pop_front() {
            return Ok(Some(answer));
        }
        Ok(self.device.next(now_ns, |t_s| performance.trajectory.at(t_s))?)
    }

    /// Sends a frame into the line. With the cable out it is lost, as the device's own port would lose it.
    fn put(&mut self, outgoing: Outgoing, now_ns: i64) {
        if self.pty.is_none() {
            return;
        }
        let t_s = self.device.scenario_s(now_ns as f64);
        let before = self.out.len();
        self.out.extend(self.line.noise(t_s));
        let passed = self.line.pass(t_s, &outgoing.bytes);
        self.out.extend_from_slice(&passed.bytes);
        self.n_put += (self.out.len() - before) as u64;
        if let Some(block) = outgoing.block {
            self.marks.push_back(Mark { end: self.n_put, block, touched: passed.touched });
        }
        if let (Some(timer_s), None) = (self.line.packet_timer_s(), self.packet_due_ns) {
            self.packet_due_ns = Some(now_ns + (timer_s * 1e9) as i64);
        }
    }

    /// Bytes that may go now.
    fn n_ready(&self, now_ns: i64) -> usize {
        if self.line.stalled_until_s(self.device.scenario_s(now_ns as f64)).is_some() {
            return 0;
        }
        let waits = self.packet_due_ns.is_some_and(|due_ns| now_ns < due_ns);
        if waits { self.out.len() / PACKET_LEN * PACKET_LEN } else { self.out.len() }
    }

    /// The pty took the first `n_bytes`; blocks that are through are logged.
    fn taken(&mut self, n_bytes: usize) {
        self.out.drain(..n_bytes);
        let n_taken = self.n_put - self.out.len() as u64;
        while let Some(mark) = self.marks.pop_front_if(|mark| mark.end <= n_taken) {
            self.touched.extend(mark.touched.then_some(self.blocks.len() as u32));
            self.blocks.push(mark.block);
            self.taken_ns.push(monotonic_ns());
        }
        if self.out.is_empty() {
            self.packet_due_ns = None;
        }
    }

    fn apply_changes(&mut self, now_ns: i64) -> Result<(), PlayError> {
        let t_s = self.device.scenario_s(now_ns as f64);
        while let Some(change) = self.changes.pop_front_if(|change| change.t_s <= t_s) {
            match change.what {
                ChangeKind::CableOut => {
                    self.pty = None;
                    self.out.clear();
                    self.marks.clear();
                    self.answers.clear();
                    self.packet_due_ns = None;
                }
                ChangeKind::CableIn => self.pty = Some(Pty::open(&self.link)?),
                ChangeKind::PowerOff => self.device.power_off(),
                ChangeKind::Boot => self.device.reboot(now_ns)?,
                ChangeKind::NewDescription => self.device.change_description()?,
            }
        }
        Ok(())
    }
}
