//! Tells a service manager that the daemon is ready and alive: the protocol of `sd_notify(3)`, one datagram a message.
//!
//! Only where the manager asks for it by `NOTIFY_SOCKET`. Own lines: three texts on a socket that std has. Alive means that
//! the links' thread beats and the main loop takes its beats; a hanging disk is no reason to be killed, it is an alarm.

use std::ffi::OsString;
use std::io;
use std::os::linux::net::SocketAddrExt;
use std::os::unix::ffi::OsStrExt;
use std::os::unix::net::{SocketAddr, UnixDatagram};
use std::time::Duration;

/// What a service manager told its child in the environment.
#[derive(Debug, Clone, Default)]
pub struct ServiceManager {
    /// `NOTIFY_SOCKET`: a path, or a name that begins with `@` in the abstract namespace.
    pub notify_socket: Option<OsString>,
    /// `WATCHDOG_USEC`: without a sign of life for this long it kills.
    pub watchdog: Option<Duration>,
}

impl ServiceManager {
    /// From the values of `NOTIFY_SOCKET`, `WATCHDOG_USEC` and `WATCHDOG_PID` as process `own_pid` found them. A watchdog of
    /// another process is none; a number that is none is no watchdog.
    pub fn of(socket: Option<OsString>, usec: Option<&str>, pid: Option<&str>, own_pid: u32) -> Self {
        let is_mine = pid.is_none_or(|pid| pid.parse() == Ok(own_pid));
        let usec = usec.and_then(|usec| usec.parse().ok()).filter(|usec| *usec > 0);
        Self {
            notify_socket: socket.filter(|socket| !socket.is_empty()),
            watchdog: usec.filter(|_| is_mine).map(Duration::from_micros),
        }
    }
}

/// The line to the service manager, if there is one.
#[derive(Debug)]
pub(super) struct Service {
    socket: Option<UnixDatagram>,
    ping_every_ns: Option<i64>,
    pinged_ns: i64,
}

impl Service {
    /// A manager that can't be reached is logged, and recording goes on without it.
    pub(super) fn reach(manager: &ServiceManager) -> Self {
        let socket = manager.notify_socket.as_ref().and_then(|name| match connect(name) {
            Ok(socket) => Some(socket),
            Err(error) => {
                tracing::warn!("the service manager at {} can't be told anything: {error}", name.to_string_lossy());
                None
            }
        });
        // Half of its patience, as sd_watchdog_enabled(3) advises.
        let ping_every_ns = manager.watchdog.map(|watchdog| i64::try_from(watchdog.as_nanos() / 2).unwrap_or(i64::MAX));
        Self { socket, ping_every_ns, pinged_ns: i64::MIN }
    }

    /// The feed is served and the journal open.
    pub(super) fn ready(&self) {
        self.send("READY=1\nSTATUS=recording");
    }

    /// A beat of the links' thread was taken.
    pub(super) fn alive(&mut self, host_ns: i64) {
        let due = self.ping_every_ns.is_some_and(|every_ns| host_ns.saturating_sub(self.pinged_ns) >= every_ns);
        if due {
            self.pinged_ns = host_ns;
            self.send("WATCHDOG=1");
        }
    }

    pub(super) fn stopping(&self) {
        self.send("STOPPING=1\nSTATUS=bringing everything to the disk");
    }

    fn send(&self, text: &str) {
        // A manager that takes nothing just now is told again at the next beat.
        let _ = self.socket.as_ref().map(|socket| socket.send(text.as_bytes()));
    }
}

fn connect(name: &OsString) -> io::Result<UnixDatagram> {
    let address = match name.as_bytes().strip_prefix(b"@") {
        Some(name) => SocketAddr::from_abstract_name(name)?,
        None => SocketAddr::from_pathname(name)?,
    };
    let socket = UnixDatagram::unbound()?;
    socket.connect_addr(&address)?;
    socket.set_nonblocking(true)?;
    Ok(socket)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn heard(socket: &UnixDatagram) -> Vec<String> {
        let mut texts = Vec::new();
        let mut buffer = [0; 256];
        while let Ok(n) = socket.recv(&mut buffer) {
            texts.push(String::from_utf8_lossy(&buffer[..n]).into_owned());
        }
        texts
    }

    #[test]
    fn it_is_ready_once_and_alive_by_half_of_the_watchdogs_patience() {
        let dir = tempfile::tempdir().unwrap();
        let path = dir.path().join("notify");
        let manager = UnixDatagram::bind(&path).unwrap();
        manager.set_nonblocking(true).unwrap();
        let told = ServiceManager::of(Some(path.into()), Some("1000000"), Some("7"), 7);
        let mut service = Service::reach(&told);
        service.ready();
        (0..=100).for_each(|beat| service.alive(beat * 20_000_000));
        service.stopping();
        let heard = heard(&manager);
        assert!(heard[0].starts_with("READY=1\n") && heard[heard.len() - 1].starts_with("STOPPING=1\n"), "{heard:?}");
        assert_eq!(heard[1..heard.len() - 1], ["WATCHDOG=1"; 5], "at 0, 0.5, 1, 1.5 and 2 s");
    }

    #[test]
    fn nobody_is_told_anything_where_nobody_asked_or_asked_another() {
        let without = ServiceManager::of(None, None, None, 7);
        let mut service = Service::reach(&without);
        service.ready();
        service.alive(0);
        for (usec, pid) in [(None, None), (Some("0"), None), (Some("soon"), None), (Some("1000"), Some("8"))] {
            assert_eq!(ServiceManager::of(None, usec, pid, 7).watchdog, None, "{usec:?} {pid:?}");
        }
        let gone = ServiceManager::of(Some("/nowhere/notify".into()), Some("1000"), None, 7);
        assert!(Service::reach(&gone).socket.is_none(), "recording goes on");
    }

    #[test]
    fn a_name_in_the_abstract_namespace_is_reached() {
        let name = format!("tautrail-test-{}", std::process::id());
        let manager = UnixDatagram::bind_addr(&SocketAddr::from_abstract_name(&name).unwrap()).unwrap();
        manager.set_nonblocking(true).unwrap();
        let told = ServiceManager::of(Some(format!("@{name}").into()), None, None, 7);
        let mut service = Service::reach(&told);
        service.alive(0);
        service.ready();
        assert_eq!(heard(&manager).len(), 1, "no watchdog, no sign of life");
    }
}
