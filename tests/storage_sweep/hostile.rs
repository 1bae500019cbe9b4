//! Journals that are cut, damaged or made up: read to an end, nothing invented, never written.

use std::os::unix::fs::PermissionsExt;
use std::path::{Path, PathBuf};
use std::sync::Arc;

use tautrail::archive::{Fate, journal_dir, recover};
use tautrail::journal::{
    Body, Disk, Item, JournalReader, MAX_PAYLOAD_BYTES, RealDisk, Record, StagedDisk, segment_name,
};
use tautrail::link::DeviceIdx;

use crate::draws;
use crate::journal_file::{JOURNAL_ID, nominal, opened, opening};

const PACE: f64 = 0.02;
/// Of the journal, cut at every byte.
const EVERY_BYTE: usize = 40_000;
/// Further on, in steps.
const STRIDE: usize = 997;
const FAR: usize = 300_000;

/// A journal of a launch that the virtual rig played.
fn real_journal() -> Vec<u8> {
    let dir = tempfile::tempdir().unwrap();
    nominal(dir.path(), PACE, true);
    std::fs::read(path(dir.path())).unwrap()
}

fn path(archive: &Path) -> PathBuf {
    journal_dir(archive).join(segment_name(JOURNAL_ID, 1))
}

/// Where each record ends, by the lengths in their headers (FORMAT.md).
fn ends(journal: &[u8]) -> Vec<usize> {
    let (mut ends, mut at) = (Vec::new(), 0);
    while let Some(length) = journal.get(at..at + 4) {
        at += 28 + u32::from_le_bytes(length.try_into().unwrap()) as usize;
        ends.push(at);
    }
    ends
}

fn on_disk(bytes: &[u8]) -> Arc<StagedDisk> {
    let disk = StagedDisk::default();
    disk.create_new(&path(Path::new("a"))).unwrap().append(bytes).unwrap();
    Arc::new(disk)
}

/// Records and damages; `None` when the journal does not open.
fn read(bytes: &[u8]) -> Option<(Vec<Record>, usize)> {
    let reader = JournalReader::open(on_disk(bytes), &journal_dir(Path::new("a")), JOURNAL_ID).ok()?;
    let (mut records, mut n_damages) = (Vec::new(), 0);
    for item in reader.records() {
        match item.unwrap() {
            Item::Record(record) => records.push(record),
            Item::Damage(_) => n_damages += 1,
            Item::Opening { .. } => {}
        }
    }
    Some((records, n_damages))
}

#[test]
fn a_real_journal_cut_at_any_byte_gives_every_whole_record_before_the_cut() {
    let mut journal = real_journal();
    journal.truncate(FAR);
    let ends = ends(&journal);
    let (records, _) = read(&journal).unwrap();
    let opening_cuts = (1..ends[0] - 40).step_by(STRIDE).chain(ends[0] - 40..ends[0]);
    opening_cuts.for_each(|n| assert!(read(&journal[..n]).is_none(), "cut at {n}, in the opening"));
    for n in (ends[0]..journal.len()).step_by(STRIDE) {
        let n_whole = ends.iter().filter(|&&end| end <= n).count();
        let (found, n_damages) = read(&journal[..n]).unwrap();
        assert_eq!(found, records[..n_whole - 1], "cut at {n}");
        assert_eq!(n_damages, usize::from(!ends.contains(&n)), "cut at {n}");
    }
    // Every byte: each record behind a short opening and the record before it, so that this takes seconds.
    let mut lead = Vec::new();
    let body = Body::SegmentOpen(Box::new(opening("short")));
    Record { seq: 1, host_ns: 0, device: DeviceIdx(0), body }.encode(&mut lead);
    (1..lead.len()).for_each(|n| assert!(read(&lead[..n]).is_none(), "cut at {n}, in the short opening"));
    let n_every = ends.iter().filter(|&&end| end < ends[0] + EVERY_BYTE).count();
    assert!(n_every > 60, "{n_every} records");
    for i in 1..n_every - 1 {
        let (before, at) = (&journal[ends[i - 1]..ends[i]], &journal[ends[i]..ends[i + 1]]);
        for n in 0..at.len() {
            let (found, n_damages) = read(&[&lead, before, &at[..n]].concat()).unwrap();
            assert_eq!(found, records[i - 1..i], "record {i} cut at its byte {n}");
            assert_eq!(n_damages, usize::from(n > 0), "record {i} cut at its byte {n}");
        }
    }
}

#[test]
fn a_length_beyond_the_maximum_is_damage_and_no_request_for_memory() {
    let journal = real_journal();
    let ends = ends(&journal);
    let (records, _) = read(&journal).unwrap();
    for claimed in [MAX_PAYLOAD_BYTES as u32 + 1, 1 << 30, u32::MAX] {
        let mut damaged = journal.clone();
        damaged[ends[9]..ends[9] + 4].copy_from_slice(&claimed.to_le_bytes());
        let (found, n_damages) = read(&damaged).unwrap();
        assert_eq!((found.as_slice(), n_damages), (&records[..9], 1), "{claimed} bytes claimed");
    }
}

/// Links to the segments may be made (journals kept for a person); the segments are read only.
#[test]
fn recovery_never_writes_to_a_journal_however_damaged() {
    let whole = real_journal();
    let ends = ends(&whole);
    let mut draw = draws(5);
    for round in 0..6 {
        let dir = tempfile::tempdir().unwrap();
        std::fs::create_dir(journal_dir(dir.path())).unwrap();
        let mut damaged = whole.clone();
        match round {
            0 => {}
            1 => damaged.truncate(ends[ends.len() / 2] + 11),
            _ => {
                let at = ends[0] + draw() as usize % (damaged.len() - ends[0]);
                damaged[at] ^= 1 << (draw() % 8);
            }
        }
        std::fs::write(path(dir.path()), &damaged).unwrap();
        std::fs::set_permissions(path(dir.path()), std::fs::Permissions::from_mode(0o444)).unwrap();
        let about = std::fs::metadata(path(dir.path())).unwrap();
        let disk: Arc<dyn Disk> = Arc::new(RealDisk);
        let recovered = recover(dir.path(), &disk, &mut |_| {}).unwrap().trials;
        let opened_before = round == 0 || !recovered.is_empty();
        assert!(recovered.iter().all(|one| matches!(one.fate, Fate::Sealed(_))), "round {round}: {recovered:?}");
        if opened_before {
            assert_eq!(opened(dir.path()).1.trial_id, recovered[0].trial_id);
        }
        let after = std::fs::metadata(path(dir.path())).unwrap();
        assert_eq!(about.modified().unwrap(), after.modified().unwrap(), "round {round}");
        assert!(std::fs::read(path(dir.path())).unwrap() == damaged, "round {round}: the journal was written");
        assert_eq!(RealDisk.list(&journal_dir(dir.path())).unwrap().len(), 1, "round {round}");
    }
}
