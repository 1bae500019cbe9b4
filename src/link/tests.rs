//! The room against ptys, as it opens real ports.

use std::fs::File;
use std::io::{Read, Write};
use std::os::fd::OwnedFd;
use std::path::PathBuf;
use std::time::{Duration, Instant};

use crossbeam_channel::{Receiver, bounded};
use firmware_protocol::{Deframed, Deframer, MAX_COBS_LEN, Message, decode};
use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
use rustix::termios::{OptionalActions, tcgetattr, tcsetattr};

use super::*;
use crate::rig::SerialSettings;

/// A pty: `master` is the device's end.
pub struct Pty {
    pub master: File,
    pub path: PathBuf,
}

impl Pty {
    pub fn new() -> Self {
        let master: OwnedFd = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY).unwrap();
        grantpt(&master).unwrap();
        unlockpt(&master).unwrap();
        let mut settings = tcgetattr(&master).unwrap();
        settings.make_raw();
        tcsetattr(&master, OptionalActions::Now, &settings).unwrap();
        let path = PathBuf::from(ptsname(&master, Vec::new()).unwrap().into_string().unwrap());
        Self { master: master.into(), path }
    }
}

fn spec(path: PathBuf, asks: Asks) -> PortSpec {
    PortSpec { device: DeviceIdx(1), path, baud: 115_200, serial: SerialSettings::default(), asks }
}

fn start(path: PathBuf) -> (Links, Receiver<FromLinks>, Receiver<FromLinks>) {
    let ((journal, journal_end), (live, live_end)) = (bounded(10_000), bounded(10_000));
    let ports = vec![spec(path, Asks::Frames)];
    let links = spawn_links(ports, Sinks { journal, live }, std::sync::Arc::new(SystemClock), 1).unwrap();
    (links, journal_end, live_end)
}

/// Waits for an event that `wanted` accepts; what came before it is dropped.
#[track_caller]
fn await_event<T>(end: &Receiver<FromLinks>, mut wanted: impl FnMut(&LinkWhat) -> Option<T>) -> T {
    let deadline = Instant::now() + Duration::from_secs(5);
    while let Ok(item) = end.recv_deadline(deadline) {
        if let FromLinks::Event(event) = item
            && let Some(found) = wanted(&event.what)
        {
            return found;
        }
    }
    panic!("the event did not come within 5 s");
}

fn is_up(what: &LinkWhat) -> Option<()> {
    matches!(what, LinkWhat::Up { .. }).then_some(())
}

fn reason_down(what: &LinkWhat) -> Option<String> {
    if let LinkWhat::Down { reason } = what { Some(reason.clone()) } else { None }
}

fn collect_bytes(end: &Receiver<FromLinks>, n: usize) -> Vec<u8> {
    let mut all = Vec::new();
    while all.len() < n {
        all.extend(await_event(end, |what| if let LinkWhat::Bytes(b) = what { Some(b.to_vec()) } else { None }));
    }
    all
}

#[test]
fn bytes_reach_both_queues_in_order() {
    let mut pty = Pty::new();
    let (links, journal, live) = start(pty.path.clone());
    await_event(&journal, is_up);
    let sent: Vec<u8> = (0..3000_u32).map(|i| (i * 7) as u8).collect();
    pty.master.write_all(&sent).unwrap();
    assert_eq!(collect_bytes(&journal, sent.len()), sent);
    assert_eq!(collect_bytes(&live, sent.len()), sent);
    links.stop().unwrap();
}

#[test]
fn the_device_is_asked_for_its_description_its_data_and_its_time() {
    let mut pty = Pty::new();
    let (links, journal, _live) = start(pty.path.clone());
    let token =
        await_event(&journal, |what| if let LinkWhat::TimeRequested { token } = what { Some(*token) } else { None });
    let (mut asked, mut read) = (Vec::new(), [0; 4096]);
    let mut store = vec![0; MAX_COBS_LEN];
    let mut deframer = Deframer::new(&mut store);
    while !asked.contains(&format!("TimeRequest(TimeRequest {{ token: {token} }})")) {
        let n = pty.master.read(&mut read).unwrap();
        let mut bytes = &read[..n];
        while let Some(Deframed::Frame(cobs)) = deframer.next_piece(&mut bytes) {
            asked.push(format!("{:?}", decode(cobs).unwrap().message));
        }
    }
    assert_eq!(asked[..2], [format!("{:?}", Message::DescribeRequest), format!("{:?}", Message::Start)]);
    links.stop().unwrap();
}

#[test]
fn a_pulled_cable_is_told_once_and_not_at_every_try() {
    // By a name of its own: the kernel gives the number of a pty that is gone to the next test's.
    let dir = tempfile::tempdir().unwrap();
    let name = dir.path().join("winch-node");
    let pty = Pty::new();
    std::os::unix::fs::symlink(&pty.path, &name).unwrap();
    let (links, journal, _live) = start(name.clone());
    await_event(&journal, is_up);
    std::fs::remove_file(&name).unwrap();
    drop(pty.master);
    let reason = await_event(&journal, reason_down);
    assert!(reason.contains("closed") || reason.contains("gone"), "{reason}");
    let reason = await_event(&journal, reason_down);
    assert!(reason.contains("is not there"), "{reason}");
    std::thread::sleep(Duration::from_millis(600));
    let again = journal.try_iter().filter(|item| matches!(item, FromLinks::Event(_))).count();
    assert_eq!(again, 0, "told once, not at every try");
    links.stop().unwrap();
}

