//! A host for tests: takes a device's bytes apart with the protocol crate.

#![allow(clippy::expect_used, reason = "a test that cannot go on stops here")]

use firmware_protocol::{Deframed, Deframer, MAX_COBS_LEN, Message, decode};
use std::collections::BTreeMap;
use virtual_rig::performance::{Options, Performance, prepare};
use virtual_rig::play::virtual_time::{Delivered, Delivery, VirtualPlay};
use virtual_rig::truth::{DeviceTruth, Truth};

/// A block that came whole.
#[derive(Debug, Clone, PartialEq)]
pub struct Came {
    pub host_ns: i64,
    pub boot_id: u32,
    pub description_id: u16,
    pub sequence: u32,
    pub first_index: u64,
    pub tick: u64,
    pub n_samples: u16,
    pub crc: u32,
    pub samples: Vec<u8>,
}

/// What one device's bytes turned into.
#[derive(Debug, Default)]
pub struct Heard {
    pub blocks: Vec<Came>,
    pub device_ids: Vec<u64>,
    pub edges: Vec<firmware_protocol::Edge>,
    pub n_refused: usize,
}

/// Takes reads of one device apart.
pub fn heard<'a>(reads: impl IntoIterator<Item = (i64, &'a [u8])>) -> Heard {
    let mut buffer = vec![0; MAX_COBS_LEN];
    let mut deframer = Deframer::new(&mut buffer);
    let mut heard = Heard::default();
    for (host_ns, mut bytes) in reads {
        while let Some(piece) = deframer.next_piece(&mut bytes) {
            let Deframed::Frame(cobs) = piece else {
                heard.n_refused += 1;
                continue;
            };
            let Ok(frame) = decode(cobs) else {
                heard.n_refused += 1;
                continue;
            };
            match frame.message {
                Message::Describe(describe) => heard.device_ids.push(describe.device_id),
                Message::Edge(edge) => heard.edges.push(edge),
                Message::Block(block) => heard.blocks.push(Came {
                    host_ns,
                    boot_id: frame.header.boot_id,
                    description_id: frame.header.description_id,
                    sequence: frame.header.sequence,
                    first_index: block.first_index,
                    tick: block.tick,
                    n_samples: block.n_samples,
                    crc: frame.crc,
                    samples: block.samples.to_vec(),
                }),
                _ => {}
            }
        }
    }
    heard
}

/// A trial played in virtual time, taken apart.
#[derive(Debug)]
pub struct Trial {
    pub performance: Performance,
    pub deliveries: Vec<Delivery>,
    pub truth: Truth,
    pub heard: BTreeMap<&'static str, Heard>,
}

impl Trial {
    pub fn heard(&self, device: &str) -> &Heard {
        self.heard.get(device).expect("the rig has this device")
    }

    pub fn device(&self, device: &str) -> &DeviceTruth {
        self.truth.devices.iter().find(|truth| truth.name == device).expect("the truth has this device")
    }

    /// Second of the scenario.
    pub fn scenario_s(&self, host_ns: i64) -> f64 {
        (host_ns - self.truth.scenario_zero_host_ns) as f64 * 1e-9
    }

    pub fn release_s(&self) -> f64 {
        self.performance.release_s().expect("the trial has a release")
    }
}

/// Plays the nominal scenario, quickly, with `faults`.
pub fn trial(faults: &[&str], change: impl FnOnce(&mut Options)) -> Trial {
    let faults = faults.iter().map(|text| text.parse().expect("a fault")).collect();
    let mut options = Options { pace: 0.15, faults, ..Options::default() };
    change(&mut options);
    let performance = prepare(&options).expect("a performance");
    let mut play = VirtualPlay::new(&performance).expect("a frame");
    let deliveries: Vec<Delivery> = play.by_ref().map(|delivery| delivery.expect("a frame")).collect();
    let truth = play.truth();
    let mut taken = BTreeMap::new();
    for (idx, device) in performance.devices.iter().enumerate() {
        let reads = deliveries.iter().filter_map(|delivery| match &delivery.what {
            Delivered::Bytes(bytes) if delivery.device == idx => Some((delivery.host_ns, &bytes[..])),
            _ => None,
        });
        taken.insert(device.name, heard(reads));
    }
    Trial { truth, heard: taken, deliveries, performance }
}
