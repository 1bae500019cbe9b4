//! Messages between the daemon and who watches it: types, server, client. FEED.md is the document of record.
//!
//! Every client has a bounded outbox and two threads of its own; publishing never waits for any of them, so no client
//! can delay the recording or another client. What a slow client missed is counted and told to it.

mod client;
mod connection;
pub mod message;
pub mod metrics;
mod outbox;
mod server;
mod socket;
#[cfg(test)]
mod tests;
mod translate;

pub use client::{ClientError, FeedClient};
pub use outbox::{Replier, Request};
pub use server::FeedServer;
pub use socket::FeedError;

/// The socket's file name in the directory that the daemon records into, unless another path is chosen.
pub const SOCKET_NAME: &str = "feed.sock";
