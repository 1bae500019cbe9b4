//! FORMAT.md against a reader that knows nothing but FORMAT.md: a Python text, written from the page, with its own
//! CRC-32C, reads a journal that our writer left and finds the same records.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

mod support;

use std::path::Path;
use std::sync::Arc;

use bytes::Bytes;
use tautrail::journal::{
    Body, Clocks, DeviceAtOpen, Disk, Fault, Item, Journal, JournalReader, Operation, Origin, RealDisk, Settings,
    StagedDisk, Start,
};
use tautrail::link::{DeviceIdx, LinkWhat};

const ID: &str = "000001-abc123";

const READER: &str = r#"
import json, os, struct, sys
TABLE = []
for n in range(256):
    for _ in range(8):
        n = (n >> 1) ^ (0x82F63B78 if n & 1 else 0)
    TABLE.append(n)
def crc32c(data):
    c = 0xFFFFFFFF
    for b in data:
        c = TABLE[(c ^ b) & 255] ^ (c >> 8)
    return c ^ 0xFFFFFFFF
def records(data):
    at = 0
    while at + 24 <= len(data):
        length, kind, _, device, seq, host_ns = struct.unpack_from("<IBBHQq", data, at)
        end = at + 24 + length
        if length > 1048576 or end + 4 > len(data): return
        if struct.unpack_from("<I", data, end)[0] != crc32c(data[at:end]): return
        yield kind, device, seq, host_ns, data[at + 24:end]
        at = end + 4
last = 0
for name in sorted(os.listdir(sys.argv[1])):
    rows = list(records(open(os.path.join(sys.argv[1], name), "rb").read()))
    if not rows or rows[0][0] != 1: continue
    opening = json.loads(rows[0][4])
    assert opening["format_version"] == 1 and opening["first_seq"] == rows[0][2], opening
    for kind, device, seq, host_ns, payload in rows[1:]:
        if seq > last:
            last = seq
            print(seq, kind, device, host_ns, crc32c(payload))
"#;

/// Writes some hundred records over several segments, one of them given up after a failed sync.
fn written() -> StagedDisk {
    let disk = StagedDisk::default();
    disk.fail(Operation::Sync, 9, Fault::Error(5));
    let device = |name: &str| DeviceAtOpen { name: name.into(), port: "p".into(), describe_hex: String::new() };
    let origin = Origin {
        journal_id: ID.into(),
        program_version: "0".into(),
        kernel_boot_id: "boot".into(),
        rig_text: "name = \"north-pier\" # ünïcode".into(),
        devices: vec![device("winch-node"), device("shuttle-node")],
    };
    let settings = Settings { segment_bytes: 4096, reserve_bytes: 2048, ..Settings::default() };
    let mut journal =
        Journal::begin(Arc::new(disk.clone()), Path::new("j"), origin, Start::fresh(), settings, 0).unwrap();
    for i in 0..300_i64 {
        let now_ns = i * 10_000_000;
        let what = match i % 5 {
            0 => Body::Heartbeat,
            1 => Body::Link(LinkWhat::TimeRequested { token: i as u32 }),
            2 => Body::Clocks(Clocks::read()),
            3 => Body::Link(LinkWhat::Down { reason: "the far end closed".into() }),
            _ => Body::Link(LinkWhat::Bytes(Bytes::from(vec![i as u8; i as usize]))),
        };
        journal.append(now_ns - 5, DeviceIdx((i % 2) as u16), &what);
        journal.commit(now_ns);
        if let Some(job) = journal.next_job(now_ns) {
            let outcome = job.run(&disk);
            journal.job_done(outcome, now_ns);
        }
    }
    disk
}

#[test]
fn a_reader_written_from_the_page_alone_finds_the_same_records() {
    let staged = written();
    let dir = tempfile::tempdir().unwrap();
    let names: Vec<String> = staged.list(Path::new("j")).unwrap().into_iter().map(|file| file.name).collect();
    for name in &names {
        std::fs::write(dir.path().join(name), staged.content(&Path::new("j").join(name)).unwrap()).unwrap();
    }
    assert!(names.len() > 5, "several segments: {names:?}");
    let reader = JournalReader::open(Arc::new(RealDisk), dir.path(), ID).unwrap();
    let given_up = reader.segments().iter().filter(|segment| segment.open.previous_given_up.is_some()).count();
    assert_eq!(given_up, 1);
    let mut ours = String::new();
    for item in reader.records() {
        if let Item::Record(record) = item.unwrap() {
            let mut bytes = Vec::new();
            record.encode(&mut bytes);
            let (kind, payload) = (bytes[4], &bytes[24..bytes.len() - 4]);
            let sum = crc32c::crc32c(payload);
            ours.push_str(&format!("{} {kind} {} {} {sum}\n", record.seq, record.device.0, record.host_ns));
        }
    }
    assert_eq!(ours.lines().count(), 300);
    assert_eq!(support::run_oracle(READER, &[dir.path().to_str().unwrap()]), ours);
}
