//! Devices that print lines of text: what they say, and what they listen to.

use super::catalogue::TextStyle;
use super::{BlockTruth, Device, Outgoing, Request};
use crate::physics::trajectory::Row;
use crate::sensor::ChannelSpec;

impl Device {
    /// Takes a byte from the host; gives what a whole line of it asks for.
    pub(super) fn hear_text(&mut self, byte: u8) -> Option<Request> {
        let text = self.spec.text?;
        if byte != b'\n' {
            if self.input.len() < super::REQUEST_LEN_MAX {
                self.input.push(byte);
            }
            return None;
        }
        let line = std::mem::take(&mut self.input);
        let asked = |word: Option<&str>| word.is_some_and(|word| word.as_bytes() == line.trim_ascii());
        match () {
            () if asked(text.start) => Some(Request::Start),
            () if asked(text.poll) => Some(Request::Poll),
            () => None,
        }
    }

    /// The header that a board prints when it starts.
    pub(super) fn header(&mut self) {
        let header = self.spec.text.and_then(|text| text.header);
        self.queue.extend(header.map(|header| Outgoing { bytes: header.as_bytes().to_vec(), block: None }));
    }

    /// Answers a poll that came at `host_ns` with the latest reading; the ones between polls are never said.
    pub fn poll(&mut self, host_ns: i64, rig_at: impl Fn(f64) -> Row) -> Option<Outgoing> {
        self.start(host_ns);
        let mut latest = None;
        while self.running && self.block_due_ns()? <= host_ns {
            latest = Some(self.line(&rig_at));
        }
        latest
    }

    /// The next reading as a line.
    pub(super) fn line(&mut self, rig_at: &impl Fn(f64) -> Row) -> Outgoing {
        let index = self.next_index;
        self.next_index += 1;
        let counts = self.counts_at(index, rig_at);
        let tick = self.tick_of(index).saturating_add_signed(self.glitch_ticks(index));
        let style = self.spec.text.map(|text| text.style);
        let line = style.map(|style| printed(style, &self.channels, &counts, tick)).unwrap_or_default();
        let sequence = self.block_sequence;
        self.block_sequence = sequence.wrapping_add(1);
        let (boot_id, crc) = (self.now().boot_id, crc32c::crc32c(line.as_bytes()));
        let block = BlockTruth { boot_id, sequence, first_index: index, n_samples: 1, crc };
        Outgoing { bytes: format!("{line}\r\n").into_bytes(), block: Some(block) }
    }
}

fn printed(style: TextStyle, channels: &[ChannelSpec], counts: &[i32], tick: u64) -> String {
    let value = |place: usize, unit: f64| {
        let (channel, counts) = (&channels[place], f64::from(counts[place]));
        (counts - channel.zero_counts) * channel.scale / unit
    };
    match style {
        TextStyle::Indicator => {
            let kgf = value(0, crate::launcher::STANDARD_GRAVITY_MPS2);
            let sign = if kgf < 0.0 { '-' } else { '+' };
            format!("ST,{sign}{:8.2} kg", kgf.abs())
        }
        TextStyle::Polled => format!("{:+08.1}", value(0, 1.0)),
        TextStyle::Board => {
            let printed_us = tick & u64::from(u32::MAX);
            let (mm, g) = (value(0, 1e-3), value(1, crate::launcher::STANDARD_GRAVITY_MPS2));
            format!("{printed_us},{mm:.1},{g:.4}")
        }
    }
}