#[test]
fn a_port_that_comes_back_is_read_again() {
    let dir = tempfile::tempdir().unwrap();
    let name = dir.path().join("winch-node");
    let (links, journal, _live) = start(name.clone());
    assert!(await_event(&journal, reason_down).contains("is not there"));
    for _ in 0..2 {
        let mut pty = Pty::new();
        std::os::unix::fs::symlink(&pty.path, &name).unwrap();
        await_event(&journal, is_up);
        pty.master.write_all(b"hello").unwrap();
        assert_eq!(collect_bytes(&journal, 5), b"hello");
        std::fs::remove_file(&name).unwrap();
        drop(pty);
        await_event(&journal, reason_down);
    }
    links.stop().unwrap();
}

#[test]
fn stopping_reads_what_is_readable_first_and_closes_the_queues() {
    let mut pty = Pty::new();
    let (links, journal, _live) = start(pty.path.clone());
    await_event(&journal, is_up);
    pty.master.write_all(&[7; 2000]).unwrap();
    links.stop().unwrap();
    let bytes: usize = journal
        .iter()
        .map(|item| match item {
            FromLinks::Event(LinkEvent { what: LinkWhat::Bytes(bytes), .. }) => bytes.len(),
            _ => 0,
        })
        .sum();
    assert_eq!(bytes, 2000); // `iter` ends because every sender is gone
}

#[test]
fn the_heartbeat_comes_fifty_times_a_second() {
    let pty = Pty::new();
    let (links, journal, _live) = start(pty.path.clone());
    std::thread::sleep(Duration::from_millis(1000));
    links.stop().unwrap();
    let n = journal.iter().filter(|item| matches!(item, FromLinks::Heartbeat { .. })).count();
    assert!((40..=55).contains(&n), "{n} heartbeats in a second");
}

#[test]
fn an_order_to_stop_is_heard_on_a_port_that_never_falls_silent() {
    let pty = Pty::new();
    let (links, journal, _live) = start(pty.path.clone());
    await_event(&journal, is_up);
    // Not blocking: once nobody reads any more, a full pty would hold this thread for ever.
    rustix::io::ioctl_fionbio(&pty.master, true).unwrap();
    let mut master = pty.master.try_clone().unwrap();
    let over = std::sync::Arc::new(std::sync::atomic::AtomicBool::new(false));
    let flooding = std::sync::Arc::clone(&over);
    let flood = std::thread::spawn(move || {
        while !flooding.load(std::sync::atomic::Ordering::Relaxed) {
            if master.write(&[7; 4096]).is_err() {
                std::thread::yield_now();
            }
        }
    });
    await_event(&journal, |what| matches!(what, LinkWhat::Bytes(_)).then_some(()));
    let begun = Instant::now();
    let stopping = std::thread::spawn(move || links.stop().unwrap());
    let down = await_event(&journal, reason_down);
    assert_eq!(down, STOPPED);
    stopping.join().unwrap();
    assert!(begun.elapsed() < Duration::from_secs(4), "{:?}", begun.elapsed());
    over.store(true, std::sync::atomic::Ordering::Relaxed);
    flood.join().unwrap();
}

fn start_text(
    path: PathBuf,
    start: Option<&'static str>,
    poll: Option<(&'static str, u64)>,
) -> (Links, Receiver<FromLinks>) {
    let ((journal, journal_end), (live, _)) = (bounded(10_000), bounded(10_000));
    let asks = Asks::Text {
        start: start.map(|text| text.as_bytes().into()),
        poll: poll.map(|(text, ms)| (text.as_bytes().into(), Duration::from_millis(ms))),
    };
    let links =
        spawn_links(vec![spec(path, asks)], Sinks { journal, live }, std::sync::Arc::new(SystemClock), 1).unwrap();
    (links, journal_end)
}

/// Reads what the device was told until it holds `n` times `part`.
fn told(pty: &mut Pty, part: &str, n: usize) -> String {
    let (mut all, mut read) = (String::new(), [0; 4096]);
    while all.matches(part).count() < n {
        let n = pty.master.read(&mut read).unwrap();
        all.push_str(std::str::from_utf8(&read[..n]).unwrap());
    }
    all
}

#[test]
fn a_text_instrument_is_started_again_while_nothing_comes_and_asked_for_nothing_else() {
    let mut pty = Pty::new();
    let (links, _journal) = start_text(pty.path.clone(), Some("RUN\r\n"), None);
    // At the opening, soon after (boards boot), and while it stays silent.
    assert_eq!(told(&mut pty, "RUN\r\n", 3), "RUN\r\n".repeat(3));
    links.stop().unwrap();
}

#[test]
fn a_polled_instrument_is_polled_at_its_interval() {
    let mut pty = Pty::new();
    let (links, _journal) = start_text(pty.path.clone(), None, Some(("P\n", 50)));
    let begun = Instant::now();
    assert_eq!(told(&mut pty, "P\n", 10), "P\n".repeat(10));
    assert!(begun.elapsed() >= Duration::from_millis(8 * 50), "{:?}", begun.elapsed());
    links.stop().unwrap();
}
