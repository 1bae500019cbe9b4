//! Every line fault of the virtual rig, through our own decoders in virtual time: what is lost is said, and nothing else
//! is lost.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

#[path = "support/rehearsal_rig.rs"]
mod rehearsal_rig;

use std::collections::{BTreeMap, BTreeSet};
use std::sync::OnceLock;

use tautrail::capture::{
    Block, Captured, ClockPiece, ClockSamples, Counts, DeviceDecoder, DeviceDescription, Gap, Rejected, piece_at,
};
use virtual_rig::device::catalogue::SensorSet;
use virtual_rig::performance::{Options, Performance, prepare};
use virtual_rig::play::virtual_time::{Delivered, VirtualPlay};
use virtual_rig::truth::{DeviceTruth, Truth};

const WINCH: usize = 0;
const SHUTTLE: usize = 1;

/// What came out of one device's bytes.
struct Heard {
    decoder: DeviceDecoder,
    clock: ClockSamples,
    descriptions: Vec<DeviceDescription>,
    blocks: Vec<Block>,
    gaps: Vec<Gap>,
    rejected: Vec<Rejected>,
}

struct Trial {
    heard: Vec<Heard>,
    truth: Truth,
}

/// The nominal launch in a hurry, worked out once.
fn nominal(sensors: SensorSet) -> Performance {
    static FRAMES: OnceLock<Performance> = OnceLock::new();
    let once = || prepare(&Options { pace: 0.15, ..Options::default() }).unwrap();
    let mut performance = FRAMES.get_or_init(once).clone();
    performance.options.sensors = sensors;
    performance.devices = virtual_rig::device::catalogue::devices(sensors, false);
    performance
}

fn trial(fault: &str) -> Trial {
    trial_of(SensorSet::Basic, fault, |_| DeviceDecoder::new())
}

fn trial_of(sensors: SensorSet, fault: &str, decoder: impl Fn(usize) -> DeviceDecoder) -> Trial {
    let mut performance = nominal(sensors);
    performance.options.faults = fault.split_whitespace().map(|text| text.parse().unwrap()).collect();
    let mut play = VirtualPlay::new(&performance).unwrap();
    let mut heard: Vec<Heard> = (0..performance.devices.len()).map(|idx| Heard::new(decoder(idx))).collect();
    for delivery in play.by_ref() {
        let delivery = delivery.unwrap();
        heard[delivery.device].take(delivery.host_ns, delivery.what);
    }
    Trial { heard, truth: play.truth() }
}

impl Heard {
    fn new(decoder: DeviceDecoder) -> Self {
        let clock = ClockSamples::default();
        Self { decoder, clock, descriptions: vec![], blocks: vec![], gaps: vec![], rejected: vec![] }
    }

    fn take(&mut self, host_ns: i64, what: Delivered) {
        let Self { decoder, clock, descriptions, blocks, gaps, rejected } = self;
        let mut sink = |captured: Captured| {
            clock.captured(&captured);
            match captured {
                Captured::Description(description) => descriptions.push(description),
                Captured::Block(block) => blocks.push(block),
                Captured::Gap(gap) => gaps.push(gap),
                Captured::Rejected(refused) => rejected.push(refused),
                _ => {}
            }
        };
        match what {
            Delivered::Bytes(bytes) => decoder.feed(host_ns, &bytes, &mut sink),
            Delivered::Down | Delivered::Up => decoder.link_lost(host_ns, &mut sink),
            Delivered::TimeRequested { token } => clock.requested(host_ns, token),
        }
    }

    fn missing(&self) -> u64 {
        self.gaps.iter().map(|gap| gap.n_missing).sum()
    }

    fn reasons(&self) -> BTreeMap<&'static str, usize> {
        let mut reasons = BTreeMap::new();
        for refused in &self.rejected {
            *reasons.entry(refused.reason).or_default() += 1;
        }
        reasons
    }
}

impl Trial {
    fn device(&self, idx: usize) -> &DeviceTruth {
        &self.truth.devices[idx]
    }

    /// Places of the truth's blocks that were not heard. Whatever was heard is what was sent, in its order.
    #[track_caller]
    fn lost(&self, idx: usize) -> Vec<usize> {
        let sent = &self.device(idx).streams[0].blocks;
        let key = |block: &Block| (block.sequence, block.first_index, block.n_samples as u16, block.crc);
        let mut heard = self.heard[idx].blocks.iter().map(key).peekable();
        let mut lost = Vec::new();
        for (place, block) in sent.iter().enumerate() {
            if heard.next_if(|key| key == block).is_none() {
                lost.push(place);
            }
        }
        assert_eq!(heard.next(), None, "device {idx}: a block that was never sent, or out of order");
        lost
    }

