//! The only room that knows HDF5: the trial file, its schema (FORMAT.md), writing and reading.

mod attribute;
mod chunk;
mod column;
mod content;
mod description;
mod device_writer;
mod digest;
mod error;
mod heaps;
mod link_health;
mod members;
mod names;
mod raw_reader;
mod reader;
mod results_writer;
mod scale;
mod schema;
mod signal_writer;
mod signals_writer;
mod table;
mod writer;

pub use content::*;
pub use digest::text_sha256;
pub use error::TrialError;
pub use link_health::LinkHealth;
pub use raw_reader::{RawDigest, whole_raw_digest};
pub use reader::TrialFile;
pub use signals_writer::OpenSignal;
pub use writer::{RawDevice, TrialWriter};
