//! What a rig file says of a device that prints lines of text, and of its serial settings.

use crate::units::Unit;

/// Bits on the line beside the baud rate.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub struct SerialSettings {
    /// 5 to 8.
    pub data_bits: u8,
    pub parity: Parity,
    /// 1 or 2.
    pub stop_bits: u8,
}

#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Parity {
    None,
    Even,
    Odd,
}

impl Parity {
    pub const ALL: [Self; 3] = [Self::None, Self::Even, Self::Odd];

    /// The word used in rig files.
    pub const fn word(self) -> &'static str {
        match self {
            Self::None => "none",
            Self::Even => "even",
            Self::Odd => "odd",
        }
    }
}

impl Default for SerialSettings {
    /// Eight bits, no parity, one stop bit.
    fn default() -> Self {
        Self { data_bits: 8, parity: Parity::None, stop_bits: 1 }
    }
}

impl SerialSettings {
    /// Time that one byte takes on the line.
    pub fn byte_s(&self, baud: u32) -> f64 {
        let bits = 1 + self.data_bits + self.stop_bits + u8::from(self.parity != Parity::None);
        f64::from(bits) / f64::from(baud.max(1))
    }
}

/// An indicator or board that prints a reading a line.
#[derive(Debug, Clone, PartialEq)]
pub struct TextInstrument {
    pub cut: LineCut,
    pub decimal_comma: bool,
    pub columns: Vec<TextColumn>,
    /// `None`: lines carry no time, so that their arrival must do.
    pub time: Option<TextTime>,
    /// Lines after the port was opened that are no readings.
    pub header_lines: u32,
    /// Lines that begin so are no readings.
    pub skip_prefix: Option<String>,
    /// Between two readings: the instrument's own, or between two polls.
    pub interval_s: f64,
    /// Sent when the port was opened, and again while nothing comes.
    pub start: Option<String>,
    /// Sent at every interval; the instrument answers with a line.
    pub poll: Option<String>,
    /// By how much a reading is later than what it shows.
    pub delay_s: f64,
    pub bandwidth_hz: Option<f64>,
    /// Standard uncertainty of a line's arrival as the time of its reading, where the crew knows it.
    pub arrival_uncertainty_s: Option<f64>,
}

/// A value counts until this many intervals have passed without the next.
pub const SILENT_INTERVALS: f64 = 3.0;
/// An instrument that is slower is never known to be fresh: two seconds without a reading are silence, whatever the
/// instrument.
pub const LONGEST_INTERVAL_S: f64 = 2.0 / SILENT_INTERVALS;

/// How a line comes apart.
#[derive(Debug, Clone, PartialEq, Eq)]
pub enum LineCut {
    /// At each of these characters, into this many fields.
    At { separator: char, n_fields: usize },
    /// At runs of spaces and tabs, into this many fields.
    Spaces { n_fields: usize },
    /// A regular expression that compiles; its groups have the columns' names, and "time".
    Pattern(String),
}

/// One number of a line.
#[derive(Debug, Clone, PartialEq)]
pub struct TextColumn {
    pub name: String,
    /// From 1; 0 with a pattern, whose group has the column's name.
    pub field: usize,
    /// What is printed; `None` for plain counts.
    pub unit: Option<&'static Unit>,
    /// Where it is another than the instrument's.
    pub delay_s: Option<f64>,
    pub bandwidth_hz: Option<f64>,
    /// Printed numbers at which the sensor saturates.
    pub least: Option<f64>,
    pub greatest: Option<f64>,
}

/// The device's own time in its lines.
#[derive(Debug, Clone, Copy, PartialEq)]
pub struct TextTime {
    /// From 1; 0 with a pattern.
    pub field: usize,
    pub unit_s: f64,
    /// Where the printed number begins again at 0, in its unit.
    pub wrap: Option<f64>,
}

/// Name of the pattern's group that holds the device's time.
pub const TIME_GROUP: &str = "time";