    /// Nothing of the device is lost and nothing refused.
    #[track_caller]
    fn whole(&self, idx: usize) {
        assert_eq!(self.lost(idx), [0_usize; 0], "device {idx}");
        assert!(self.heard[idx].gaps.is_empty() && self.heard[idx].rejected.is_empty(), "device {idx}");
    }

    /// Greatest error of the sealed clock map at the blocks, against what it states (in standard uncertainties).
    fn clock_error(&self, idx: usize) -> f64 {
        let pieces: Vec<ClockPiece> = self.heard[idx].clock.fit();
        let clock = &self.device(idx).clock;
        let error = |block: &Block| {
            let piece = piece_at(&pieces, block.boot_id, block.sent_tick).unwrap();
            let true_ns = clock.epoch_host_ns as f64 + clock.since_epoch_ns(block.sent_tick);
            (piece.host_ns(block.sent_tick) - true_ns).abs() / piece.u_ns
        };
        self.heard[idx].blocks.iter().map(error).fold(0.0, f64::max)
    }
}

/// Damage costs the frames it touched, and the gaps say exactly how many samples those held.
#[track_caller]
fn check_damage(fault: &str) {
    let trial = trial(fault);
    for idx in [WINCH, SHUTTLE] {
        let (lost, stream) = (trial.lost(idx), &trial.device(idx).streams[0]);
        let touched: BTreeSet<usize> = stream.touched.iter().map(|place| *place as usize).collect();
        assert!(
            !touched.is_empty() && lost.iter().all(|place| touched.contains(place)),
            "{fault}: {lost:?} of {touched:?}"
        );
        let last = stream.blocks.len() - 1;
        // Lost blocks at the very start or end have no neighbour that could show the gap.
        let heard = &trial.heard[idx];
        let first_heard = (0..=last).find(|place| !lost.contains(place)).unwrap();
        let last_heard = (0..=last).rev().find(|place| !lost.contains(place)).unwrap();
        let shown = lost.iter().filter(|place| (first_heard..last_heard).contains(*place)).count() as u64;
        assert_eq!(heard.missing(), 100 * shown, "{fault}: the gaps say what is missing");
        assert!(heard.rejected.len() >= lost.len(), "{fault}: damaged bytes are kept");
        assert!(trial.clock_error(idx) < 3.0, "{fault}: the clock is led astray");
    }
}

#[test]
fn flipped_bits_cost_the_frames_they_touch() {
    check_damage("all:bit-errors=4e-6");
}

#[test]
fn lost_bytes_cost_the_frames_they_touch() {
    check_damage("all:lost-bytes=3e-5");
}

#[test]
fn repeated_bytes_cost_the_frames_they_touch() {
    check_damage("all:repeated-bytes=3e-5");
}

#[test]
fn a_stall_costs_nothing_and_the_clock_is_not_led_astray() {
    let trial = trial("winch-node:stall@r-0.8+0.6");
    trial.whole(WINCH);
    trial.whole(SHUTTLE);
    assert!(trial.clock_error(WINCH) < 3.0, "{}", trial.clock_error(WINCH));
}

#[test]
fn packets_by_a_timer_cost_nothing_and_widen_the_clock_honestly() {
    let trial = trial("all:batch=16");
    for idx in [WINCH, SHUTTLE] {
        trial.whole(idx);
        assert!(trial.clock_error(idx) < 3.0, "{}", trial.clock_error(idx));
    }
}

#[test]
fn a_pulled_cable_costs_one_gap_of_its_length() {
    let trial = trial("shuttle-node:cable-pull@r-0.7+0.5");
    trial.whole(WINCH);
    assert_eq!(trial.lost(SHUTTLE), [0_usize; 0], "what the line took was heard");
    let heard = &trial.heard[SHUTTLE];
    assert_eq!(heard.gaps.len(), 1);
    assert!((4_800..=5_300).contains(&heard.missing()), "{} samples in 0.5 s", heard.missing());
    let gap = heard.gaps[0];
    let before = heard.blocks.iter().rfind(|block| block.first_index < gap.first_missing_index).unwrap();
    assert_eq!(gap.first_missing_index, before.first_index + u64::from(before.n_samples));
}

