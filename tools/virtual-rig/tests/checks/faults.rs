//! Every line fault does what its name says, and nothing else; the truth log names what it touched.

use crate::host::{Came, Trial, trial};
use crate::support::assert_near;
use proptest::prelude::*;
use std::collections::BTreeSet;
use virtual_rig::clock::DeviceClock;
use virtual_rig::device::catalogue::SensorSet;
use virtual_rig::faults::Fault;
use virtual_rig::play::virtual_time::Delivered;

const DEVICES: [&str; 2] = ["winch-node", "shuttle-node"];

fn keys_heard(trial: &Trial, device: &str) -> Vec<(u32, u64, u16, u32)> {
    let key = |block: &Came| (block.sequence, block.first_index, block.n_samples, block.crc);
    trial.heard(device).blocks.iter().map(key).collect()
}

/// Every block of the truth came, in order, and no other.
#[track_caller]
fn check_all_came(trial: &Trial) {
    for device in DEVICES {
        assert!(keys_heard(trial, device) == trial.device(device).streams[0].blocks, "{device}: blocks differ");
    }
}

#[test]
fn without_faults_every_block_comes_with_the_checksum_in_the_truth() {
    let trial = trial(&[], |_| {});
    check_all_came(&trial);
    for device in DEVICES {
        assert_eq!((trial.heard(device).n_refused, trial.device(device).boots.len()), (0, 1));
        assert!(trial.heard(device).blocks.len() > 500);
    }
}

#[test]
fn damaged_bytes_cost_only_the_frames_that_the_truth_calls_touched() {
    for fault in ["all:bit-errors=2e-6", "all:lost-bytes=2e-5", "all:repeated-bytes=2e-5"] {
        let trial = trial(&[fault], |_| {});
        for device in DEVICES {
            let stream = &trial.device(device).streams[0];
            let came: BTreeSet<_> = keys_heard(&trial, device).into_iter().collect();
            let touched: BTreeSet<usize> = stream.touched.iter().map(|place| *place as usize).collect();
            assert!(!touched.is_empty() && touched.len() < stream.blocks.len() / 4, "{fault}: {}", touched.len());
            for (place, block) in stream.blocks.iter().enumerate() {
                assert!(
                    touched.contains(&place) || came.contains(block),
                    "{fault}: untouched block {place} is missing"
                );
            }
            assert!(trial.heard(device).n_refused > 0, "{fault}: nothing was refused");
        }
    }
}

#[test]
fn a_stall_delays_everything_and_loses_nothing() {
    let trial = trial(&["winch-node:stall@r-0.5+0.4"], |_| {});
    check_all_came(&trial);
    let release_s = trial.release_s();
    let read_s = |delivery: &virtual_rig::play::virtual_time::Delivery| trial.scenario_s(delivery.host_ns) - release_s;
    let reads = trial.deliveries.iter().filter(|delivery| matches!(delivery.what, Delivered::Bytes(_)));
    let (winch, shuttle): (Vec<_>, Vec<_>) = reads.partition(|delivery| delivery.device == 0);
    let in_stall = |reads: &[&_]| reads.iter().filter(|read| (-0.49..-0.1).contains(&read_s(read))).count();
    assert_eq!(in_stall(&winch), 0, "the stalled line gave something");
    assert!(in_stall(&shuttle) > 30, "the other line stalled too");
}

#[test]
fn usb_packets_come_when_full_or_when_their_timer_ends() {
    for timer_ms in [1, 16] {
        let trial = trial(&[&format!("all:batch={timer_ms}")], |_| {});
        check_all_came(&trial);
        let lens = trial.deliveries.iter().filter_map(|delivery| match &delivery.what {
            Delivered::Bytes(bytes) => Some(bytes.len()),
            _ => None,
        });
        let (full, rest): (Vec<_>, Vec<_>) = lens.partition(|len| len % 62 == 0);
        assert!(full.len() > 500 && rest.iter().all(|len| *len < 62), "{timer_ms} ms: {} full", full.len());
        assert_eq!(rest.len() > full.len() / 2, timer_ms == 1, "{timer_ms} ms: {} by the timer", rest.len());
    }
}

