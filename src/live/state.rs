//! The state of everything at one instant, as plain data: what a snapshot on the feed carries.

use std::collections::BTreeMap;

use serde::{Deserialize, Serialize};

#[derive(Debug, Clone, Copy, PartialEq, Eq, Serialize, Deserialize)]
#[serde(rename_all = "snake_case")]
pub enum Phase {
    /// No fresh data yet: treat as loaded.
    Unknown,
    Slack,
    WinchBack,
    Hold,
    Launch,
    RunOut,
    Rest,
    LetDown,
}

impl Phase {
    pub const ALL: [Self; 8] = [
        Self::Unknown,
        Self::Slack,
        Self::WinchBack,
        Self::Hold,
        Self::Launch,
        Self::RunOut,
        Self::Rest,
        Self::LetDown,
    ];

    /// The phase that reads so.
    pub fn named(words: &str) -> Option<Self> {
        Self::ALL.into_iter().find(|phase| phase.words() == words)
    }

    /// The phase as people read it.
    pub const fn words(self) -> &'static str {
        match self {
            Self::Unknown => "unknown",
            Self::Slack => "slack",
            Self::WinchBack => "winch-back",
            Self::Hold => "hold",
            Self::Launch => "launch",
            Self::RunOut => "run-out",
            Self::Rest => "rest",
            Self::LetDown => "let-down",
        }
    }
}

/// A channel's state at a snapshot.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct ChannelNow {
    pub name: String,
    pub role: String,
    pub unit: String,
    /// Newest value, and the least and greatest since the last snapshot; none before the first sample.
    pub value: Option<f64>,
    pub min: Option<f64>,
    pub max: Option<f64>,
    /// Age of the newest sample when the snapshot was made.
    pub age_s: Option<f64>,
}

/// Counts of one channel since the last telling, for who calibrates.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct RawNow {
    pub channel: String,
    pub host_ns: i64,
    /// Samples since the last one.
    pub n: u64,
    /// Of their counts.
    pub mean: f64,
    /// Standard deviation; none for a single sample.
    pub sd: Option<f64>,
    pub min: f64,
    pub max: f64,
}

/// Whether the cords hold energy.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
#[serde(tag = "state", rename_all = "snake_case")]
pub enum CordsNow {
    Loaded {
        tension_n: f64,
        /// None when the rig file's cords give no plan.
        energy_j: Option<f64>,
    },
    /// Every tension cell is fresh and below the slack threshold.
    Slack,
    /// A cell is silent: "tension unknown, treat as loaded".
    Unknown,
}

/// What a release now would give.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct ReleasedNow {
    pub launch_speed_mps: f64,
    pub launch_speed_low_mps: f64,
    pub launch_speed_high_mps: f64,
    /// Launch speed and head wind together.
    pub airspeed_mps: f64,
    pub airspeed_low_mps: f64,
    pub airspeed_high_mps: f64,
    /// Specific force along the rail, CFC 60 as its limit, multiples of 9.80665 m/s².
    pub peak_g: f64,
    pub peak_g_low: f64,
    pub peak_g_high: f64,
    /// Probability that the launch speed lies in its window, and the peak under its limit.
    pub in_window: f64,
    pub under_limit: f64,
}

/// How many cords the tension fits so far: the misrigging watch.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct CordsFit {
    pub cords: f64,
    /// Ends of the 95 % interval.
    pub low: f64,
    pub high: f64,
    /// What the rig file says.
    pub rig_file: u32,
}

/// What the hold has done to the tension of the release line.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct HoldNow {
    pub fell_n: f64,
    /// Where the tension will be a minute from now, if it goes on so; none before it can be told.
    pub in_a_minute_n: Option<f64>,
    /// When a release would fall short of the window; 0 when it would now, none when not within an hour or not known.
    pub window_missed_in_s: Option<f64>,
}

/// What is still to be drawn to the plan.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct ToGo {
    pub draw_m: f64,
    /// From the tension now to the planned one; none where the rig file gives no plan.
    pub tension_n: Option<f64>,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct LinkNow {
    pub device: String,
    pub up: bool,
    /// Since the daemon started, as all counts here.
    #[serde(default)]
    pub bytes: u64,
    pub bytes_per_s: f64,
    /// Frames or lines.
    pub frames: u64,
    /// Blocks or readings accepted.
    #[serde(default)]
    pub blocks: u64,
    pub refused: u64,
    /// The same, by reason.
    #[serde(default)]
    pub refused_by: BTreeMap<String, u64>,
    /// The last refusal since the link came up, with kind, field or id.
    #[serde(default)]
    pub last_refusal: Option<String>,
    /// Why no sample was accepted since the link came up, where one should have been.
    #[serde(default)]
    pub no_samples: Option<String>,
    /// Frames that the sequence numbers show to be lost.
    #[serde(default)]
    pub lost_frames: u64,
    pub missing_samples: u64,
    /// Places where they are missing.
    #[serde(default)]
    pub gaps: u64,
    pub silent_s: Option<f64>,
    /// Longest time between two reads while the link was up.
    #[serde(default)]
    pub longest_stall_s: f64,
    pub clock_uncertainty_s: Option<f64>,
    /// How fast the device's clock runs against the host's.
    #[serde(default)]
    pub clock_drift_ppm: Option<f64>,
    /// How the clock breaks the tolerance that the device states.
    #[serde(default)]
    pub clock_trouble: Option<String>,
    pub note: String,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct JournalNow {
    pub bytes: u64,
    /// On the disk; none before it said.
    pub free_bytes: Option<u64>,
    /// Longest wait to be on the disk in the last ten seconds.
    pub sync_interval_s: f64,
    /// Greatest share of its queue that was filled in the last ten seconds.
    pub queue_high_water: f64,
    pub lost_events: u64,
    pub trouble: Option<String>,
}

#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct TrialNow {
    pub id: String,
    pub open_s: f64,
}

/// What the last launch gave, shown from rest on.
#[derive(Debug, Clone, Copy, PartialEq, Serialize, Deserialize)]
pub struct LaunchSeen {
    pub launch_speed_mps: f64,
    pub peak_g: f64,
}

/// The state of everything, 30 times a second.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Snapshot {
    pub host_ns: i64,
    /// RFC 3339; empty when the wall clock was never set.
    pub wall: String,
    pub phase: Phase,
    pub phase_s: f64,
    pub cords: CordsNow,
    pub channels: Vec<ChannelNow>,
    pub x_m: Option<f64>,
    pub draw_m: Option<f64>,
    pub released_now: Option<ReleasedNow>,
    /// While the draw is short of the plan.
    pub to_go: Option<ToGo>,
    /// In the hold.
    pub hold: Option<HoldNow>,
    /// From the winch-back on, once there is enough of it.
    pub cords_fit: Option<CordsFit>,
    pub last_launch: Option<LaunchSeen>,
    pub links: Vec<LinkNow>,
    pub journal: Option<JournalNow>,
    pub trial: Option<TrialNow>,
    /// Most urgent first. An alarm stays until its cause is gone and a person has acknowledged it.
    pub alarms: Vec<AlarmNow>,
}

/// An alarm that stands, or that nobody has acknowledged yet.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct AlarmNow {
    /// What is wrong and what to do.
    pub sentence: String,
    /// Host monotonic time of its raising.
    pub raised_ns: i64,
    /// Whether the cause still stands.
    pub active: bool,
    /// Who acknowledged it.
    pub acknowledged_by: Option<String>,
}