#[test]
fn a_reboot_is_a_new_boot_and_no_invented_gap() {
    let trial = trial("winch-node:reboot@r-1.5+0.3");
    assert_eq!(trial.heard[WINCH].gaps, [], "what a device without power did not sample was never a sample");
    let boots: BTreeSet<u32> = trial.heard[WINCH].blocks.iter().map(|block| block.boot_id).collect();
    let truth: BTreeSet<u32> = trial.device(WINCH).boots.iter().map(|boot| boot.boot_id).collect();
    assert_eq!(boots, truth);
    assert_eq!(trial.lost(WINCH), [0_usize; 0]);
    let described: BTreeSet<u32> =
        trial.heard[WINCH].descriptions.iter().map(|description| description.boot_id).collect();
    assert_eq!(described, boots, "each boot describes itself: a new segment");
    let maps: BTreeSet<u32> = trial.heard[WINCH].clock.fit().iter().map(|piece| piece.boot_id).collect();
    assert_eq!(maps, boots, "and has a clock map of its own");
    trial.whole(SHUTTLE);
}

#[test]
fn one_wrong_tick_moves_one_block_and_not_the_clock() {
    let trial = trial("winch-node:tick-glitch=5000@r-1");
    trial.whole(WINCH);
    let origin = |block: &Block| block.first_tick as i64 - 100 * block.first_index as i64;
    let blocks = &trial.heard[WINCH].blocks;
    let moved: Vec<i64> =
        blocks.iter().map(|block| origin(block) - origin(&blocks[0])).filter(|off| *off != 0).collect();
    assert_eq!(moved, [5000]);
    assert!(trial.clock_error(WINCH) < 3.0, "{}", trial.clock_error(WINCH));
}

#[test]
fn clocks_that_drift_or_wander_cost_nothing_and_are_followed() {
    for fault in ["all:drift=60", "all:wander=5"] {
        let trial = trial(fault);
        for idx in [WINCH, SHUTTLE] {
            trial.whole(idx);
            assert!(trial.clock_error(idx) < 3.0, "{fault}: {}", trial.clock_error(idx));
        }
    }
}

#[test]
fn garbage_between_frames_costs_nothing_and_is_kept() {
    let trial = trial("winch-node:garbage@r-1+0.5");
    assert_eq!(trial.lost(WINCH), [0_usize; 0]);
    assert!(trial.heard[WINCH].gaps.is_empty());
    let n_bytes: usize = trial.heard[WINCH].rejected.iter().map(|refused| refused.bytes.len()).sum();
    // 1 Mbit/s for half a second is 50 000 bytes, of which 1 in 256 is a delimiter.
    assert!((40_000..52_000).contains(&n_bytes), "{n_bytes} bytes of garbage were kept");
    trial.whole(SHUTTLE);
}

#[test]
fn an_oversize_frame_costs_nothing_and_is_kept() {
    let trial = trial("shuttle-node:oversize=6000@r-1");
    assert_eq!(trial.lost(SHUTTLE), [0_usize; 0]);
    let n_bytes: usize = trial.heard[SHUTTLE].rejected.iter().map(|refused| refused.bytes.len()).sum();
    assert_eq!(
        (n_bytes, trial.heard[SHUTTLE].reasons().keys().copied().collect::<Vec<_>>()),
        (6000, vec!["too long for a frame"])
    );
    trial.whole(WINCH);
}

#[test]
fn two_devices_with_one_id_are_kept_apart_by_their_ports() {
    let trial = trial("shuttle-node:duplicate-id");
    trial.whole(WINCH);
    trial.whole(SHUTTLE);
    let described = |idx: usize| trial.heard[idx].descriptions.last().unwrap();
    assert_eq!(described(WINCH).device_id, described(SHUTTLE).device_id);
    assert_ne!(described(WINCH).name, described(SHUTTLE).name);
}

#[test]
fn a_changed_description_costs_nothing_and_opens_a_new_segment() {
    let trial = trial("winch-node:changed-description@r-1");
    trial.whole(WINCH);
    let heard = &trial.heard[WINCH];
    let ids: Vec<u16> = heard.descriptions.iter().map(|description| description.description_id).collect();
    assert_eq!(ids, [1, 2]);
    let delays = |k: usize| heard.descriptions[k].streams[0].channels[0].group_delay_s;
    assert!(delays(1) > delays(0) && heard.blocks.last().unwrap().description_id == 2);
}

