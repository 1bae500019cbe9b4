//! `tautrail rehearse`, as a newcomer runs it; and that every count in its trial is the one that left the device.

#![allow(clippy::expect_used, clippy::unwrap_used, clippy::panic, reason = "a test that cannot go on stops here")]

use std::collections::BTreeMap;
use std::path::{Path, PathBuf};
use std::process::{Command, Output};

use firmware_protocol::{Block, Header, Message, encode};
use serde_json::Value;
use tautrail::capture::{Counts, Encoding};
use tautrail::trial::{BlockRow, RawCounts, TrialFile};

fn rehearse(out: &Path, more: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_tautrail"))
        .args(["rehearse", "--json", "--out"])
        .arg(out)
        .args(more)
        .output()
        .expect("the binary starts")
}

#[test]
fn a_rehearsal_is_whole_true_and_leaves_trial_truth_and_report() {
    let dir = tempfile::tempdir().expect("a temporary directory");
    let output = rehearse(dir.path(), &["--seed", "1"]);
    assert_eq!(output.status.code(), Some(0), "{output:?}");
    let told: Value = serde_json::from_slice(&output.stdout).expect("JSON");

    let beside = told["beside_truth"].as_array().expect("a list");
    let speed = beside.iter().find(|row| row["name"] == "launch_speed").expect("a launch speed");
    let (truth, reading) = (speed["truth"].as_f64().unwrap(), speed["reading"].as_f64().unwrap());
    assert!((reading - truth).abs() < 0.01 * truth, "launch speed {reading}, truth {truth}");

    let blocks = told["blocks"].as_array().expect("a list");
    assert_eq!(blocks.len(), 2, "one stream of each device");
    for stream in blocks {
        assert!(stream["in_file"].as_u64() > Some(1000), "{stream}");
        assert_eq!((stream["missing"].as_u64(), stream["differing"].as_u64()), (Some(0), Some(0)), "{stream}");
    }
    let residuals = told["residuals"].as_array().expect("a list");
    for quantity in ["acceleration", "velocity", "anchor tension"] {
        assert!(residuals.iter().any(|row| row["quantity"] == quantity), "no residual of {quantity}");
    }
    let report = std::fs::read_to_string(dir.path().join("report.html")).expect("a report");
    assert!(report.contains("<svg") && report.contains("invented"));

    let trial = PathBuf::from(told["trial"].as_str().expect("a path"));
    every_count_is_the_one_that_left_the_device(&trial, &dir.path().join("truth.json"));
}

/// Packs the counts in the file into frames again, channel by channel: their CRC-32C must be those that the virtual rig
/// logged as it sent them, so that no count of any channel can differ.
fn every_count_is_the_one_that_left_the_device(trial: &Path, truth: &Path) {
    let truth: Value = serde_json::from_slice(&std::fs::read(truth).expect("a truth log")).expect("JSON");
    let file = TrialFile::open(trial).expect("a trial");
    for device in truth["devices"].as_array().expect("devices") {
        let name = device["name"].as_str().expect("a name");
        let blocks = device["streams"][0]["blocks"].as_array().expect("blocks");
        let sent: BTreeMap<u64, u32> =
            blocks.iter().map(|block| (block[1].as_u64().unwrap(), block[3].as_u64().unwrap() as u32)).collect();
        let description = file.device(name).expect("a device").descriptions.remove(0);
        let order: Vec<&str> = description.streams[0].channels.iter().map(|channel| channel.name.as_str()).collect();
        let mut channels = file.all_counts(name).expect("counts");
        channels.sort_by_key(|counts| order.iter().position(|name| *name == counts.channel.name));
        let mut at = 0;
        for row in file.blocks(name).expect("blocks") {
            let crc = crc_of(&row, description.description_id, &channels, at);
            assert_eq!(Some(&crc), sent.get(&row.first_index), "{name}, block from index {}", row.first_index);
            at += row.n_samples as usize;
        }
        assert_eq!(channels.len(), 2, "both channels of {name} take part");
    }
}

fn crc_of(row: &BlockRow, description_id: u16, channels: &[RawCounts], at: usize) -> u32 {
    let mut samples = Vec::new();
    for idx in at..at + row.n_samples as usize {
        for RawCounts { channel, counts } in channels {
            let Counts::Integer(counts) = counts else { panic!("the virtual rig sends integers") };
            let width = match channel.encoding {
                Encoding::I16 => 2,
                Encoding::I24 => 3,
                Encoding::I32 | Encoding::F32 => 4,
            };
            samples.extend_from_slice(&counts[idx].to_le_bytes()[..width]);
        }
    }
    let header = Header { flags: 0, stream: row.stream, sequence: row.sequence, boot_id: row.boot_id, description_id };
    let block = Block {
        first_index: row.first_index,
        tick: row.first_tick,
        sent_tick: row.sent_tick,
        overruns: row.overruns,
        n_samples: row.n_samples as u16,
        sample_len: (samples.len() / row.n_samples as usize) as u16,
        samples: &samples,
    };
    let mut frame = [0; 4096];
    let len = encode(&header, &Message::Block(block), &mut frame).expect("it was a frame once");
    firmware_protocol::decode(&mut frame[1..len - 1]).expect("a whole frame").crc
}

#[test]
fn a_directory_with_other_files_is_left_alone() {
    let dir = tempfile::tempdir().expect("a temporary directory");
    std::fs::write(dir.path().join("minutes.txt"), "of the last meeting").expect("a file");
    let output = rehearse(dir.path(), &[]);
    assert_eq!(output.status.code(), Some(2));
    let said = String::from_utf8_lossy(&output.stdout).into_owned();
    assert!(said.contains("holds other files") && said.contains("--out"), "{said}");
    assert_eq!(std::fs::read_dir(dir.path()).expect("still there").count(), 1);
}