#[test]
fn a_pulled_cable_leaves_one_gap_and_a_port_that_goes_and_comes() {
    let trial = trial(&["shuttle-node:cable-pull@r-0.6+0.4"], |_| {});
    check_all_came(&trial);
    let downs = |what: &Delivered| trial.deliveries.iter().filter(|delivery| delivery.what == *what).count();
    assert_eq!((downs(&Delivered::Down), downs(&Delivered::Up)), (1, 1));
    let blocks = &trial.heard("shuttle-node").blocks;
    let gaps: Vec<u64> = blocks.windows(2).map(|pair| pair[1].first_index - pair[0].first_index - 100).collect();
    let missing: u64 = gaps.iter().sum();
    assert_eq!(gaps.iter().filter(|gap| **gap > 0).count(), 1);
    assert!((3800..=4200).contains(&missing), "{missing} samples are missing after 0.4 s");
}

#[test]
fn a_reboot_gives_a_new_boot_id_and_starts_indices_again() {
    let trial = trial(&["winch-node:reboot@r-1.5+0.3"], |_| {});
    check_all_came(&trial);
    let boots = &trial.device("winch-node").boots;
    assert_eq!(boots.len(), 2);
    let blocks = &trial.heard("winch-node").blocks;
    let second = blocks.iter().position(|block| block.boot_id == boots[1].boot_id).unwrap();
    assert_eq!(second, boots[1].first_block);
    assert!(blocks[..second].iter().all(|block| block.boot_id == boots[0].boot_id));
    assert_eq!(blocks[second].sequence, 0);
    assert!(blocks[second].first_index < blocks[second - 1].first_index);
}

/// Blocks whose tick is not on the line through its neighbours' (100 ticks a sample).
fn off_ticks(blocks: &[Came]) -> Vec<i64> {
    let origin = |block: &Came| block.tick as i64 - 100 * block.first_index as i64;
    blocks.iter().map(|block| origin(block) - origin(&blocks[0])).filter(|off| *off != 0).collect()
}

#[test]
fn a_tick_glitch_spoils_one_block_of_one_device() {
    let trial = trial(&["winch-node:tick-glitch=5000@r-1"], |_| {});
    assert_eq!(off_ticks(&trial.heard("winch-node").blocks), [5000]);
    assert!(off_ticks(&trial.heard("shuttle-node").blocks).is_empty());
}

#[test]
fn a_drifting_clock_runs_fast_by_what_was_asked() {
    let (plain, fast) = (trial(&[], |_| {}), trial(&["all:drift=200"], |_| {}));
    for device in DEVICES {
        let ppm = |trial: &Trial| trial.device(device).clock.rate_error_ppm;
        assert_near(device, ppm(&fast) - ppm(&plain), 200.0, 1e-9);
        let blocks = &fast.heard(device).blocks;
        let (first, last) = (&blocks[0], &blocks[blocks.len() - 1]);
        let rate = (last.tick - first.tick) as f64 * 1e3 / (last.host_ns - first.host_ns) as f64;
        // Reads are late by up to a millisecond over the eight seconds of this trial.
        assert_near("rate seen by the host, ppm", (rate - 1.0) * 1e6, ppm(&fast), 150.0);
    }
}

#[test]
fn garbage_and_an_oversize_frame_cost_no_block() {
    let trial = trial(&["winch-node:garbage@r-1+0.5", "shuttle-node:oversize@r-1"], |_| {});
    check_all_came(&trial);
    assert!(trial.heard("winch-node").n_refused > 20);
    assert!(trial.heard("shuttle-node").n_refused > 0);
}

#[test]
fn a_second_device_may_claim_the_first_ones_id_and_a_description_may_change() {
    let trial = trial(&["shuttle-node:duplicate-id", "winch-node:changed-description@r-1"], |_| {});
    let ids = |device| trial.heard(device).device_ids.iter().collect::<BTreeSet<_>>();
    assert_eq!(ids("winch-node"), ids("shuttle-node"));
    let blocks = &trial.heard("winch-node").blocks;
    let changes = blocks.windows(2).filter(|pair| pair[0].description_id != pair[1].description_id).count();
    assert_eq!((changes, blocks[blocks.len() - 1].description_id), (1, 2));
}

