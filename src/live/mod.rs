//! Phase tracker, alarms, what a release now would give. Pure: time comes with the data.
//!
//! [`Live`] takes link events and ticks, decodes and calibrates them on a causal clock and answers with [`Happening`]s
//! and snapshots. The same input gives the same output, so a journal replays to the same phases and alarms. It advises
//! and records; it stops nothing.

mod alarm;
mod bring_up;
mod channel;
mod cord_fit;
mod cords;
pub(crate) mod debrief;
mod device;
mod drawn;
mod forecast;
mod happening;
mod health;
mod hold_watch;
mod instrument;
mod launch;
mod losses;
mod phase;
mod plan;
mod rate_watch;
mod raw;
#[cfg(test)]
mod rehearsed;
mod rules;
mod state;
#[cfg(test)]
mod testing;
mod trail;
mod trial;

pub use debrief::{Debrief, Recorded};
pub use happening::{AlarmChange, Happening};
pub use instrument::{Around, Live};
pub use plan::{Expected, Plan};
pub use state::{
    AlarmNow, ChannelNow, CordsFit, CordsNow, HoldNow, JournalNow, LaunchSeen, LinkNow, Phase, RawNow, ReleasedNow,
    Snapshot, ToGo, TrialNow,
};
pub use trial::KeptOpen;
