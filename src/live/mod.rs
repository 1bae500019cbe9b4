//! Phase tracker, alarms, what a release now would give. Pure: time comes with the data.

mod state;

pub use state::{
    AlarmNow, ChannelNow, CordsNow, JournalNow, LaunchSeen, LinkNow, Phase, ReleasedNow, Snapshot, TrialNow,
};
