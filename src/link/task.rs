//! One port's life: open, ask, read, and again after it was lost. Reads, stamps, hands on; computes nothing.

use std::io;
use std::path::PathBuf;
use std::sync::Arc;
use std::time::Duration;

use bytes::Bytes;
use firmware_protocol::{Header, MAX_FRAME_LEN, Message, TimeRequest, encode};
use tokio::io::AsyncReadExt;
use tokio::sync::watch;
use tokio::time::{Instant, sleep_until};
use tokio_serial::SerialStream;

use super::overruns::{self, Overruns};
use super::port::{self, OpenPort, ReadMeans};
use super::sinks::Outlet;
use super::{DeviceIdx, HostClock, LinkWhat, STOPPED};
use crate::rig::{Device, Protocol, SerialSettings};

/// A port to be read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct PortSpec {
    pub device: DeviceIdx,
    pub path: PathBuf,
    pub baud: u32,
    pub serial: SerialSettings,
    pub asks: Asks,
}

/// What a device is asked for.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum Asks {
    /// Its description, its data, its time: in frames.
    Frames,
    /// `start` once the port is open and while nothing comes; `poll` at every interval.
    Text { start: Option<Bytes>, poll: Option<(Bytes, Duration)> },
}

impl PortSpec {
    /// The port of device `idx` of a rig file, whose path is already resolved.
    pub fn of(idx: u16, device: &Device) -> Self {
        let bytes = |text: &String| Bytes::copy_from_slice(text.as_bytes());
        let asks = match &device.protocol {
            Protocol::Text(text) => Asks::Text {
                start: text.start.as_ref().map(bytes),
                poll: text.poll.as_ref().map(|poll| (bytes(poll), Duration::from_secs_f64(text.interval_s))),
            },
            _ => Asks::Frames,
        };
        let (path, baud, serial) = (PathBuf::from(&device.port), device.baud, device.serial);
        Self { device: DeviceIdx(idx), path, baud, serial, asks }
    }
}

/// Most that one read takes; a pty gives 4095 at a time, USB drivers up to 64 KiB.
const READ_BYTES: usize = 1 << 16;
/// Time between two time requests: ten a second, dithered by a fifth so that they do not beat with the blocks.
const ASK_EVERY: Duration = Duration::from_millis(100);
const DITHER_NS: u64 = 40_000_000;
/// A board that was reset, by the opening or by its supply, must be told again to start.
const START_EVERY: Duration = Duration::from_secs(1);
/// Boards boot for up to two seconds after the port was opened: ask more often at first.
const FIRST_STARTS: [Duration; 2] = [Duration::from_millis(100), Duration::from_millis(300)];
/// Longer than any daemon runs.
const NEVER: Duration = Duration::from_secs(10 * 365 * 24 * 3600);
const BACKOFF_FIRST: Duration = Duration::from_millis(100);
const BACKOFF_LAST: Duration = Duration::from_secs(2);
/// How long the last bytes are waited for when the program stops.
const LAST_READS: Duration = Duration::from_millis(50);
/// Most that is taken without waiting when a link ends: what the kernel can hold (4 KiB of line discipline and 64 KiB of
/// flip buffers: field experience, no published source), four times over. A port that gives more is not draining.
const DRAIN_BYTES: usize = 4 * (64 + 4) * 1024;
/// A port that was open for less than this was as good as lost: the waits before the next try go on growing.
const STEADY: Duration = Duration::from_secs(2);
const COUNT_EVERY: Duration = Duration::from_secs(1);
/// An instrument that is to be started is asked again when nothing came for this long.
const SILENT: Duration = Duration::from_secs(2);

pub(super) struct PortTask {
    pub spec: PortSpec,
    pub outlet: Outlet,
    pub clock: Arc<dyn HostClock>,
    pub stop: watch::Receiver<bool>,
    /// Where tokens and dither begin; differs between devices.
    pub seed: u64,
}

