//! `tautrail metrics`: a running daemon's state for a monitoring system, by scraping.

use std::io;
use std::net::{Ipv4Addr, SocketAddr};
use std::sync::atomic::{AtomicBool, Ordering};
use std::sync::{Arc, Mutex, PoisonError};
use std::thread;
use std::time::{Duration, Instant};

use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};
use tautrail::feed::FeedClient;
use tautrail::feed::message::{Hello, Message};
use tautrail::feed::metrics;
use tautrail::live::Snapshot;
use thiserror::Error;

use super::feed_place::FeedPlace;
use super::screen::Screen;
use super::{Failure, Verdict};

const LISTEN: Duration = Duration::from_millis(100);
const RECONNECT_EVERY: Duration = Duration::from_secs(1);
const PORT: u16 = 9464;

/// Serve a running daemon's state as metrics in the Prometheus text format, at /metrics
///
/// A client of the feed in a process of its own: nothing it does reaches the recording. Only this computer can ask, unless
/// another address is named.
#[derive(Debug, clap::Args)]
#[command(after_help = METRICS_HELP)]
pub struct Args {
    #[command(flatten)]
    place: FeedPlace,
    /// Address and port to answer at
    #[arg(long, value_name = "ADDRESS:PORT", default_value_t = SocketAddr::from((Ipv4Addr::LOCALHOST, PORT)))]
    listen: SocketAddr,
}

const METRICS_HELP: &str = "\
Examples:
  tautrail metrics --dir trials                       then: curl http://127.0.0.1:9464/metrics
  tautrail metrics --dir trials --listen 0.0.0.0:9464   for other computers: anybody who reaches the port can read

Numbers older than a second are left out; tautrail_up is 0 while the daemon is away, and it is looked for every second.

Tautrail is no safety device: it advises and records. Interlocks, exclusion zones, local codes and licensed practice
decide.";

#[derive(Debug, Error)]
#[error("{address} can't be listened at: {source}; is another program there, or may this user not?")]
struct CannotListen {
    address: SocketAddr,
    source: io::Error,
}

/// What the feed told last.
#[derive(Debug)]
struct Told {
    hello: Hello,
    snapshot: Option<(Box<Snapshot>, Instant)>,
}

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    let socket = args.place.socket();
    let mut client = FeedClient::connect(&socket)?;
    let listener = metrics::listen(args.listen).map_err(|source| CannotListen { address: args.listen, source })?;
    let stop = Arc::new(AtomicBool::new(false));
    for signal in [SIGTERM, SIGHUP, SIGINT] {
        signal_hook::flag::register(signal, stop.clone())?;
    }
    screen.line(format!("metrics of {} at http://{}/metrics", client.hello().rig, listener.local_addr()?));
    let told = Arc::new(Mutex::new(Told { hello: client.hello().clone(), snapshot: None }));
    let (hearing, quit) = (told.clone(), stop.clone());
    let listening = thread::Builder::new().name("feed".into()).spawn(move || {
        while !quit.load(Ordering::Relaxed) {
            match client.next(LISTEN) {
                Ok(message) => hear(&hearing, message),
                Err(_) => {
                    thread::sleep(RECONNECT_EVERY);
                    if let Ok(again) = FeedClient::connect(&socket) {
                        hear(&hearing, Some(Message::Hello(again.hello().clone())));
                        client = again;
                    }
                }
            }
        }
    })?;
    while !stop.load(Ordering::Relaxed) {
        match listener.accept() {
            Ok((stream, _)) => {
                stream.set_nonblocking(false)?;
                // A scraper that went away is its own affair.
                let _ = metrics::answer(stream, || page(&told));
            }
            Err(error) if error.kind() == io::ErrorKind::WouldBlock => thread::sleep(LISTEN / 4),
            Err(error) if error.kind() == io::ErrorKind::Interrupted => {}
            Err(error) => return Err(error.into()),
        }
    }
    listening.join().map_err(|_| "the thread that follows the feed failed")?;
    Ok(Verdict::Done)
}

fn hear(told: &Mutex<Told>, message: Option<Message>) {
    let mut told = told.lock().unwrap_or_else(PoisonError::into_inner);
    match message {
        Some(Message::Hello(hello)) => told.hello = hello,
        Some(Message::Snapshot(snapshot)) => told.snapshot = Some((snapshot, Instant::now())),
        _ => {}
    }
}

fn page(told: &Mutex<Told>) -> String {
    let told = told.lock().unwrap_or_else(PoisonError::into_inner);
    let snapshot = told.snapshot.as_ref().map(|(snapshot, at)| (&**snapshot, at.elapsed().as_secs_f64()));
    metrics::exposition(&told.hello, snapshot)
}
