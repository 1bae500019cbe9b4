//! Two ways to play a performance: on ptys in real time, and as a stream in virtual time.

mod port;
pub mod pty;
pub mod virtual_time;
