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

use super::port::{self, OpenPort, ReadMeans};
use super::sinks::Outlet;
use super::{DeviceIdx, HostClock, LinkWhat};

/// A port to be read.
#[derive(Debug, Clone, PartialEq, Eq)]
pub struct PortSpec {
    pub device: DeviceIdx,
    pub path: PathBuf,
    pub baud: u32,
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
const BACKOFF_FIRST: Duration = Duration::from_millis(100);
const BACKOFF_LAST: Duration = Duration::from_secs(2);
/// How long the last bytes are waited for when the program stops.
const LAST_READS: Duration = Duration::from_millis(50);

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
            match port::open(&self.spec.path, self.spec.baud) {
                Ok(open) => {
                    (told, backoff) = (None, BACKOFF_FIRST);
                    let reason = self.serve(open, &mut buffer).await; // the dead port is closed on return
                    self.send(LinkWhat::Down { reason });
                }
                Err(error) => {
                    if told.as_ref() != Some(&error) {
                        self.send(LinkWhat::Down { reason: error.to_string() });
                    }
                    told = Some(error);
                }
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
        let OpenPort { mut stream, baud, warnings } = open;
        self.send(LinkWhat::Up { path: self.spec.path.display().to_string(), baud });
        for warning in warnings {
            tracing::warn!(port = %self.spec.path.display(), "{warning}");
        }
        self.ask_to_start(&mut stream);
        let opened = Instant::now();
        let mut starts = FIRST_STARTS.iter().map(|&after| opened + after);
        let mut start_at = starts.next().unwrap_or(opened + START_EVERY);
        let mut ask_at = opened + ASK_EVERY;
        loop {
            tokio::select! {
                biased;
                read = stream.read(buffer) => {
                    let host_ns = self.clock.monotonic_ns();
                    match port::meaning(&read) {
                        ReadMeans::Bytes(n) => {
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
                    tokio::time::sleep(LAST_READS).await;
                    self.drain(&mut stream, buffer);
                    return "the daemon stops".to_owned();
                }
                () = sleep_until(ask_at) => {
                    self.ask_time(&mut stream);
                    ask_at = Instant::now() + ASK_EVERY - Duration::from_nanos(DITHER_NS / 2) + self.dither();
                }
                () = sleep_until(start_at) => {
                    self.ask_to_start(&mut stream);
                    start_at = starts.next().unwrap_or_else(|| Instant::now() + START_EVERY);
                }
            }
        }
    }

    /// Takes what is still readable, without waiting.
    fn drain(&mut self, stream: &mut SerialStream, buffer: &mut [u8]) {
        while let ReadMeans::Bytes(n) = port::meaning(&stream.try_read(buffer)) {
            self.send(LinkWhat::Bytes(Bytes::copy_from_slice(&buffer[..n])));
        }
    }

    fn ask_to_start(&mut self, stream: &mut SerialStream) {
        for message in [Message::DescribeRequest, Message::Start] {
            if let Err(error) = write(stream, &message) {
                tracing::debug!(port = %self.spec.path.display(), "request not written: {error}");
            }
        }
    }

    fn ask_time(&mut self, stream: &mut SerialStream) {
        let token = self.draw() as u32;
        let host_ns = self.clock.monotonic_ns();
        if write(stream, &Message::TimeRequest(TimeRequest { token })).is_ok() {
            self.outlet.send(host_ns, LinkWhat::TimeRequested { token });
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

/// Writes one request whole or says why not; a device whose queue is full does without.
fn write(stream: &mut SerialStream, message: &Message<'_>) -> io::Result<()> {
    let mut frame = [0_u8; MAX_FRAME_LEN];
    let n = encode(&Header::default(), message, &mut frame).map_err(io::Error::other)?;
    match stream.try_write(&frame[..n])? {
        written if written == n => Ok(()),
        _ => Err(io::ErrorKind::WriteZero.into()),
    }
}
