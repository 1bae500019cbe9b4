//! Joins link, journal, live, feed and archive into one process that loses nothing.
//!
//! Threads: links (reads ports, nothing else), journal and journal-sync (append, make durable), this one (live view,
//! orders, feed), the feed's own, and one that waits for sealing children. Guarantees: a trial is never closed while
//! tension stands or is unknown; what the ports gave is in the journal before the daemon ends; a start after a crash
//! goes on with the trial or seals it. Refuses: to start where another daemon records.

mod begin;
mod commands;
mod conductor;
mod cords;
mod error;
mod found;
mod machine;
mod outgoing;
mod ports;
mod room;
mod run;
mod sealing;
mod service;
mod space;
mod trials;
mod words;

pub use begin::begin_journal;
pub use error::DaemonError;
pub use found::{Found, Known, Present, Resumed, Unsealed, look};
pub use run::{Options, run};
pub use service::ServiceManager;