fn encoder(trial: &Trial) -> Vec<i32> {
    let counts = |block: &Block| match &block.counts[0] {
        Counts::Integer(counts) => counts.clone(),
        Counts::Float(_) => panic!("the encoder counts"),
    };
    trial.heard[SHUTTLE].blocks.iter().flat_map(counts).collect()
}

#[test]
fn a_slipping_or_standing_encoder_costs_no_byte_and_is_kept_as_it_counted() {
    let plain = encoder(&trial("winch-node:drift=0"));
    for (fault, n_differing) in
        [("shuttle-node:encoder-slip=40@r0.1", None), ("shuttle-node:encoder-dropout@r0.2+0.01", Some(90..=101))]
    {
        let trial = trial(fault);
        trial.whole(SHUTTLE);
        trial.whole(WINCH);
        let faulty = encoder(&trial);
        let differing: Vec<i32> = faulty.iter().zip(&plain).map(|(a, b)| a - b).filter(|d| *d != 0).collect();
        match n_differing {
            Some(range) => assert!(range.contains(&differing.len()), "{fault}: {}", differing.len()),
            None => assert!(!differing.is_empty() && differing.iter().all(|d| *d == 40), "{fault}"),
        }
    }
}

// Instruments that print text, over the same lines.

const BOARD: usize = 2;

fn text_trial(fault: &str) -> Trial {
    let rig = tautrail::rig::parse(&rehearsal_rig::rig_text("north-pier-text.toml")).unwrap();
    trial_of(SensorSet::Text, fault, |idx| DeviceDecoder::of(&rig.devices[idx]))
}

impl Trial {
    /// As `clock_error`, of the board's printed microseconds of 32 bits.
    fn board_clock_error(&self) -> f64 {
        let pieces: Vec<ClockPiece> = self.heard[BOARD].clock.fit();
        let clock = &self.device(BOARD).clock;
        let error = |block: &Block| {
            let piece = piece_at(&pieces, block.boot_id, block.first_tick).unwrap();
            let wrap = 1_u64 << 32;
            let since_epoch = (block.first_tick / 1_000).wrapping_sub(clock.tick_at_epoch) % wrap;
            let true_ns = clock.epoch_host_ns as f64 + clock.since_epoch_ns(clock.tick_at_epoch + since_epoch);
            (piece.host_ns(block.first_tick) - true_ns).abs() / piece.u_ns
        };
        self.heard[BOARD].blocks.iter().map(error).fold(0.0, f64::max)
    }

    /// Lines printed and not heard, lines heard and never printed. The first line after a link came up is not counted.
    fn lines(&self, idx: usize) -> (usize, usize) {
        let sent = &self.device(idx).streams[0].blocks;
        let (mut at, mut invented) = (0, 0);
        let mut n_lost = 0;
        for block in &self.heard[idx].blocks {
            match sent[at..].iter().take(400).position(|line| line.3 == block.crc) {
                Some(ahead) => (n_lost, at) = (n_lost + ahead, at + ahead + 1),
                None => invented += 1,
            }
        }
        (n_lost + sent.len() - at, invented)
    }
}

#[test]
fn without_a_fault_every_line_but_the_first_is_a_reading() {
    let trial = text_trial("");
    for idx in 0..3 {
        let (lost, invented) = trial.lines(idx);
        // A board's header stands where the perhaps cut first line does.
        assert_eq!((lost, invented), (usize::from(idx != BOARD), 0), "device {idx}");
        assert_eq!(trial.heard[idx].gaps, [], "device {idx}");
        assert!(trial.heard[idx].rejected.len() <= 1);
    }
    assert!(trial.board_clock_error() < 3.0, "{}", trial.board_clock_error());
}

#[test]
fn damage_to_text_costs_no_line_that_was_not_touched() {
    for fault in ["all:bit-errors=3e-5", "all:lost-bytes=3e-4", "all:repeated-bytes=3e-4", "all:garbage@r-1+0.05"] {
        let trial = text_trial(fault);
        for idx in 0..3 {
            let touched = trial.device(idx).streams[0].touched.len();
            let (lost, invented) = trial.lines(idx);
            // A lost line end joins two lines, garbage hangs on to the line after it.
            let most = if fault.contains("garbage") { 30 } else { 2 * touched + 1 };
            assert!(lost <= most, "{fault}, device {idx}: {lost} lost of {touched} touched");
            assert!(
                invented <= touched,
                "{fault}, device {idx}: only a damaged digit can pass: {invented} of {touched}"
            );
            assert!(lost == 0 || !trial.heard[idx].rejected.is_empty(), "{fault}, device {idx}");
        }
    }
}

