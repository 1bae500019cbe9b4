//! Append-only capture on a disk trait: the only thing written while data flows.
//!
//! Guarantees: what was appended is with the kernel at once and on the disk after at most one sync interval; reading
//! gives back every sound record and says what is missing; nothing is ever overwritten. Refuses: to try a failed sync
//! again, to hold more in memory than its bounds, to decode samples. FORMAT.md is the format.

mod body;
mod clocks;
mod describes;
mod disk;
mod frame;
mod health;
mod job;
mod lately;
mod lock;
mod reader;
mod recorder;
mod recording;
mod retention;
mod staged;
mod writer;

pub use body::{Body, Clocks, DeviceAtOpen, EventBody, FORMAT_VERSION, Record, SegmentOpen, TrialClose, TrialOpen};
pub use disk::{AppendFile, Disk, Listed, RealDisk};
pub use frame::MAX_PAYLOAD_BYTES;
pub use health::Health;
pub use job::{Job, Outcome, Reserved};
pub use lock::{ArchiveLock, LockError};
pub use reader::{
    Damage, Item, JournalReader, ReadError, Records, SegmentInfo, Survey, TrialRange, journals, parse_segment_name,
    segment_name,
};
pub use recorder::{Ends, Farewell, Order, Recorder, RecorderNow, RecorderPanicked, Report};
pub use recording::Recording;
pub use staged::{Fault, Operation, StagedDisk};
pub use writer::{Journal, Origin, Settings, Start, StartError};
