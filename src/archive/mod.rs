//! Seal, recover, list, verify, amend, export, bundle: composes journal, capture, calibration, reading and trial.
//!
//! Guarantees: a trial file is made by sealing a journal range and in no other way; it exists whole or not at all; it is
//! never replaced. Refuses: to write to a journal, to repair a trial file, to overwrite anything.

mod again;
mod amendment;
mod bundle;
mod catalogue;
mod clock_finding;
mod cord_service;
mod derive;
mod edges;
mod error;
mod export;
mod hold;
mod host_clock_steps;
mod keep;
mod kept_samples;
mod list;
mod numbered;
mod player;
mod publish;
mod raw_pass;
mod recover;
mod reproduce;
mod seal;
mod settled;
mod value_pass;
mod verify;

pub use again::AgainError;
pub use amendment::*;
pub use bundle::{BundleError, Bundled, Extras, Packed, bundle, file_sha256};
pub use catalogue::*;
pub use cord_service::{CordService, NotCounted, ServiceError, cord_service};
pub use derive::VERDICT_PREFIX;
pub use edges::edges_of;
pub use error::SealError;
pub use export::{ExportError, ExportForm, export};
pub use hold::{Hold, HoldError, NotKept, holds, is_held, keep_for_hold, set_hold};
pub use keep::{Kept, ReleaseError, kept, release};
pub use list::{Listing, Summary, list};
pub use publish::clear_up;
pub use recover::{Fate, RecoverError, Recovered, Recovery, journal_dir, recover, seal_one, sealed_file};
pub use seal::{FILE_SHARE, Sealed, file_room_bytes, seal, trial_path};
pub use settled::{SettleError, Settled, forget_settled, settle_until, settle_whole, settled};
pub use verify::{Depth, Verified, verify};
