//! Plays a range of a journal: records in order, each device's bytes decoded.
//!
//! What lies before the range is lead-in: it brings the decoders in step and tells the descriptions in force, and
//! nothing else of it is handed on. Memory: one record and what it decodes to.

use crate::capture::{Captured, DeviceDecoder, DeviceDescription, N_DESCRIPTIONS};
use crate::journal::{Body, Clocks, Damage, EventBody, Item, JournalReader, Record, SegmentOpen, TrialRange};
use crate::link::{DeviceIdx, LinkWhat, Lost};

use super::error::SealError;

/// Something a journal range tells.
#[derive(Debug)]
pub(super) enum Told {
    /// A segment begins: rig text and devices as of now. The first of a range comes before everything else.
    Opening {
        host_ns: i64,
        open: Box<SegmentOpen>,
    },
    /// A description that was in force when the range began.
    Known(DeviceIdx, DeviceDescription),
    /// One read; what it decodes to comes before it.
    Read {
        device: DeviceIdx,
        host_ns: i64,
        n_bytes: u64,
        /// Frames that the sequence numbers show to be lost, told by this read.
        n_lost_frames: u64,
    },
    Captured(DeviceIdx, Captured),
    TimeRequested {
        device: DeviceIdx,
        host_ns: i64,
        token: u32,
    },
    /// Up or down, in words.
    Link {
        device: DeviceIdx,
        host_ns: i64,
        text: String,
        /// The port was lost, or could not be opened.
        down: bool,
    },
    Clocks(Clocks),
    Event {
        host_ns: i64,
        event: EventBody,
    },
    Lost {
        device: DeviceIdx,
        host_ns: i64,
        lost: Lost,
    },
    Damage {
        /// Of the last record before it.
        host_ns: i64,
        damage: Damage,
    },
}

struct DevicePlayer {
    decoder: DeviceDecoder,
    /// The descriptions that blocks may name at the range's start, until they were handed on; the last one is in force.
    known: Vec<DeviceDescription>,
    n_lost_frames: u64,
}

impl DevicePlayer {
    fn learn(&mut self, description: DeviceDescription) {
        self.known
            .retain(|known| known.boot_id == description.boot_id && known.description_id != description.description_id);
        if self.known.len() == N_DESCRIPTIONS {
            self.known.remove(0);
        }
        self.known.push(description);
    }
}

struct Player<'s> {
    range: &'s TrialRange,
    devices: Vec<DevicePlayer>,
    heard: Vec<Captured>,
    host_ns: i64,
    begun: bool,
    tell: &'s mut dyn FnMut(Told) -> Result<(), SealError>,
}

/// Plays `range`, handing everything to `tell` in order.
pub(super) fn play(
    reader: &JournalReader,
    range: &TrialRange,
    tell: &mut dyn FnMut(Told) -> Result<(), SealError>,
) -> Result<(), SealError> {
    let mut player =
        Player { range, devices: Vec::new(), heard: Vec::new(), host_ns: range.first_host_ns, begun: false, tell };
    for item in reader.records_from(range.first_seq) {
        match item? {
            Item::Opening { host_ns, open } => player.opening(host_ns, open)?,
            Item::Damage(damage) if player.begun => {
                let host_ns = player.host_ns;
                (player.tell)(Told::Damage { host_ns, damage })?;
            }
            Item::Damage(_) => {}
            Item::Record(record) if record.seq > range.last_seq => break,
            Item::Record(record) => player.record(record)?,
        }
    }
    player.end()
}

