//! The decoder that a device of the rig needs.

use super::decoder::{Counters, FrameDecoder};
use super::sample::{Captured, DeviceDescription, HostNs};
use super::text::TextDecoder;
use crate::rig::{Device, Protocol};

/// Decodes one device's bytes, whatever it speaks.
#[derive(Debug)]
pub struct DeviceDecoder {
    speaks: Speaks,
}

#[derive(Debug)]
enum Speaks {
    Frames(Box<FrameDecoder>),
    Text(Box<TextDecoder>),
}

impl Default for DeviceDecoder {
    fn default() -> Self {
        Self::new()
    }
}

impl DeviceDecoder {
    /// For frames.
    pub fn new() -> Self {
        Self { speaks: Speaks::Frames(Box::default()) }
    }

    /// For a device as the rig file describes it.
    pub fn of(device: &Device) -> Self {
        match &device.protocol {
            Protocol::Frames => Self::new(),
            Protocol::Text(instrument) => Self { speaks: Speaks::Text(Box::new(TextDecoder::new(device, instrument))) },
        }
    }

    /// Takes the bytes of one read, stamped `host_ns`; hands on what they complete, in order. A text device describes
    /// itself at the first call, whatever the bytes.
    pub fn feed(&mut self, host_ns: HostNs, bytes: &[u8], sink: &mut impl FnMut(Captured)) {
        match &mut self.speaks {
            Speaks::Frames(decoder) => decoder.feed(host_ns, bytes, sink),
            Speaks::Text(decoder) => decoder.feed(host_ns, bytes, sink),
        }
    }

    /// The bytes to come do not follow the ones before: the link was lost, or is up again, or bytes were dropped. What was
    /// unfinished is rejected; indices go on when the same boot comes back.
    pub fn link_lost(&mut self, host_ns: HostNs, sink: &mut impl FnMut(Captured)) {
        match &mut self.speaks {
            Speaks::Frames(decoder) => decoder.link_lost(host_ns, sink),
            Speaks::Text(decoder) => decoder.link_lost(host_ns, sink),
        }
    }

    /// What was fed so far only told what the device is: counts and sequences begin with what follows.
    pub fn start_here(&mut self) {
        if let Speaks::Frames(decoder) = &mut self.speaks {
            decoder.start_here();
        }
    }

    /// The description in force; `None` before the first and after a boot that was not described yet.
    pub fn description(&self) -> Option<&DeviceDescription> {
        match &self.speaks {
            Speaks::Frames(decoder) => decoder.description(),
            Speaks::Text(decoder) => Some(decoder.description()),
        }
    }

    pub fn counters(&self) -> &Counters {
        match &self.speaks {
            Speaks::Frames(decoder) => decoder.counters(),
            Speaks::Text(decoder) => decoder.counters(),
        }
    }
}
