//! Hostile journals: whatever the bytes, reading ends, without a panic and without a record that was not written.

use super::*;
use crate::journal::{DeviceAtOpen, StagedDisk};
use crate::link::DeviceIdx;
use bytes::Bytes;
use proptest::prelude::*;

const DIR: &str = "j";
const ID: &str = "000001-abc123";

fn opening(segment: u32, first_seq: u64) -> Record {
    let open = SegmentOpen {
        format_version: FORMAT_VERSION,
        journal_id: ID.into(),
        segment,
        first_seq,
        program_version: "0".into(),
        kernel_boot_id: "boot".into(),
        rig_text: "invented".into(),
        devices: vec![DeviceAtOpen { name: "winch-node".into(), port: "p".into(), describe_hex: "00".into() }],
        open_trial: None,
        previous_given_up: None,
        keep: false,
    };
    Record { seq: first_seq, host_ns: 0, device: DeviceIdx(0), body: Body::SegmentOpen(Box::new(open)) }
}

fn record(seq: u64) -> Record {
    let bytes = Bytes::from(seq.to_le_bytes().repeat(3));
    Record { seq, host_ns: seq as i64, device: DeviceIdx(0), body: Body::Link(LinkWhat::Bytes(bytes)) }
}

fn segment(number: u32, seqs: std::ops::Range<u64>) -> Vec<u8> {
    let mut out = Vec::new();
    opening(number, seqs.start).encode(&mut out);
    seqs.for_each(|seq| record(seq).encode(&mut out));
    out
}

fn disk_with(segments: &[Vec<u8>]) -> StagedDisk {
    let disk = StagedDisk::default();
    for (index, bytes) in segments.iter().enumerate() {
        let path = Path::new(DIR).join(segment_name(ID, index as u32 + 1));
        disk.create_new(&path).unwrap().append(bytes).unwrap();
    }
    disk
}

fn items(disk: &StagedDisk) -> Vec<Item> {
    match JournalReader::open(Arc::new(disk.clone()), Path::new(DIR), ID) {
        Ok(reader) => reader.records().map(|item| item.unwrap()).collect(),
        Err(_) => Vec::new(),
    }
}

fn seqs(items: &[Item]) -> Vec<u64> {
    items.iter().filter_map(|item| if let Item::Record(record) = item { Some(record.seq) } else { None }).collect()
}

#[test]
fn what_a_segment_repeats_from_one_given_up_is_handed_out_once() {
    let found = items(&disk_with(&[segment(1, 1..20), segment(2, 15..30)]));
    assert_eq!(seqs(&found), (1..30).collect::<Vec<_>>());
    assert!(!found.iter().any(|item| matches!(item, Item::Damage(_))));
}

#[test]
fn a_missing_segment_is_told_with_its_size() {
    let found = items(&disk_with(&[segment(1, 1..20), segment(2, 25..30)]));
    let missing = Item::Damage(Damage::Missing { first_seq: 20, n_records: 5 });
    assert!(found.contains(&missing), "{found:?}");
}

#[test]
fn a_later_format_is_refused_and_named() {
    let mut later = opening(1, 1);
    if let Body::SegmentOpen(open) = &mut later.body {
        open.format_version = FORMAT_VERSION + 1;
    }
    let mut bytes = Vec::new();
    later.encode(&mut bytes);
    let error = JournalReader::open(Arc::new(disk_with(&[bytes])), Path::new(DIR), ID).unwrap_err();
    assert!(matches!(error, ReadError::LaterFormat { found: 2, .. }), "{error}");
}

#[test]
fn lead_in_starts_a_segment_early_near_a_segment_s_start() {
    let disk = disk_with(&[segment(1, 1..2000), segment(2, 2000..5000)]);
    let reader = JournalReader::open(Arc::new(disk), Path::new(DIR), ID).unwrap();
    let starts_at = |seq| match reader.records_from(seq).next() {
        Some(Ok(Item::Opening { open, .. })) => open.segment,
        other => panic!("{other:?}"),
    };
    assert_eq!((starts_at(2010), starts_at(4000), starts_at(5)), (1, 2, 1));
}

proptest! {
    #[test]
    fn any_bytes_as_segments_are_read_to_an_end(segments in prop::collection::vec(any::<Vec<u8>>(), 1..4)) {
        prop_assert!(seqs(&items(&disk_with(&segments))).is_empty());
    }

    #[test]
    fn a_damaged_segment_gives_nothing_that_was_not_written(
        at in any::<prop::sample::Index>(),
        junk in prop::collection::vec(any::<u8>(), 1..40),
        cut in any::<prop::sample::Index>(),
    ) {
        let mut first = segment(1, 1..30);
        let start = at.index(first.len());
        for (to, from) in first[start..].iter_mut().zip(&junk) {
            *to = *from;
        }
        first.truncate(cut.index(first.len()) + 1);
        for item in items(&disk_with(&[first, segment(2, 30..40)])) {
            if let Item::Record(found) = item {
                prop_assert_eq!(&record(found.seq), &found);
            }
        }
    }
}
