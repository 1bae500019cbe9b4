//! The live display: the only room that knows the terminal. It shows and records; no key starts or stops machinery.
//!
//! [`ViewState`] gathers what the feed says, [`draw`] puts one state on a frame and touches nothing else, [`follow`]
//! joins the two with a terminal that is left clean however the program ends, [`follow_plain`] prints a line a second.
//! A number that is old looks old after 0.2 s and is a word after 1 s, whether its sensor or the daemon fell silent.

mod big;
mod chart;
mod draw;
mod history;
mod panels;
mod plain;
mod rail;
mod shown;
mod source;
mod terminal;
#[cfg(test)]
mod tests;
mod theme;
mod view;
mod words;

pub use draw::draw;
pub use plain::{follow_plain, plain_line};
pub use shown::{ForceUnit, ShownUnits, SpeedUnit};
pub use source::{Source, TrialPlayer};
pub use terminal::{Choices, WatchError, follow};
pub use theme::Theme;
pub use view::ViewState;

/// Said on every screen of the display.
pub const CAUTION: &str = "advises and records only; no safety device";
