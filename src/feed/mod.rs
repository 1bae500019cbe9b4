//! Messages between the daemon and who watches it: types, server, client.

pub mod message;
