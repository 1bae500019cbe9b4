//! The rig's own physics. Shares nothing with Tautrail's launch model, on purpose.

pub mod bench;
pub mod cord;
pub mod course;
pub mod gas;
pub mod launch;
pub mod rubber;
pub mod stroke;
pub mod trajectory;
pub mod winch;
