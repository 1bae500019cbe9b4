//! The rig file: what the crew has built, how it is measured, what is planned. Types, reading, diagnostics.
//!
//! A rig file is TOML that people edit. Quantities are texts with a unit ("4.0 m"); [`check`] reports every finding at
//! once with line, column and key, and hands out a [`Rig`] only when none of them is an error. Only [`load`] touches a
//! file. No port is ever opened here.

mod attached;
mod channels;
mod checks;
mod cord_card;
mod cord_items;
mod cord_sheet;
mod cord_table;
mod detail_sections;
mod details;
mod document;
mod finding;
mod instrument;
mod loss_card;
mod proof;
mod read;
mod reading_sections;
mod record;
mod resembling;
mod sections;
mod sheet;
mod surroundings;
#[cfg(test)]
pub(crate) mod testing;
#[cfg(test)]
mod tests;
mod text_read;
mod text_section;
mod types;

pub use attached::{Attached, join, read_joined, take_apart};
pub use cord_card::CordCard;
pub use cord_items::{CordItem, Served};
pub use cord_sheet::{CordBranch, CordReading, CordSheet};
pub use details::*;
pub use finding::{Finding, RigError, Severity};
pub use instrument::*;
pub use loss_card::{Asked, FittedLoss, LossCard, ValidRange};
pub use proof::{OwnWeight, PROOF_CAUTION, ProofLoad};
pub use read::{Checked, check, load, parse, port_path};
pub use record::{CalibrationRecord, RecordKind, RecordState, Shunt};
pub use sheet::{Mass, Place, Sheet, SheetReading, Standard};
pub use surroundings::{AirError, local_gravity_mps2, moist_air_density_kg_per_m3, standard_air_density_kg_per_m3};
pub use types::*;
