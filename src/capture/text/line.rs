//! One line of text to numbers, and a byte stream to lines. Knows nothing of devices, so that it can be fuzzed alone.
//!
//! Guarantees: every byte of a stream that ends no line is handed out exactly once, in a line or as junk; no bytes cause
//! a panic; matching takes time in proportion to the line. Refuses: a line with more or fewer fields than expected, a
//! field that is no finite decimal number, bytes that are no UTF-8.

use regex::Regex;

/// A longer line is no line.
pub const LINE_LEN_MAX: usize = 512;

/// Why a line is refused.
pub type Refusal = &'static str;

pub const NOT_TEXT: Refusal = "line is not text";
pub const OTHER_FIELDS: Refusal = "line has other fields than expected";
pub const NO_MATCH: Refusal = "line does not match the pattern";
pub const NO_NUMBER: Refusal = "field is no number";

/// How a line comes apart.
#[derive(Debug, Clone)]
pub enum Cut {
    /// At each of these characters.
    At(char),
    /// At every run of spaces and tabs.
    Spaces,
    Pattern(Regex),
}

/// Which numbers of a line are wanted, and how they are written.
#[derive(Debug, Clone)]
pub struct LineReader {
    pub cut: Cut,
    /// Fields that a line must have; not looked at with a pattern.
    pub n_fields: usize,
    /// Field numbers from 0, or numbers of the pattern's groups.
    pub values: Vec<usize>,
    pub time: Option<usize>,
    pub decimal_comma: bool,
}

/// The numbers of one line.
#[derive(Debug, Clone, PartialEq)]
pub struct LineRead {
    pub values: Vec<f32>,
    pub time: Option<f64>,
}

impl LineReader {
    /// # Errors
    /// The reason for which the line is refused.
    pub fn read(&self, line: &[u8]) -> Result<LineRead, Refusal> {
        let line = std::str::from_utf8(line).map_err(|_| NOT_TEXT)?;
        // Some indicators put STX and ETX round a line; a separator at its ends says that a field is empty.
        let separates = |letter: char| matches!(self.cut, Cut::At(separator) if separator == letter);
        let line = line.trim_matches(|letter: char| (letter.is_control() || letter == ' ') && !separates(letter));
        match &self.cut {
            Cut::At(separator) => self.of_fields(&line.split(*separator).collect::<Vec<_>>()),
            Cut::Spaces => self.of_fields(&line.split_ascii_whitespace().collect::<Vec<_>>()),
            Cut::Pattern(pattern) => {
                let groups = pattern.captures(line).ok_or(NO_MATCH)?;
                self.numbers(|place| groups.get(place).map(|group| group.as_str()))
            }
        }
    }

    fn of_fields(&self, fields: &[&str]) -> Result<LineRead, Refusal> {
        if fields.len() != self.n_fields {
            return Err(OTHER_FIELDS);
        }
        self.numbers(|place| fields.get(place).copied())
    }

    fn numbers<'l>(&self, field: impl Fn(usize) -> Option<&'l str>) -> Result<LineRead, Refusal> {
        let number = |place: &usize| field(*place).and_then(|text| self.number(text)).ok_or(NO_NUMBER);
        let values = self.values.iter().map(|place| Ok(number(place)? as f32));
        let values: Vec<f32> = values.collect::<Result<_, Refusal>>()?;
        if values.iter().any(|value| !value.is_finite()) {
            return Err(NO_NUMBER);
        }
        Ok(LineRead { values, time: self.time.as_ref().map(number).transpose()? })
    }

    /// A decimal number: sign (spaces may follow it), digits, decimal mark, exponent. No "inf", no "nan".
    fn number(&self, text: &str) -> Option<f64> {
        let text = text.trim();
        let (sign, digits) = match text.as_bytes().first()? {
            b'-' => (-1.0, text[1..].trim_start()),
            b'+' => (1.0, text[1..].trim_start()),
            _ => (1.0, text),
        };
        let (mark, other) = if self.decimal_comma { (',', '.') } else { ('.', ',') };
        if !digits.starts_with(|first: char| first.is_ascii_digit() || first == mark) || digits.contains(other) {
            return None;
        }
        let value: f64 = if self.decimal_comma { digits.replace(',', ".").parse() } else { digits.parse() }.ok()?;
        value.is_finite().then_some(sign * value)
    }
}

/// A part of a byte stream.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Piece<'p> {
    /// Without its end; never empty.
    Line(&'p [u8]),
    /// Too long for a line; the rest of it follows as more junk.
    Junk(&'p [u8]),
}

/// Cuts a byte stream at line feeds and carriage returns. Empty lines vanish.
#[derive(Debug, Clone, Default)]
pub struct LineSplitter {
    partial: Vec<u8>,
    in_junk: bool,
}

impl LineSplitter {
    pub fn feed(&mut self, bytes: &[u8], sink: &mut impl FnMut(Piece<'_>)) {
        for &byte in bytes {
            match byte {
                b'\n' | b'\r' => self.end(sink),
                _ => self.push(byte, sink),
            }
        }
    }

    fn push(&mut self, byte: u8, sink: &mut impl FnMut(Piece<'_>)) {
        self.partial.push(byte);
        if self.partial.len() > LINE_LEN_MAX {
            self.in_junk = true;
            sink(Piece::Junk(&self.partial));
            self.partial.clear();
        }
    }

    fn end(&mut self, sink: &mut impl FnMut(Piece<'_>)) {
        if !self.partial.is_empty() {
            sink(if self.in_junk { Piece::Junk(&self.partial) } else { Piece::Line(&self.partial) });
        }
        self.partial.clear();
        self.in_junk = false;
    }

    /// What came since the last line's end; the next byte begins a line.
    pub fn take_partial(&mut self) -> Vec<u8> {
        self.in_junk = false;
        std::mem::take(&mut self.partial)
    }
}
