//! Faults of lines, devices and sensors, composable with any scenario.
//!
//! Written `DEVICE:KIND[=VALUE][@START[+DURATION]]`; DEVICE is a device's name or `all`, START is in seconds of the
//! scenario, or `r` and seconds from its release (`r-2.5`). Without START the fault is there all the time.

use crate::performance::Performance;
use std::fmt;
use std::str::FromStr;

#[derive(Debug, Clone, PartialEq)]
pub struct Fault {
    /// `None` for every device.
    pub device: Option<String>,
    pub kind: FaultKind,
    pub value: f64,
    pub start: Start,
    pub duration_s: f64,
}

#[derive(Debug, Clone, Copy, PartialEq)]
pub enum Start {
    Always,
    At { t_s: f64 },
    FromRelease { after_s: f64 },
}

/// What goes wrong; the value's meaning in brackets.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum FaultKind {
    /// Bits flip (probability per bit).
    BitErrors,
    /// Bytes vanish (probability per byte).
    LostBytes,
    /// Bytes come twice (probability per byte).
    RepeatedBytes,
    /// Nothing passes for the duration, then all of it.
    Stall,
    /// Bytes come in USB packets: when 62 are there, or after a timer (ms).
    Batch,
    /// The cable is out for the duration.
    CablePull,
    /// The device loses power for the duration and boots anew.
    Reboot,
    /// One block carries a wrong tick (ticks too many).
    TickGlitch,
    /// The clock runs fast (ppm).
    Drift,
    /// The clock's rate swings (amplitude in ppm, period 20 s).
    Wander,
    /// Random bytes at 1 Mbit/s between the frames.
    Garbage,
    /// One frame longer than the protocol allows (bytes).
    Oversize,
    /// The device states the first device's id.
    DuplicateId,
    /// The device describes itself anew, with other channel delays.
    ChangedDescription,
    /// The encoder loses its place (counts).
    EncoderSlip,
    /// The encoder stands still for the duration.
    EncoderDropout,
}

const KINDS: [(&str, FaultKind); 16] = [
    ("bit-errors", FaultKind::BitErrors),
    ("lost-bytes", FaultKind::LostBytes),
    ("repeated-bytes", FaultKind::RepeatedBytes),
    ("stall", FaultKind::Stall),
    ("batch", FaultKind::Batch),
    ("cable-pull", FaultKind::CablePull),
    ("reboot", FaultKind::Reboot),
    ("tick-glitch", FaultKind::TickGlitch),
    ("drift", FaultKind::Drift),
    ("wander", FaultKind::Wander),
    ("garbage", FaultKind::Garbage),
    ("oversize", FaultKind::Oversize),
    ("duplicate-id", FaultKind::DuplicateId),
    ("changed-description", FaultKind::ChangedDescription),
    ("encoder-slip", FaultKind::EncoderSlip),
    ("encoder-dropout", FaultKind::EncoderDropout),
];

impl FaultKind {
    pub fn word(self) -> &'static str {
        KINDS.iter().find(|(_, kind)| *kind == self).map_or("", |(word, _)| word)
    }
}

#[derive(Debug, Clone, PartialEq, thiserror::Error)]
#[non_exhaustive]
pub enum FaultError {
    #[error("`{text}` is no fault: write DEVICE:KIND[=VALUE][@START[+DURATION]], such as winch-node:stall@r-3+2")]
    NoDevice { text: String },
    #[error("there is no fault `{found}`; the rig knows: {known}")]
    NoSuchKind { found: String, known: String },
    #[error("`{found}` in fault `{text}` is not a number")]
    NotANumber { found: String, text: String },
    #[error("fault `{text}`: {} must have a start, such as @r-3+2", .kind.word())]
    NoStart { text: String, kind: FaultKind },
}

impl FromStr for Fault {
    type Err = FaultError;

