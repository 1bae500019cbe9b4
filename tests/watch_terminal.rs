//! The built program at a feed: the display on a real pty leaves it clean, `--plain` and `mark` answer, nobody there is
//! said in a sentence.

#![allow(clippy::unwrap_used, reason = "a test that cannot go on stops here")]

#[path = "support/rehearsal_rig.rs"]
mod rehearsal_rig;

use std::fs::File;
use std::io::Read;
use std::os::fd::OwnedFd;
use std::path::Path;
use std::process::{Child, Command, Stdio};
use std::time::{Duration, Instant};

use rustix::process::{Pid, Signal, kill_process};
use rustix::pty::{OpenptFlags, grantpt, openpt, ptsname, unlockpt};
use rustix::termios::{LocalModes, Winsize, tcgetattr, tcsetwinsize};
use tautrail::feed::FeedServer;
use tautrail::feed::message::{Command as Asked, Hello};
use tautrail::rig;

const PATIENCE: Duration = Duration::from_secs(20);
/// What a terminal is told to show its cursor and to leave the second screen (ECMA-48 private modes 25 and 1049, as
/// xterm documents them; from memory).
const LEFT_CLEAN: [&str; 2] = ["\x1b[?25h", "\x1b[?1049l"];

fn hello() -> Hello {
    Hello::of(&rig::parse(&rehearsal_rig::rig_text("north-pier.toml")).unwrap())
}

fn program(args: &[&str], socket: &Path) -> Command {
    let mut command = Command::new(env!("CARGO_BIN_EXE_tautrail"));
    command.args(args).arg("--socket").arg(socket).env("TERM", "xterm-256color").env("LANG", "C.UTF-8");
    command
}

fn on_pty(command: &mut Command) -> (File, OwnedFd, Child) {
    let master = openpt(OpenptFlags::RDWR | OpenptFlags::NOCTTY | OpenptFlags::CLOEXEC).unwrap();
    grantpt(&master).unwrap();
    unlockpt(&master).unwrap();
    let name = ptsname(&master, Vec::new()).unwrap().into_string().unwrap();
    let slave = File::options().read(true).write(true).open(name).unwrap();
    tcsetwinsize(&slave, Winsize { ws_row: 24, ws_col: 80, ws_xpixel: 0, ws_ypixel: 0 }).unwrap();
    let end = || Stdio::from(slave.try_clone().unwrap());
    let child = command.stdin(end()).stdout(end()).stderr(end()).spawn().unwrap();
    (File::from(master), slave.into(), child)
}

fn wait(child: &mut Child) -> Option<i32> {
    let started = Instant::now();
    loop {
        if let Some(status) = child.try_wait().unwrap() {
            return status.code();
        }
        if started.elapsed() > PATIENCE {
            child.kill().unwrap();
            panic!("the program did not end within {PATIENCE:?}");
        }
        std::thread::sleep(Duration::from_millis(10));
    }
}

/// Reads the pty until the text is there.
fn read_until(master: &mut File, seen: &mut String, wanted: &str) {
    let started = Instant::now();
    let mut buffer = [0; 4096];
    while !seen.contains(wanted) {
        assert!(started.elapsed() < PATIENCE, "{wanted:?} never came: {seen:?}");
        let n = master.read(&mut buffer).unwrap();
        seen.push_str(&String::from_utf8_lossy(&buffer[..n]));
    }
}

#[test]
fn the_display_leaves_the_terminal_clean_on_every_signal() {
    let dir = tempfile::tempdir().unwrap();
    let socket = dir.path().join("feed.sock");
    let (_server, _requests) = FeedServer::start(&socket, hello()).unwrap();
    for signal in [Signal::TERM, Signal::HUP, Signal::INT] {
        let (mut master, slave, mut child) = on_pty(&mut program(&["watch"], &socket));
        let mut seen = String::new();
        read_until(&mut master, &mut seen, "TREAT AS LOADED");
        let raw = tcgetattr(&slave).unwrap().local_modes;
        assert!(!raw.contains(LocalModes::ICANON), "the display takes keys one by one");
        kill_process(Pid::from_child(&child), signal).unwrap();
        for sequence in LEFT_CLEAN {
            read_until(&mut master, &mut seen, sequence);
        }
        assert_eq!(wait(&mut child), Some(0), "{signal:?}");
        let cooked = tcgetattr(&slave).unwrap().local_modes;
        assert!(cooked.contains(LocalModes::ICANON | LocalModes::ECHO), "{signal:?}");
    }
}

#[test]
fn the_display_ends_when_its_terminal_goes_away() {
    let dir = tempfile::tempdir().unwrap();
    let socket = dir.path().join("feed.sock");
    let (_server, _requests) = FeedServer::start(&socket, hello()).unwrap();
    let (mut master, slave, mut child) = on_pty(&mut program(&["watch"], &socket));
    read_until(&mut master, &mut String::new(), "TREAT AS LOADED");
    drop((master, slave));
    assert!(wait(&mut child).is_some(), "ended by itself, not by a signal");
}

#[test]
fn without_a_terminal_or_a_daemon_one_sentence_says_what_to_do() {
    let dir = tempfile::tempdir().unwrap();
    let socket = dir.path().join("feed.sock");
    let cases = [
        (vec!["watch"], "watch --plain"),
        (vec!["watch", "--plain"], "is the daemon running"),
        (vec!["mark", "gust"], "is the daemon running"),
    ];
    for (args, words) in cases {
        let output = program(&args, &socket).stdin(Stdio::null()).output().unwrap();
        assert_eq!(output.status.code(), Some(2), "{args:?}");
        let said = String::from_utf8(output.stderr).unwrap();
        assert!(said.contains(words) && said.lines().count() == 1, "{args:?}: {said}");
    }
}

#[test]
fn a_mark_reaches_the_daemon_with_its_person_and_its_refusal_is_exit_code_1() {
    let dir = tempfile::tempdir().unwrap();
    let socket = dir.path().join("feed.sock");
    let (_server, requests) = FeedServer::start(&socket, hello()).unwrap();
    for (ok, code) in [(true, 0), (false, 1)] {
        let child = program(&["mark", "gust", "from", "the left", "--person", "recorder"], &socket).spawn().unwrap();
        let request = requests.recv_timeout(PATIENCE).unwrap();
        assert_eq!(
            request.command,
            Asked::Mark { id: 1, person: "recorder".into(), text: "gust from the left".into() }
        );
        request.replier.answer(ok, "told");
        let mut child = child;
        assert_eq!(wait(&mut child), Some(code));
    }
}
