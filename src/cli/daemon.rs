//! `tautrail daemon RIG`: records, tracks phases, has trials sealed, serves the feed.

use std::io::{Read, Write};
use std::os::unix::net::UnixStream;
use std::path::PathBuf;
use std::time::Duration;

use crossbeam_channel::{Receiver, bounded};
use serde_json::json;
use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};
use tautrail::daemon::{self, Options, ServiceManager};
use tautrail::feed::message::Event;
use tautrail::journal::Clocks;
use tautrail::rig;

use super::screen::Screen;
use super::{Failure, Verdict};

/// Record everything the rig's devices say, open and close trials by tension, have them sealed, serve the live feed
///
/// Stops in order on Ctrl-C or SIGTERM; nothing that the ports gave is lost. A trial under tension stays open: the next
/// start goes on with it.
#[derive(Debug, clap::Args)]
#[command(after_help = DAEMON_HELP)]
pub struct Args {
    /// The rig file (TOML)
    rig: PathBuf,
    /// The archive directory: trial files in it, journals in DIR/journal
    #[arg(long, value_name = "DIR", default_value = ".")]
    dir: PathBuf,
    /// Where to serve the feed, if not at DIR/feed.sock
    #[arg(long, value_name = "PATH")]
    socket: Option<PathBuf>,
    /// Start although a port is not there, and wait for it
    #[arg(long)]
    wait_for_ports: bool,
    /// For all journal segments together, in MiB; what unsealed trials need is kept beyond it
    #[arg(long, value_name = "MIB", default_value_t = 1024, value_parser = clap::value_parser!(u64).range(4..))]
    journal_budget: u64,
    /// Keep room on the disk for a hold of this many minutes; no trial is begun without it
    #[arg(long, value_name = "MIN", default_value_t = 60.0, value_parser = minutes)]
    longest_hold: f64,
    /// Keep the journal of every trial recorded now until `tautrail recover --release` lets it go, not only of abnormal ones
    #[arg(long)]
    keep_journal: bool,
    /// How long the end waits for sealing, in seconds
    #[arg(long, value_name = "S", default_value_t = 60)]
    seal_wait: u64,
}

const DAEMON_HELP: &str = "\
Examples:
  tautrail daemon north-pier.toml --dir trials    record; watch with: tautrail watch --dir trials
  tautrail daemon north-pier.toml --wait-for-ports

Each line says the time of day (UTC), the kind of event and what happened: what a board describes, its texts, reboots and
losses too, and why a link that is up gives no samples.

Under a service manager that asks for it (NOTIFY_SOCKET, WATCHDOG_USEC: systemd's Type=notify) it says when the feed is served and
the journal open, and gives signs of life; tools/service/tautrail.service uses both.

Exit code: 0 stopped with everything on the disk, 2 could not run (a port, the directory, the rig file, the disk).

Tautrail is no safety device: it advises and records. Interlocks, exclusion zones, local codes and licensed practice
decide.";

pub fn run(args: &Args, screen: &Screen) -> Result<Verdict, Failure> {
    log_to_stderr();
    let rig = rig::load(&args.rig)?;
    let options = Options {
        dir: args.dir.clone(),
        socket: args.socket.clone().unwrap_or_else(|| args.dir.join(tautrail::feed::SOCKET_NAME)),
        wait_for_ports: args.wait_for_ports,
        budget_bytes: args.journal_budget << 20,
        longest_hold: Duration::from_secs_f64(args.longest_hold * 60.0),
        keep_journal: args.keep_journal,
        seal_patience: Duration::from_secs(args.seal_wait),
        program: std::env::current_exe()?,
        service_manager: service_manager(),
    };
    let shutdown = shutdown_by_signal()?;
    let screen = *screen;
    daemon::run(&rig, &options, shutdown, Box::new(move |event| print(event, screen)))?;
    Ok(Verdict::Done)
}

/// What a service manager such as systemd put into the environment.
fn service_manager() -> ServiceManager {
    let text = |name: &str| std::env::var(name).ok();
    let (usec, pid) = (text("WATCHDOG_USEC"), text("WATCHDOG_PID"));
    ServiceManager::of(std::env::var_os("NOTIFY_SOCKET"), usec.as_deref(), pid.as_deref(), std::process::id())
}

fn minutes(text: &str) -> Result<f64, String> {
    match text.parse() {
        Ok(minutes) if (0.01..=10_000.0).contains(&minutes) => Ok(minutes),
        _ => Err("a number of minutes between 0.01 and 10000".to_owned()),
    }
}

/// One line an event; for programs, one JSON object a line.
fn print(event: &Event, screen: Screen) {
    if screen.json {
        screen.line(json!(event).to_string());
    } else {
        let who = event.person.as_deref().map(|person| format!(" ({person})")).unwrap_or_default();
        screen.line(format!("{} {:8} {}{who}", time_of_day(event.host_ns), event.kind, event.text));
    }
    // Where standard output is a closed pipe there is nobody to tell.
    let _ = std::io::stdout().flush();
}

/// "09:41:07.120Z" by this computer's clock; seconds since it started where that was never set.
fn time_of_day(host_ns: i64) -> String {
    let now = Clocks::read();
    let realtime_ns = i128::from(now.realtime_ns) - i128::from(now.monotonic_ns) + i128::from(host_ns);
    match jiff::Timestamp::from_nanosecond(realtime_ns) {
        Ok(at) if now.wall_clock_set => at.strftime("%H:%M:%S%.3fZ").to_string(),
        _ => format!("{:.3} s up", host_ns as f64 * 1e-9),
    }
}

/// The first signal stops in order; a later one has nothing to add.
fn shutdown_by_signal() -> std::io::Result<Receiver<String>> {
    let (tell, told) = bounded(1);
    for (signal, name) in [(SIGINT, "Ctrl-C"), (SIGTERM, "SIGTERM"), (SIGHUP, "SIGHUP")] {
        let (mut wake, woken) = UnixStream::pair()?;
        signal_hook::low_level::pipe::register(signal, woken)?;
        let tell = tell.clone();
        std::thread::Builder::new().name("signals".to_owned()).spawn(move || {
            let mut byte = [0];
            while wake.read_exact(&mut byte).is_ok() {
                // Full: one is told already.
                let _ = tell.try_send(format!("{name} received"));
            }
        })?;
    }
    Ok(told)
}

fn log_to_stderr() {
    use tracing_subscriber::EnvFilter;
    let filter = EnvFilter::try_from_env("TAUTRAIL_LOG").unwrap_or_else(|_| EnvFilter::new("warn"));
    // A second subscriber in one process is refused; the first serves.
    let _ = tracing_subscriber::fmt().with_env_filter(filter).with_writer(std::io::stderr).try_init();
}