    fn from_str(text: &str) -> Result<Self, Self::Err> {
        let (device, rest) = text.split_once(':').ok_or_else(|| FaultError::NoDevice { text: text.into() })?;
        let number = |found: &str| {
            let parsed = found.parse::<f64>().ok().filter(|number| number.is_finite());
            parsed.ok_or_else(|| FaultError::NotANumber { found: found.into(), text: text.into() })
        };
        let (what, when) = rest.split_once('@').map_or((rest, None), |(what, when)| (what, Some(when)));
        let (word, value) = what.split_once('=').map_or((what, None), |(word, value)| (word, Some(value)));
        let kind = KINDS.iter().find(|(known, _)| *known == word).map(|(_, kind)| *kind).ok_or_else(|| {
            let known = KINDS.iter().map(|(word, _)| *word).collect::<Vec<_>>().join(", ");
            FaultError::NoSuchKind { found: word.into(), known }
        })?;
        let (start, duration_s) = match when {
            None => (Start::Always, 0.0),
            Some(when) => {
                let (start, duration) = when.split_once('+').map_or((when, None), |(start, end)| (start, Some(end)));
                let start = match start.strip_prefix('r') {
                    Some("") => Start::FromRelease { after_s: 0.0 },
                    Some(after) => Start::FromRelease { after_s: number(after)? },
                    None => Start::At { t_s: number(start)? },
                };
                (start, duration.map(number).transpose()?.unwrap_or(0.0))
            }
        };
        if kind.needs_start() && start == Start::Always {
            return Err(FaultError::NoStart { text: text.into(), kind });
        }
        let value = value.map(number).transpose()?.unwrap_or(kind.usual_value());
        let device = (device != "all").then(|| device.to_owned());
        Ok(Self { device, kind, value, start, duration_s })
    }
}

impl FaultKind {
    fn needs_start(self) -> bool {
        use FaultKind::*;
        matches!(
            self,
            Stall
                | CablePull
                | Reboot
                | TickGlitch
                | Garbage
                | Oversize
                | ChangedDescription
                | EncoderSlip
                | EncoderDropout
        )
    }

    fn usual_value(self) -> f64 {
        match self {
            Self::BitErrors | Self::LostBytes | Self::RepeatedBytes => 1e-5,
            Self::Batch => 16.0,
            Self::TickGlitch => 5000.0,
            Self::Drift => 200.0,
            Self::Wander => 2.0,
            Self::Oversize => 6000.0,
            Self::EncoderSlip => 40.0,
            _ => 0.0,
        }
    }
}

impl fmt::Display for Fault {
    fn fmt(&self, f: &mut fmt::Formatter<'_>) -> fmt::Result {
        write!(f, "{}:{}={}", self.device.as_deref().unwrap_or("all"), self.kind.word(), self.value)?;
        match self.start {
            Start::Always => return Ok(()),
            Start::At { t_s } => write!(f, "@{t_s}")?,
            Start::FromRelease { after_s } => write!(f, "@r{after_s}")?,
        }
        write!(f, "+{}", self.duration_s)
    }
}

/// A fault of one device with its times in seconds of the scenario; without a start it lasts for ever.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct Timed {
    pub kind: FaultKind,
    pub value: f64,
    pub from_s: f64,
    pub to_s: f64,
}

impl Timed {
    pub fn holds_at(&self, t_s: f64) -> bool {
        t_s >= self.from_s && t_s < self.to_s
    }
}

/// The faults of device `name`, with times. A start from the release of a trial that has none counts from its end.
pub fn of_device(name: &str, performance: &Performance) -> Vec<Timed> {
    let release_s = performance.release_s().unwrap_or(performance.end_s);
    let concerned = |fault: &&Fault| fault.device.as_deref().is_none_or(|device| device == name);
    let timed = |fault: &Fault| {
        let (from_s, to_s) = match fault.start {
            Start::Always => (f64::NEG_INFINITY, f64::INFINITY),
            Start::At { t_s } => (t_s, t_s + fault.duration_s),
            Start::FromRelease { after_s } => (release_s + after_s, release_s + after_s + fault.duration_s),
        };
        Timed { kind: fault.kind, value: fault.value, from_s, to_s }
    };
    performance.options.faults.iter().filter(concerned).map(timed).collect()
}
