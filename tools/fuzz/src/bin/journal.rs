//! Segments as a broken disk, or somebody, may leave them: read to an end, in order, and nothing in them is invented.
//!
//! An input that begins with an even byte is a segment's raw bytes. With an odd byte it is a script of records that the
//! target gives sound checksums, so that what stands behind the checksum is reached: kind, device, step of the sequence,
//! length, payload; kind 255 begins the next segment.
#![no_main]

use std::path::Path;
use std::sync::Arc;

use fuzz::journal::{Body, Disk, Item, JournalReader, StagedDisk, segment_name};
use fuzz::link::LinkWhat;

const ID: &str = "000001-abc123";
const RECORD_BYTES_MIN: usize = 28;
const NEXT_SEGMENT: u8 = 255;
const BYTES: u8 = 3;

libfuzzer_sys::fuzz_target!(|input: &[u8]| {
    let Some((&mode, rest)) = input.split_first() else { return };
    let (segments, payloads) =
        if mode % 2 == 0 { (vec![rest.to_vec()], None) } else { scripted(rest) };
    let disk = StagedDisk::default();
    let mut n_bytes = 0;
    for (number, content) in (1..).zip(&segments) {
        let file = disk.create_new(&Path::new("j").join(segment_name(ID, number))).expect("a new name");
        if !content.is_empty() {
            file.append(content).expect("room in memory");
        }
        n_bytes += content.len();
    }
    let Ok(reader) = JournalReader::open(Arc::new(disk), Path::new("j"), ID) else { return };
    let (mut last, mut n_records) = (None, 0);
    for item in reader.records() {
        let Item::Record(record) = item.expect("the disk in memory reads") else { continue };
        assert!(last.is_none_or(|last| record.seq > last), "out of order");
        last = Some(record.seq);
        n_records += 1;
        if let (Body::Link(LinkWhat::Bytes(bytes)), Some(payloads)) = (&record.body, &payloads) {
            assert!(payloads.iter().any(|written| written == bytes), "never written");
        }
    }
    assert!(n_records * RECORD_BYTES_MIN <= n_bytes);
    let survey = reader.survey().expect("the disk in memory reads");
    assert_eq!(survey.last_seq, last);
    assert!(survey.trials.iter().all(|trial| Some(trial.last_seq) <= last), "a trial claims more than there is");
    let from = last.unwrap_or(0) / 2;
    assert!(reader.records_from(from).count() <= reader.records().count());
});

/// Segments with sound records, and the payloads of their reads.
fn scripted(mut script: &[u8]) -> (Vec<Vec<u8>>, Option<Vec<Vec<u8>>>) {
    let (mut segments, mut payloads, mut seq) = (vec![opening(1)], Vec::new(), 0_u64);
    while let Some((&[kind, device, step, length], rest)) = script.split_first_chunk() {
        let (payload, rest) = rest.split_at(rest.len().min(length.into()));
        script = rest;
        if kind == NEXT_SEGMENT {
            segments.push(opening(seq.wrapping_add(1)));
            continue;
        }
        // Mostly the next one, sometimes back or far ahead.
        seq = seq.wrapping_add_signed(if step < 128 { 1 } else { i64::from(step as i8) * 1_000_003 });
        if kind == BYTES {
            payloads.push(payload.to_vec());
        }
        if let Some(segment) = segments.last_mut() {
            segment.extend(record(kind, device, seq, payload));
        }
    }
    (segments, Some(payloads))
}

fn opening(first_seq: u64) -> Vec<u8> {
    let json = format!(
        r#"{{"format_version":1,"journal_id":"{ID}","segment":1,"first_seq":{first_seq},"program_version":"0","kernel_boot_id":"b","rig_text":"","devices":[{{"name":"n","port":"p","describe_hex":""}}],"open_trial":null,"previous_given_up":null}}"#
    );
    record(1, 0, first_seq, json.as_bytes())
}

/// By FORMAT.md.
fn record(kind: u8, device: u8, seq: u64, payload: &[u8]) -> Vec<u8> {
    let mut out = (payload.len() as u32).to_le_bytes().to_vec();
    out.extend([kind, 0, device, 0]);
    out.extend(seq.to_le_bytes());
    out.extend((seq as i64).wrapping_mul(1000).to_le_bytes());
    out.extend(payload);
    out.extend(crc32c::crc32c(&out).to_le_bytes());
    out
}