impl PortTask {
    /// Runs until stopped.
    pub async fn run(mut self) {
        let mut buffer = vec![0_u8; READ_BYTES];
        let mut backoff = BACKOFF_FIRST;
        let mut told = None;
        while !*self.stop.borrow() {
            match port::open(&self.spec.path, self.spec.baud, self.spec.serial) {
                Ok(open) => {
                    told = None;
                    let opened = Instant::now();
                    let reason = self.serve(open, &mut buffer).await; // the dead port is closed on return
                    if opened.elapsed() >= STEADY {
                        backoff = BACKOFF_FIRST;
                    }
                    self.send(LinkWhat::Down { reason });
                }
                Err(error) => {
                    if told.as_ref() != Some(&error) {
                        self.send(LinkWhat::Down { reason: error.to_string() });
                    }
                    told = Some(error);
                }
            }
            if *self.stop.borrow() {
                return;
            }
            self.wait(backoff).await;
            backoff = (backoff * 2).min(BACKOFF_LAST);
        }
    }

    fn send(&mut self, what: LinkWhat) {
        self.outlet.send(self.clock.monotonic_ns(), what);
    }

    async fn wait(&mut self, how_long: Duration) {
        let _ = tokio::time::timeout(how_long, self.stop.changed()).await; // stopped or waited: the caller looks
    }

    /// Serves the open port until it is lost or the program stops; says why it ended.
    async fn serve(&mut self, open: OpenPort, buffer: &mut [u8]) -> String {
        let OpenPort { mut stream, baud, notes } = open;
        self.send(LinkWhat::Up { path: self.spec.path.display().to_string(), baud });
        notes.into_iter().for_each(|text| self.send(LinkWhat::Note { text }));
        let mut due = Due::from(Instant::now(), &self.spec.asks);
        let mut counted = overruns::read(&stream);
        self.ask_to_start(&mut stream);
        loop {
            // No branch may starve another: a port that never stops giving must not outlive an order to stop.
            tokio::select! {
                read = stream.read(buffer) => {
                    let host_ns = self.clock.monotonic_ns();
                    match port::meaning(&read) {
                        ReadMeans::Bytes(n) => {
                            due.heard = Instant::now();
                            self.outlet.send(host_ns, LinkWhat::Bytes(Bytes::copy_from_slice(&buffer[..n])));
                        }
                        ReadMeans::Again => {}
                        ReadMeans::LinkLost(reason) => {
                            self.drain(&mut stream, buffer);
                            return reason;
                        }
                    }
                }
                _ = self.stop.changed() => {
                    self.read_last(&mut stream, buffer).await;
                    return STOPPED.to_owned();
                }
                () = sleep_until(due.ask) => {
                    self.ask(&mut stream);
                    due.ask = self.next_ask(due.ask);
                }
                () = sleep_until(due.start) => {
                    if due.wants_start(&self.spec.asks) {
                        self.ask_to_start(&mut stream);
                    }
                    due.start = due.next_start(&self.spec.asks);
                }
                () = sleep_until(due.count) => {
                    counted = self.tell_overruns(&stream, counted);
                    due.count = Instant::now() + COUNT_EVERY;
                }
            }
        }
    }

    /// Takes what comes within [`LAST_READS`], and then what is still readable.
    async fn read_last(&mut self, stream: &mut SerialStream, buffer: &mut [u8]) {
        let until = Instant::now() + LAST_READS;
        while let Ok(read) = tokio::time::timeout_at(until, stream.read(buffer)).await {
            match port::meaning(&read) {
                ReadMeans::Bytes(n) => self.send(LinkWhat::Bytes(Bytes::copy_from_slice(&buffer[..n]))),
                ReadMeans::Again => {}
                ReadMeans::LinkLost(_) => break,
            }
            if Instant::now() >= until {
                break; // a timer is not looked at while the port gives at once
            }
        }
        self.drain(stream, buffer);
    }

    /// Takes what is still readable, without waiting, as far as [`DRAIN_BYTES`] go.
    fn drain(&mut self, stream: &mut SerialStream, buffer: &mut [u8]) {
        let mut n_drained = 0;
        while n_drained < DRAIN_BYTES
            && let ReadMeans::Bytes(n) = port::meaning(&stream.try_read(buffer))
        {
            self.send(LinkWhat::Bytes(Bytes::copy_from_slice(&buffer[..n])));
            n_drained += n;
        }
    }

    fn tell_overruns(&mut self, stream: &SerialStream, before: Option<Overruns>) -> Option<Overruns> {
        let now = overruns::read(stream);
        if let Some(text) = now.zip(before).and_then(|(now, before)| now.since(before)) {
            self.send(LinkWhat::Note { text });
        }
        now
    }

