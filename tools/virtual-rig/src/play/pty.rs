//! Plays a performance on ptys in real time. The reader finds each device at `DIR/ports/<name>` and cannot tell it from
//! a serial port.
//!
//! - Raw mode is set before the first byte, and one slave stays open here, so that no reader's coming or going hangs it up.
//! - A full pty is waited for: blocks come late rather than never. A block is logged once its last byte was taken.
//! - The scenario's time zero is half a second after the last device was started.
//! - It ends some seconds after the timeline's end (at once when every device was told to stop by then), or on SIGTERM
//!   or SIGINT, and waits a while for readers to empty the ptys before it closes them.

use super::port::Port;
use crate::performance::Performance;
use crate::truth::{Played, Truth};
use firmware_protocol::EncodeError;
use rustix::event::{PollFd, Timespec, poll};
use rustix::io::Errno;
use std::path::{Path, PathBuf};
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::Duration;

const SCENARIO_AFTER_START_NS: i64 = 500_000_000;
const LINGER_NS: i64 = 5_000_000_000;
const DRAIN_LONGEST: Duration = Duration::from_secs(3);
const POLL_LONGEST_NS: i64 = 50_000_000;

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

pub(super) fn system<E: Into<std::io::Error>>(doing: impl Into<String>) -> impl FnOnce(E) -> PlayError {
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

/// Plays to the end and returns the truth, which is also in `DIR/truth.json`.
///
/// # Errors
/// When ptys or files cannot be made, or nobody starts the devices.
pub fn play(performance: &Performance, settings: &PtySettings) -> Result<Truth, PlayError> {
    let ports_dir = settings.dir.join("ports");
    std::fs::create_dir_all(&ports_dir).map_err(system(format!("make {}", ports_dir.display())))?;
    let boot_ns = monotonic_ns();
    let mut ports = Vec::new();
    for idx in 0..performance.devices.len() {
        ports.push(Port::open(idx as u8, performance, boot_ns, &ports_dir)?);
    }
    let mut zero_ns = None;
    while !over(zero_ns, performance, &ports, settings) {
        turn(&mut ports, performance)?;
        if zero_ns.is_none() && ports.iter().all(Port::ever_started) {
            let from_now_ns = monotonic_ns() + SCENARIO_AFTER_START_NS;
            ports.iter_mut().for_each(|port| port.set_scenario_zero(from_now_ns));
            zero_ns = Some(from_now_ns);
        }
        let waited = Duration::from_nanos((monotonic_ns() - boot_ns).unsigned_abs());
        if zero_ns.is_none() && waited > settings.wait_for_start {
            let (waited_s, ports) = (waited.as_secs_f64(), ports_dir.display().to_string());
            return Err(PlayError::NobodyCame { waited_s, ports });
        }
    }
    close(&ports);
    let played: Vec<Played> = ports.iter().map(Port::played).collect();
    let truth = Truth::of(performance, "CLOCK_MONOTONIC", zero_ns.unwrap_or_else(monotonic_ns), &played);
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

fn over(zero_ns: Option<i64>, performance: &Performance, ports: &[Port], settings: &PtySettings) -> bool {
    if settings.stop.load(Ordering::Relaxed) {
        return true;
    }
    let Some(zero_ns) = zero_ns else { return false };
    let after_end_ns = monotonic_ns() - zero_ns - (performance.end_s * 1e9) as i64;
    after_end_ns > LINGER_NS || (after_end_ns > 0 && ports.iter().all(|port| !port.running()))
}

/// Serves every port once, then sleeps until something is due.
fn turn(ports: &mut [Port], performance: &Performance) -> Result<(), PlayError> {
    for port in ports.iter_mut() {
        port.read_requests(performance)?;
        port.write(performance)?;
    }
    let due_ns = ports.iter().filter_map(|port| port.due_ns()).min().unwrap_or(i64::MAX);
    let wait_ns = due_ns.saturating_sub(monotonic_ns()).clamp(0, POLL_LONGEST_NS);
    let mut fds: Vec<PollFd> = ports.iter().filter_map(Port::poll_fd).collect();
    match poll(&mut fds, Some(&Timespec { tv_sec: 0, tv_nsec: wait_ns })) {
        Ok(_) | Err(Errno::INTR) => Ok(()),
        Err(errno) => Err(system("wait for the ports")(errno)),
    }
}

/// Waits until the readers have what is in the ptys; the links go with the ports.
fn close(ports: &[Port]) {
    let started = std::time::Instant::now();
    let mut n_empty = 0;
    while n_empty < 3 && started.elapsed() < DRAIN_LONGEST {
        n_empty = if ports.iter().any(Port::has_unread) { 0 } else { n_empty + 1 };
        std::thread::sleep(Duration::from_millis(20));
    }
}
