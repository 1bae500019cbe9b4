//! The terminal: entered, drawn on at most ten times a second, and left clean on every way out, a panic and SIGTERM,
//! SIGHUP and SIGINT included.

use std::io::{self, IsTerminal};
use std::path::PathBuf;
use std::sync::Arc;
use std::sync::atomic::{AtomicBool, Ordering};
use std::time::{Duration, Instant};

use ratatui::DefaultTerminal;
use ratatui::crossterm::event::{self, Event, KeyCode, KeyEventKind, KeyModifiers};
use rustix::event::{PollFd, PollFlags, Timespec};
use rustix::io::Errno;
use signal_hook::consts::{SIGHUP, SIGINT, SIGTERM};
use thiserror::Error;

use crate::feed::ClientError;
use crate::feed::message::{Command, Message};

use super::draw;
use super::shown::ShownUnits;
use super::source::{Link, Source, connected};
use super::theme::Theme;
use super::view::ViewState;

const DRAW_EVERY: Duration = Duration::from_millis(100);
/// An alarm or a new phase does not wait for the next regular drawing, but no flood of them draws faster than this.
const URGENT_AFTER: Duration = Duration::from_millis(20);
const LISTEN: Duration = Duration::from_millis(10);
const RECONNECT_EVERY: Duration = Duration::from_secs(1);

/// Why the display cannot be shown.
#[derive(Debug, Error)]
#[non_exhaustive]
pub enum WatchError {
    #[error("standard output is no terminal: use `tautrail watch --plain` for a line a second")]
    NoTerminal,
    #[error("this terminal cannot move its cursor (TERM={term}): use `tautrail watch --plain` for a line a second")]
    DumbTerminal { term: String },
    #[error("terminal: {source}")]
    Terminal {
        #[from]
        source: io::Error,
    },
    #[error("{source}")]
    Feed {
        #[from]
        source: ClientError,
    },
}

/// What the person at the display chose.
#[derive(Debug, Clone)]
pub struct Choices {
    /// Named in acknowledgements.
    pub person: String,
    pub theme: Theme,
    pub units: ShownUnits,
    /// Begin with large numbers.
    pub big: bool,
}

/// Follows a daemon's feed, or plays a recorded trial, on the terminal until a key or a signal ends it. A lost daemon is
/// tried again every second.
///
/// # Errors
/// [`WatchError`] when there is no daemon at the start, or no terminal.
pub fn follow(source: Source, choices: &Choices) -> Result<(), WatchError> {
    if !io::stdout().is_terminal() || !io::stdin().is_terminal() {
        return Err(WatchError::NoTerminal);
    }
    let term = std::env::var("TERM").unwrap_or_default();
    if term.is_empty() || term == "dumb" {
        return Err(WatchError::DumbTerminal { term });
    }
    let (link, hello, socket) = Link::open(source)?;
    let stop = Arc::new(AtomicBool::new(false));
    for signal in [SIGTERM, SIGHUP, SIGINT] {
        signal_hook::flag::register(signal, stop.clone())?;
    }
    let mut view = ViewState::new(hello, choices.theme);
    (view.units, view.big) = (choices.units, choices.big);
    // Also sets a panic hook that leaves the terminal clean.
    let mut terminal = ratatui::try_init()?;
    let ended = Watch::new(choices, link, socket, view).run(&mut terminal, &stop);
    if terminal_is_gone()? {
        // Dropping it would print that the cursor can't be shown, to nobody, and panic over that.
        std::mem::forget(terminal);
        return Ok(());
    }
    // After SIGHUP there may be no terminal left to clean; the reason for ending matters more.
    let restored = ratatui::try_restore();
    ended?;
    if stop.load(Ordering::Relaxed) { Ok(()) } else { Ok(restored?) }
}

/// True once the far end of standard input's terminal has closed.
fn terminal_is_gone() -> io::Result<bool> {
    let stdin = io::stdin();
    let mut asked = [PollFd::new(&stdin, PollFlags::IN)];
    match rustix::event::poll(&mut asked, Some(&Timespec::default())) {
        Err(Errno::INTR) => Ok(false),
        asked_well => asked_well
            .map(|_| asked[0].revents().intersects(PollFlags::HUP | PollFlags::ERR | PollFlags::NVAL))
            .map_err(io::Error::from),
    }
}

struct Watch<'a> {
    choices: &'a Choices,
    link: Link,
    /// Of the daemon, to connect again.
    socket: Option<PathBuf>,
    view: ViewState,
    snapshot_at: Instant,
    drawn_at: Option<Instant>,
    next_id: u64,
}

impl<'a> Watch<'a> {
    fn new(choices: &'a Choices, link: Link, socket: Option<PathBuf>, view: ViewState) -> Self {
        Self { choices, link, socket, view, snapshot_at: Instant::now(), drawn_at: None, next_id: 1 }
    }