    fn ask_to_start(&mut self, stream: &mut SerialStream) {
        let written = match &self.spec.asks {
            Asks::Frames => [Message::DescribeRequest, Message::Start].iter().try_for_each(|ask| write(stream, ask)),
            Asks::Text { start: Some(start), .. } => write_all(stream, start),
            Asks::Text { start: None, .. } => Ok(()),
        };
        if let Err(error) = written {
            tracing::debug!(port = %self.spec.path.display(), "request not written: {error}");
        }
    }

    fn ask(&mut self, stream: &mut SerialStream) {
        match &self.spec.asks {
            Asks::Frames => self.ask_time(stream),
            Asks::Text { poll: Some((poll, _)), .. } => {
                if let Err(error) = write_all(stream, poll) {
                    tracing::debug!(port = %self.spec.path.display(), "poll not written: {error}");
                }
            }
            Asks::Text { poll: None, .. } => {}
        }
    }

    fn ask_time(&mut self, stream: &mut SerialStream) {
        let token = self.draw() as u32;
        let host_ns = self.clock.monotonic_ns();
        if write(stream, &Message::TimeRequest(TimeRequest { token })).is_ok() {
            self.outlet.send(host_ns, LinkWhat::TimeRequested { token });
        }
    }

    /// Time requests are dithered; polls keep their beat, and leave out those that were missed.
    fn next_ask(&mut self, last: Instant) -> Instant {
        let now = Instant::now();
        match &self.spec.asks {
            Asks::Frames => now + ASK_EVERY - Duration::from_nanos(DITHER_NS / 2) + self.dither(),
            Asks::Text { poll: Some((_, every)), .. } => (last + *every).max(now),
            Asks::Text { poll: None, .. } => now + NEVER,
        }
    }

    fn dither(&mut self) -> Duration {
        Duration::from_nanos(self.draw() % DITHER_NS)
    }

    /// SplitMix64 (Steele, Lea, Flood: Fast splittable pseudorandom number generators, 2014): even enough for dither.
    fn draw(&mut self) -> u64 {
        self.seed = self.seed.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let z = (self.seed ^ (self.seed >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        let z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }
}

/// When an open port has something to do of itself.
struct Due {
    ask: Instant,
    start: Instant,
    count: Instant,
    /// When bytes came last, or the port was opened.
    heard: Instant,
    first_starts: std::slice::Iter<'static, Duration>,
    opened: Instant,
}

impl Due {
    fn from(opened: Instant, asks: &Asks) -> Self {
        let ask = match asks {
            Asks::Frames => opened + ASK_EVERY,
            Asks::Text { poll: Some(_), .. } => opened,
            Asks::Text { poll: None, .. } => opened + NEVER,
        };
        let start = match asks {
            Asks::Frames => opened + FIRST_STARTS[0],
            Asks::Text { .. } => opened + SILENT,
        };
        Self { ask, start, count: opened, heard: opened, first_starts: FIRST_STARTS[1..].iter(), opened }
    }

    /// Text is asked only while nothing comes: its command may do more than start.
    fn wants_start(&self, asks: &Asks) -> bool {
        match asks {
            Asks::Frames => true,
            Asks::Text { .. } => self.heard.elapsed() >= SILENT,
        }
    }

    /// Frames ask on every second; text looks again once nothing can have come for [`SILENT`].
    fn next_start(&mut self, asks: &Asks) -> Instant {
        let now = Instant::now();
        match asks {
            Asks::Frames => self.first_starts.next().map_or(now + START_EVERY, |&after| self.opened + after),
            Asks::Text { start: Some(_), .. } => {
                let silent_at = self.heard + SILENT;
                if silent_at > now { silent_at } else { now + SILENT }
            }
            Asks::Text { start: None, .. } => now + NEVER,
        }
    }
}

/// Writes one request whole or says why not; a device whose queue is full does without.
fn write(stream: &mut SerialStream, message: &Message<'_>) -> io::Result<()> {
    let mut frame = [0_u8; MAX_FRAME_LEN];
    let n = encode(&Header::default(), message, &mut frame).map_err(io::Error::other)?;
    write_all(stream, &frame[..n])
}

fn write_all(stream: &mut SerialStream, bytes: &[u8]) -> io::Result<()> {
    match stream.try_write(bytes)? {
        written if written == bytes.len() => Ok(()),
        _ => Err(io::ErrorKind::WriteZero.into()),
    }
}