impl Player<'_> {
    fn opening(&mut self, host_ns: i64, open: Box<SegmentOpen>) -> Result<(), SealError> {
        while self.devices.len() < open.devices.len() {
            let device = &open.devices[self.devices.len()];
            let decoder = decoder_of(&open.rig_text, &device.name);
            let mut player = DevicePlayer { decoder, known: Vec::new(), n_lost_frames: 0 };
            let mut known = Vec::new();
            // A device that speaks text describes itself by the rig file, without any bytes.
            player.decoder.feed(host_ns, &device.describe().unwrap_or_default(), &mut |captured| {
                if let Captured::Description(description) = captured {
                    known.push(description);
                }
            });
            known.into_iter().for_each(|description| player.learn(description));
            player.decoder.start_here();
            self.devices.push(player);
        }
        (self.tell)(Told::Opening { host_ns, open })
    }

    fn record(&mut self, record: Record) -> Result<(), SealError> {
        let Record { seq, host_ns, device, body } = record;
        let within = seq >= self.range.first_seq;
        if within {
            self.begin()?;
            self.host_ns = host_ns;
        }
        let of_a_device = matches!(body, Body::Link(_) | Body::Lost(_));
        if of_a_device && usize::from(device.0) >= self.devices.len() {
            return if within { self.unknown_device(host_ns, device) } else { Ok(()) };
        }
        if let Body::Link(what) = &body {
            self.decode(host_ns, device, what);
            self.hand_on(device, within)?;
        }
        if let Body::Lost(_) = &body {
            self.break_off(host_ns, device);
            self.hand_on(device, within)?;
        }
        if !within {
            return Ok(());
        }
        match body {
            Body::Link(LinkWhat::TimeRequested { token }) => {
                (self.tell)(Told::TimeRequested { device, host_ns, token })
            }
            Body::Link(LinkWhat::Up { path, baud }) => (self.tell)(Told::Link {
                device,
                host_ns,
                text: format!("link up: {path} at {baud} baud"),
                down: false,
            }),
            Body::Link(LinkWhat::Down { reason }) => {
                (self.tell)(Told::Link { device, host_ns, text: format!("link down: {reason}"), down: true })
            }
            Body::Link(LinkWhat::Note { text }) => {
                (self.tell)(Told::Link { device, host_ns, text: format!("link note: {text}"), down: false })
            }
            Body::Clocks(clocks) => (self.tell)(Told::Clocks(clocks)),
            Body::Event(event) => (self.tell)(Told::Event { host_ns, event }),
            Body::TrialOpen(open) => {
                let goes_on =
                    open.continues.map(|earlier| format!("; it goes on under the tension of trial {earlier}"));
                let text = format!("opened: {}{}", open.reason, goes_on.unwrap_or_default());
                self.trial_event(host_ns, open.person, text)
            }
            Body::TrialClose(close) => self.trial_event(host_ns, close.person, format!("closed: {}", close.reason)),
            Body::Lost(lost) => (self.tell)(Told::Lost { device, host_ns, lost }),
            Body::Link(LinkWhat::Bytes(bytes)) => {
                let n_lost_frames = self.newly_lost(device);
                (self.tell)(Told::Read { device, host_ns, n_bytes: bytes.len() as u64, n_lost_frames })
            }
            Body::Heartbeat | Body::SegmentOpen(_) | Body::Unknown { .. } => Ok(()),
        }
    }

    fn unknown_device(&mut self, host_ns: i64, device: DeviceIdx) -> Result<(), SealError> {
        let (kind, source) = ("journal".to_owned(), "journal".to_owned());
        let text = format!("a record of device {}, which no segment names, was left out", device.0);
        (self.tell)(Told::Event { host_ns, event: EventBody { kind, source, person: None, text } })
    }

    fn trial_event(&mut self, host_ns: i64, person: String, text: String) -> Result<(), SealError> {
        let (kind, source) = ("trial".to_owned(), "daemon".to_owned());
        let person = Some(person).filter(|person| !person.is_empty());
        (self.tell)(Told::Event { host_ns, event: EventBody { kind, source, person, text } })
    }

    /// Hands on the descriptions in force, once, as the range begins.
    fn begin(&mut self) -> Result<(), SealError> {
        if self.begun {
            return Ok(());
        }
        self.begun = true;
        for (index, device) in self.devices.iter_mut().enumerate() {
            for description in std::mem::take(&mut device.known) {
                (self.tell)(Told::Known(DeviceIdx(index as u16), description))?;
            }
        }
        Ok(())
    }

    fn decode(&mut self, host_ns: i64, device: DeviceIdx, what: &LinkWhat) {
        let Some(player) = self.devices.get_mut(usize::from(device.0)) else { return };
        let heard = &mut self.heard;
        match what {
            LinkWhat::Bytes(bytes) => player.decoder.feed(host_ns, bytes, &mut |captured| heard.push(captured)),
            LinkWhat::Down { .. } => player.decoder.link_lost(host_ns, &mut |captured| heard.push(captured)),
            // After a crash there is no "down" before it.
            LinkWhat::Up { .. } => player.decoder.link_lost(host_ns, &mut |captured| heard.push(captured)),
            LinkWhat::TimeRequested { .. } | LinkWhat::Note { .. } => {}
        }
    }

    /// Bytes are missing here: what follows does not go on from what came before.
    fn break_off(&mut self, host_ns: i64, device: DeviceIdx) {
        let Some(player) = self.devices.get_mut(usize::from(device.0)) else { return };
        let heard = &mut self.heard;
        player.decoder.link_lost(host_ns, &mut |captured| heard.push(captured));
    }

    fn hand_on(&mut self, device: DeviceIdx, within: bool) -> Result<(), SealError> {
        for captured in self.heard.drain(..) {
            match captured {
                captured if within => (self.tell)(Told::Captured(device, captured))?,
                Captured::Description(description) => self.devices[usize::from(device.0)].learn(description),
                _ => {}
            }
        }
        if !within {
            self.newly_lost(device); // before the range
        }
        Ok(())
    }

    /// Lost frames since the last call.
    fn newly_lost(&mut self, device: DeviceIdx) -> u64 {
        let Some(player) = self.devices.get_mut(usize::from(device.0)) else { return 0 };
        let lost = player.decoder.counters().lost_frames;
        lost.saturating_sub(std::mem::replace(&mut player.n_lost_frames, lost))
    }

    /// The journal ended with the trial open: what its last reads left unfinished is kept as refused bytes.
    fn end(&mut self) -> Result<(), SealError> {
        if self.range.closed.is_some() {
            return Ok(());
        }
        for index in 0..self.devices.len() {
            let device = DeviceIdx(index as u16);
            self.decode(self.host_ns, device, &LinkWhat::Down { reason: String::new() });
            self.hand_on(device, true)?;
        }
        Ok(())
    }
}

/// By the rig file that was in force; where this program refuses it, everything is taken for frames.
fn decoder_of(rig_text: &str, name: &str) -> DeviceDecoder {
    let rig = crate::rig::parse(rig_text).ok();
    let device = rig.as_ref().and_then(|rig| rig.devices.iter().find(|device| device.name == name));
    device.map_or_else(DeviceDecoder::new, DeviceDecoder::of)
}
