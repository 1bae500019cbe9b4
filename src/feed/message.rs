//! Messages on the feed: JSON Lines, one object a line, `"type"` first. Docs list every field.

use serde::{Deserialize, Serialize};

pub use crate::live::{
    AlarmNow, ChannelNow, CordsFit, CordsNow, HoldNow, JournalNow, LaunchSeen, LinkNow, Phase, RawNow, ReleasedNow,
    Snapshot, ToGo, TrialNow,
};

pub const FEED_VERSION: u32 = 1;

/// Daemon to client.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(tag = "type", rename_all = "snake_case")]
pub enum Message {
    Hello(Hello),
    Snapshot(Box<Snapshot>),
    Event(Event),
    /// Counts of a channel that somebody asked for.
    Raw(RawNow),
    /// The client was too slow: `n` messages were left out before the next one.
    Dropped {
        n: u64,
    },
    Reply {
        id: u64,
        ok: bool,
        text: String,
    },
    /// The daemon stops; says why.
    Bye {
        reason: String,
    },
}

/// First line to every client: what the display needs to know of the rig, once.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Hello {
    pub feed_version: u32,
    pub program_version: String,
    pub rig: String,
    pub payload: String,
    pub rail_length_m: f64,
    pub zero_mark_x_m: f64,
    pub brake_x_m: f64,
    pub incline_deg: f64,
    pub limit_tension_n: f64,
    pub limit_peak_g: f64,
    /// What the proof load of the airframe allows, with its margin; none where none is recorded.
    #[serde(default)]
    pub proof_limit_g: Option<f64>,
    /// That proof load as a sentence.
    #[serde(default)]
    pub proof_load: Option<String>,
    pub plan_draw_m: f64,
    pub plan_speed_min_mps: f64,
    pub plan_speed_max_mps: f64,
    pub slack_tension_n: f64,
    /// Planned tension against draw: (draw m, low N, planned N, high N), growing draw.
    pub plan_band: Vec<(f64, f64, f64, f64)>,
}

/// Something that happened, at once.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
pub struct Event {
    pub host_ns: i64,
    /// `phase`, `alarm`, `link`, `trial`, `seal`, `mark`, `note`, `journal`, …
    pub kind: String,
    pub source: String,
    pub person: Option<String>,
    pub text: String,
}

/// Client to daemon.
#[derive(Debug, Clone, PartialEq, Serialize, Deserialize)]
#[serde(tag = "type", rename_all = "snake_case", deny_unknown_fields)]
pub enum Command {
    Mark {
        id: u64,
        person: String,
        text: String,
    },
    /// `back_s`: how far the trial reaches back, if not as far as one that opens by itself.
    Open {
        id: u64,
        person: String,
        #[serde(default, skip_serializing_if = "Option::is_none")]
        back_s: Option<f64>,
    },
    Close {
        id: u64,
        person: String,
    },
    Acknowledge {
        id: u64,
        person: String,
    },
    /// Tell a channel's counts for the next ten seconds.
    Raw {
        id: u64,
        person: String,
        channel: String,
    },
    /// Set a cell's zero where it stands.
    Tare {
        id: u64,
        person: String,
        channel: String,
    },
}

impl Command {
    /// The number that the reply repeats.
    pub const fn id(&self) -> u64 {
        match self {
            Self::Mark { id, .. }
            | Self::Open { id, .. }
            | Self::Close { id, .. }
            | Self::Acknowledge { id, .. }
            | Self::Raw { id, .. }
            | Self::Tare { id, .. } => *id,
        }
    }

    /// Who sends it.
    pub fn person(&self) -> &str {
        match self {
            Self::Mark { person, .. }
            | Self::Open { person, .. }
            | Self::Close { person, .. }
            | Self::Acknowledge { person, .. }
            | Self::Raw { person, .. }
            | Self::Tare { person, .. } => person,
        }
    }
}