    fn run(mut self, terminal: &mut DefaultTerminal, stop: &AtomicBool) -> io::Result<()> {
        while !stop.load(Ordering::Relaxed) {
            let urgent = self.listen();
            // Asking a terminal that is gone for keys never returns, and no signal ends it then.
            if stop.load(Ordering::Relaxed) || terminal_is_gone()? {
                return Ok(());
            }
            if event::poll(Duration::ZERO)? && self.take_key(&event::read()?) {
                return Ok(());
            }
            let waited = self.drawn_at.map_or(DRAW_EVERY, |drawn_at| drawn_at.elapsed());
            if waited >= DRAW_EVERY || (urgent && waited >= URGENT_AFTER) {
                self.drawn_at = Some(Instant::now());
                self.view.since_snapshot_s = self.snapshot_at.elapsed().as_secs_f64();
                terminal.draw(|frame| draw(frame, &self.view))?;
            }
        }
        Ok(())
    }

    /// Takes what the feed has within a few milliseconds; true when something of it must be seen at once.
    fn listen(&mut self) -> bool {
        let until = Instant::now() + LISTEN;
        let mut urgent = false;
        while Instant::now() < until {
            let next = match &mut self.link {
                Link::Up(client) => client.next(LISTEN),
                Link::Trial(player) => {
                    let due = player.due(Instant::now());
                    self.view.recorded = Some(player.banner());
                    let Some((anew, messages)) = due else {
                        std::thread::sleep(LISTEN);
                        return urgent;
                    };
                    if anew {
                        self.view.begin_anew();
                    }
                    urgent |= messages.into_iter().fold(false, |urgent, message| self.take(message) | urgent);
                    continue;
                }
                Link::Down { try_at } => {
                    std::thread::sleep(LISTEN);
                    let due = Instant::now() >= *try_at;
                    if due {
                        self.reconnect();
                    }
                    return due;
                }
            };
            match next {
                Ok(Some(message)) => urgent |= self.take(message),
                Ok(None) => {}
                Err(error) => {
                    self.lose(&error);
                    return true;
                }
            }
        }
        urgent
    }

    fn take(&mut self, message: Message) -> bool {
        if matches!(message, Message::Snapshot(_)) {
            self.snapshot_at = Instant::now();
        }
        self.view.apply(message)
    }

    fn lose(&mut self, error: &ClientError) {
        self.view.lost.get_or_insert_with(|| error.to_string());
        self.link = Link::Down { try_at: Instant::now() + RECONNECT_EVERY };
    }

    fn reconnect(&mut self) {
        let Some(socket) = &self.socket else { return };
        match connected(socket) {
            Ok(client) => {
                self.view.lost = None;
                self.view.hello = client.hello().clone();
                self.link = Link::Up(client);
            }
            Err(error) => {
                self.view.lost = Some(error.to_string());
                self.link = Link::Down { try_at: Instant::now() + RECONNECT_EVERY };
            }
        }
    }

    /// True when the key ends the display.
    fn take_key(&mut self, event: &Event) -> bool {
        let Event::Key(key) = event else {
            // A new size is drawn at once.
            self.drawn_at = None;
            return false;
        };
        if key.kind != KeyEventKind::Press {
            return false;
        }
        self.view.notice = None;
        match key.code {
            KeyCode::Char('c') if key.modifiers.contains(KeyModifiers::CONTROL) => return true,
            KeyCode::Char('q') => return true,
            KeyCode::Char('h' | '?') => self.view.help = !self.view.help,
            KeyCode::Esc => self.view.help = false,
            KeyCode::Char('a') => self.acknowledge(),
            KeyCode::Char(' ' | '+' | '-' | '0') | KeyCode::Left | KeyCode::Right => self.steer(key.code),
            KeyCode::Char('b') => self.view.big = !self.view.big,
            KeyCode::Char('u') => {
                self.view.units = self.view.units.next();
                self.view.notice = Some(format!("shown in {}", self.view.units.symbols()));
            }
            _ => {}
        }
        self.drawn_at = None;
        false
    }

    /// Keys of a recorded trial; live they do nothing.
    fn steer(&mut self, key: KeyCode) {
        let Some(player) = self.link.player() else { return };
        match key {
            KeyCode::Char(' ') => player.pause(),
            KeyCode::Char('+') => player.faster(),
            KeyCode::Char('-') => player.slower(),
            KeyCode::Char('0') => player.seek(f64::NEG_INFINITY),
            KeyCode::Left => player.seek(-1.0),
            KeyCode::Right => player.seek(1.0),
            _ => {}
        }
    }

    fn acknowledge(&mut self) {
        let command = Command::Acknowledge { id: self.next_id, person: self.choices.person.clone() };
        self.next_id += 1;
        match self.link.send(&command) {
            Ok(true) => {}
            Ok(false) => self.view.notice = Some("there is no daemon to tell".to_owned()),
            Err(error) => self.lose(&error),
        }
    }
}