fn encoder_counts(trial: &Trial) -> Vec<i32> {
    let blocks = &trial.heard("shuttle-node").blocks;
    let samples = blocks.iter().flat_map(|block| block.samples.chunks_exact(6));
    samples.map(|sample| i32::from_le_bytes([sample[0], sample[1], sample[2], sample[3]])).collect()
}

#[test]
fn an_encoder_slips_by_its_counts_and_stands_still_in_a_dropout() {
    let plain = encoder_counts(&trial(&[], |_| {}));
    let slipped = encoder_counts(&trial(&["shuttle-node:encoder-slip=40@r0.1"], |_| {}));
    let differences: Vec<i32> = slipped.iter().zip(&plain).map(|(slipped, plain)| slipped - plain).collect();
    let first = differences.iter().position(|difference| *difference != 0).unwrap();
    assert!(differences[first..].iter().all(|difference| *difference == 40));
    let dropped = encoder_counts(&trial(&["shuttle-node:encoder-dropout@r0.2+0.01"], |_| {}));
    let differing: Vec<usize> = (0..plain.len()).filter(|idx| dropped[*idx] != plain[*idx]).collect();
    assert!((90..=101).contains(&differing.len()), "{} samples stood still in 10 ms", differing.len());
    assert_eq!(differing.iter().map(|idx| dropped[*idx]).collect::<BTreeSet<_>>().len(), 1);
}

#[test]
fn beam_gates_and_the_release_pin_give_edges_at_their_true_times() {
    let trial = trial(&[], |options| options.sensors = SensorSet::Full);
    let (heard, clock) = (trial.heard("gate-node"), trial.device("gate-node").clock);
    assert_eq!(heard.edges.len(), 5, "pin, and two edges at each of two gates");
    for (edge, truth) in heard.edges.iter().zip(&trial.truth.edges) {
        assert_eq!((edge.input, edge.rising), (truth.input, truth.rising));
        let at_ns = clock.epoch_host_ns as f64 + clock.since_epoch_ns(edge.tick);
        assert_near("time of the edge, ns", at_ns, truth.host_ns as f64, 1_500.0);
    }
    // The flag of 100 mm passes the second gate at launch speed, nearly.
    let passing_s = (trial.truth.edges[4].host_ns - trial.truth.edges[3].host_ns) as f64 * 1e-9;
    assert_near("speed at the gate", 0.1 / passing_s, trial.truth.launch.as_ref().unwrap().speed_rail_mps, 0.1);
}

#[test]
fn a_wandering_clock_reads_back_the_time_it_was_read_at() {
    let clock = DeviceClock { epoch_host_ns: 5_000, tick_at_epoch: 77, rate_error_ppm: -31.0, wander_ppm: 3.0 };
    for second in 0..60 {
        let host_ns = 5_000 + second * 1_000_000_000;
        let back_ns = clock.since_epoch_ns(clock.tick_at(host_ns));
        assert_near("ns since the epoch", back_ns, (host_ns - 5_000) as f64, 1_001.0);
    }
}

#[test]
fn a_misspelt_fault_is_told_what_would_be_right() {
    let message = |text: &str| text.parse::<Fault>().unwrap_err().to_string();
    assert!(message("winch-node:stal@r-1").contains("stall"));
    assert!(message("stall@1").contains("DEVICE:KIND"));
    assert!(message("all:drift=fast").contains("`fast`"));
    assert!(message("all:stall").contains("must have a start"));
}

proptest! {
    #[test]
    fn any_text_is_a_fault_or_an_error(text in ".{0,60}") {
        if let Ok(fault) = text.parse::<Fault>() {
            prop_assert_eq!(fault.to_string().parse::<Fault>().unwrap(), fault);
        }
    }

    #[test]
    fn a_fault_is_read_back_as_it_was_written(value in -1e3..1e3f64, at in -50.0..50.0f64, lasting in 0.0..9.0f64) {
        let text = format!("winch-node:stall={value}@r{at}+{lasting}");
        let fault = text.parse::<Fault>().unwrap();
        prop_assert_eq!(fault.to_string().parse::<Fault>().unwrap(), fault);
    }
}
