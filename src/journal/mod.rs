//! Append-only capture on a disk trait: the only thing written while data flows.
//!
//! Guarantees: what was appended is with the kernel at once and on the disk after at most one sync interval; reading
//! gives back every sound record and says what is missing; nothing is ever overwritten. Refuses: to try a failed sync
//! again, to hold more in memory than its bounds, to decode samples. FORMAT.md is the format.

mod body;
mod disk;
mod frame;
mod reader;

pub use body::{
    Body, Clocks, DeviceAtOpen, EventBody, FORMAT_VERSION, Lost, Record, SegmentOpen, TrialClose, TrialOpen,
};
pub use disk::{AppendFile, Disk, Listed, RealDisk};
pub use frame::MAX_PAYLOAD_BYTES;
pub use reader::{
    Damage, Item, JournalReader, ReadError, Records, SegmentInfo, Survey, TrialRange, journals, parse_segment_name,
    segment_name,
};
