//! Amendments: what is said of a trial after it was sealed. [AMENDMENTS.md](../AMENDMENTS.md) describes the files.
//!
//! A sealed file is never written again. Notes, inspection answers, conditions and corrected records go beside it, one
//! numbered text an amendment, each with the trial's raw digest and its predecessor's: who changes or removes one later
//! breaks the chain. Readers see the trial with all of them ([`Amended`]).

mod amended;
mod chain;
mod text;
mod write;

pub use amended::{Amended, AmendedError, AmendedRig, Origin};
pub use chain::{Amendment, ChainError, amendments, chain_findings};
pub use text::{Answer, ConditionSaid, Draft, NoteSaid, RecordSaid};
pub use write::{AmendError, amend};
