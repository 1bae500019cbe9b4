//! Where a command prints: text for people or JSON for programs, colour only where it is wanted.
//!
//! Colour never carries meaning alone. A reader that closed its end early (a pager, `head`) is no failure.

use std::error::Error;
use std::io::{self, IsTerminal, Write};

use serde_json::{Value, json};

/// How much attention a word asks for.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Tone {
    Good,
    Caution,
    Bad,
    Heading,
}

impl Tone {
    /// Blue, orange, red and bold: told apart without red against green.
    const fn code(self) -> &'static str {
        match self {
            Self::Good => "34",
            Self::Caution => "33",
            Self::Bad => "1;31",
            Self::Heading => "1",
        }
    }
}

/// What was asked of the output.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct Screen {
    pub json: bool,
    colour: bool,
}

impl Screen {
    /// Colour only on a terminal that can and where NO_COLOR is unset or empty.
    pub fn for_process(json: bool) -> Self {
        let refused = std::env::var_os("NO_COLOR").is_some_and(|value| !value.is_empty());
        let dumb = std::env::var_os("TERM").is_none_or(|term| term == "dumb");
        Self { json, colour: io::stdout().is_terminal() && !refused && !dumb && !json }
    }

    /// The word in its tone, plain where colour is not wanted.
    pub fn toned(&self, word: &str, tone: Tone) -> String {
        if self.colour { format!("\x1b[{}m{word}\x1b[0m", tone.code()) } else { word.to_owned() }
    }

    /// One line on standard output.
    pub fn line(&self, text: impl AsRef<str>) {
        let _ = writeln!(io::stdout().lock(), "{}", text.as_ref());
    }

    /// A text as it is, to the byte.
    pub fn text(&self, text: &str) {
        let _ = io::stdout().lock().write_all(text.as_bytes());
    }

    /// How far a long work is, on standard error, in one line that replaces itself; nothing where nobody looks on.
    pub fn progress(&self, text: &str, done: bool) {
        let mut to = io::stderr().lock();
        if to.is_terminal() {
            let _ = write!(to, "\r{text}{}", if done { "\n" } else { "" });
        }
    }

    /// One JSON value on standard output.
    pub fn value(&self, value: &Value) {
        self.line(format!("{value:#}"));
    }

    /// The error and its causes: on standard error for people, as JSON for programs.
    pub fn failure(&self, failure: &dyn Error) {
        let text = with_causes(failure);
        if self.json {
            self.value(&json!({ "error": text }));
        } else {
            let _ = writeln!(io::stderr().lock(), "tautrail: {text}");
        }
    }
}

/// An error and its causes in one sentence; what a cause repeats is said once.
pub fn with_causes(failure: &dyn Error) -> String {
    let mut text = failure.to_string();
    let mut cause = failure.source();
    while let Some(error) = cause {
        let shown = error.to_string();
        if !text.contains(&shown) {
            text.push_str(": ");
            text.push_str(&shown);
        }
        cause = error.source();
    }
    text
}