#[test]
fn a_pulled_cable_and_a_stall_of_text_say_what_is_missing() {
    let pulled = text_trial("all:cable-pull@r-0.9+0.7");
    // 0.7 s of 80, 20 and 500 readings a second, and the first line after it.
    for (idx, n) in [(0, 56), (1, 14), (BOARD, 350)] {
        let missing = pulled.heard[idx].missing();
        assert!(missing.abs_diff(n) <= 3, "device {idx}: {missing} of about {n}");
        assert_eq!(pulled.heard[idx].gaps.len(), 1, "device {idx}");
    }
    let stalled = text_trial("shuttle-board:stall@r-0.9+0.7");
    assert_eq!(stalled.lines(BOARD), (0, 0));
    assert!(stalled.heard[BOARD].gaps.is_empty());
    assert!(stalled.board_clock_error() < 3.0, "{}", stalled.board_clock_error());
}

#[test]
fn what_costs_frames_nothing_costs_lines_nothing() {
    for fault in ["all:batch=16", "all:drift=60", "all:wander=5", "all:duplicate-id", "all:changed-description@r-1"] {
        let trial = text_trial(fault);
        for idx in 0..3 {
            assert_eq!(trial.lines(idx), (usize::from(idx != BOARD), 0), "{fault}, device {idx}");
            assert_eq!(trial.heard[idx].gaps, [], "{fault}, device {idx}");
        }
        assert!(trial.board_clock_error() < 3.0, "{fault}: {}", trial.board_clock_error());
    }
}

#[test]
fn one_wrong_time_of_a_board_costs_the_lines_until_it_is_caught_up() {
    let far = text_trial("shuttle-board:tick-glitch=300000@r-1");
    assert_eq!(
        (far.lines(BOARD), far.heard[BOARD].missing()),
        ((1, 0), 1),
        "a time that can't be yet is refused itself"
    );
    assert_eq!(far.heard[BOARD].reasons(), BTreeMap::from([("device time jumps", 1)]));
    let trial = text_trial("shuttle-board:tick-glitch=5000@r-1");
    // Printed 5 ms ahead: the two lines of the next 4 ms say an earlier time and are refused, and it is no new boot.
    assert_eq!(trial.lines(BOARD), (2, 0));
    // Two and a half intervals seemed to pass before it.
    assert_eq!(trial.heard[BOARD].missing(), 3);
    assert_eq!(trial.heard[BOARD].reasons(), BTreeMap::from([("device time jumps", 2)]));
    assert!(trial.heard[BOARD].blocks.iter().all(|block| block.boot_id == 1));
}

#[test]
fn an_endless_line_of_text_is_kept_and_costs_the_line_it_runs_into() {
    let trial = text_trial("shuttle-board:oversize=6000@r-1");
    let (lost, invented) = trial.lines(BOARD);
    assert!(lost <= 1 && invented == 0, "{lost} lost, {invented} invented");
    let n_bytes: usize = trial.heard[BOARD].rejected.iter().map(|refused| refused.bytes.len()).sum();
    assert!((5_000..6_100).contains(&n_bytes), "{n_bytes} bytes kept");
    for idx in 0..2 {
        assert_eq!(trial.lines(idx), (1, 0), "device {idx}");
    }
}

#[test]
fn every_fault_that_the_rig_can_stage_is_staged_here() {
    let error = "all:no-such-fault".parse::<virtual_rig::faults::Fault>().expect_err("there is none").to_string();
    let known = error.split_once("the rig knows: ").expect("the error lists what there is").1;
    let here = include_str!("line_faults.rs");
    let missing: Vec<&str> = known.split(", ").filter(|word| !here.contains(&format!(":{word}"))).collect();
    assert!(missing.is_empty() && known.split(", ").count() >= 16, "no test for {missing:?} of {known}");
}

#[test]
fn a_text_board_that_reboots_begins_a_new_boot() {
    let trial = text_trial("shuttle-board:reboot@r-1.5+0.3");
    let boots: BTreeSet<u32> = trial.heard[BOARD].blocks.iter().map(|block| block.boot_id).collect();
    assert_eq!(boots.len(), 2);
    assert!(trial.heard[BOARD].reasons().values().sum::<usize>() <= 3, "{:?}", trial.heard[BOARD].reasons());
}
