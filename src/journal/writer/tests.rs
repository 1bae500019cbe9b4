use super::*;
use crate::journal::{Damage, Fault, Item, JournalReader, Operation, StagedDisk, TrialClose, journals};
use bytes::Bytes;

const DIR: &str = "archive/journal";
const MS: i64 = 1_000_000;

fn origin() -> Origin {
    Origin {
        journal_id: "000001-abc123".into(),
        program_version: "0".into(),
        kernel_boot_id: "boot".into(),
        rig_text: "name = \"north-pier\"".into(),
        devices: vec![DeviceAtOpen { name: "winch-node".into(), port: "p".into(), describe_hex: String::new() }],
    }
}

fn small() -> Settings {
    Settings { segment_bytes: 4096, reserve_bytes: 1024, tail_bytes_max: 1 << 14, ..Settings::default() }
}

fn begin(disk: &StagedDisk, settings: Settings) -> Journal {
    Journal::begin(Arc::new(disk.clone()), Path::new(DIR), origin(), Start::fresh(), settings, 0).unwrap()
}

/// Runs every job that is due, as the thread beside the writer does.
fn work(journal: &mut Journal, disk: &StagedDisk, now_ns: i64) {
    while let Some(job) = journal.next_job(now_ns) {
        journal.job_done(job.run(disk), now_ns);
    }
}

fn bytes_of(i: u64) -> Body {
    Body::Link(LinkWhat::Bytes(Bytes::from(vec![i as u8; 100])))
}

/// Appends `n` reads 10 ms apart; returns the sequence numbers taken.
fn record(journal: &mut Journal, disk: &StagedDisk, from: u64, n: u64) -> Vec<u64> {
    (from..from + n)
        .filter_map(|i| {
            let now_ns = i as i64 * 10 * MS;
            let seq = journal.append(now_ns, DeviceIdx(0), &bytes_of(i));
            journal.commit(now_ns);
            work(journal, disk, now_ns);
            seq
        })
        .collect()
}

fn read(disk: &StagedDisk) -> (Vec<Record>, Vec<Damage>) {
    let reader = JournalReader::open(Arc::new(disk.clone()), Path::new(DIR), "000001-abc123").unwrap();
    let (mut records, mut damages) = (Vec::new(), Vec::new());
    for item in reader.records() {
        match item.unwrap() {
            Item::Record(record) => records.push(record),
            Item::Damage(damage) => damages.push(damage),
            Item::Opening { .. } => {}
        }
    }
    (records, damages)
}

fn seqs(records: &[Record]) -> Vec<u64> {
    records.iter().map(|record| record.seq).collect()
}

#[test]
fn what_is_appended_is_read_back_over_many_segments() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, small());
    let taken = record(&mut journal, &disk, 0, 200);
    let (records, damages) = read(&disk);
    assert_eq!((seqs(&records), damages), (taken, vec![]));
    assert!((0..200).all(|i| records[i as usize].body == bytes_of(i)));
    assert!(disk.counts()[&Operation::Create] > 5, "{:?}", disk.counts());
    assert_eq!(journals(&disk, Path::new(DIR)).unwrap(), ["000001-abc123"]);
}

#[test]
fn a_killed_writer_loses_nothing_it_committed() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, small());
    let taken = record(&mut journal, &disk, 0, 77);
    assert_eq!(seqs(&read(&disk.after_kill()).0), taken);
}

#[test]
fn a_failed_sync_is_not_tried_again_and_costs_nothing() {
    let disk = StagedDisk::default();
    disk.fail(Operation::Sync, 4, Fault::Error(5));
    let mut journal = begin(&disk, small());
    let taken = record(&mut journal, &disk, 0, 30);
    journal.sync_soon();
    work(&mut journal, &disk, 1_000 * MS);
    assert!(journal.is_clean());
    assert_eq!(journal.health(0).segments_given_up, 1);
    for seed in 0..20 {
        let after = disk.after_power_cut(&mut draws(seed));
        assert_eq!(seqs(&read(&after).0), taken, "seed {seed}");
    }
    let notices = journal.take_notices();
    assert!(notices.iter().any(|notice| notice.contains("syncing failed")), "{notices:?}");
}

#[test]
fn an_append_that_fails_midway_is_repeated_whole_in_the_next_segment() {
    for nth in 1..40 {
        for fault in [Fault::Error(5), Fault::Error(28), Fault::Short(3)] {
            let disk = StagedDisk::default();
            let mut journal = begin(&disk, small());
            disk.fail(Operation::Append, nth + 1, Fault::Short(11));
            disk.fail(Operation::Append, nth + 2, fault);
            let taken = record(&mut journal, &disk, 0, 60);
            let (records, damages) = read(&disk);
            assert_eq!(seqs(&records), taken, "append {nth}, {fault:?}");
            assert!(!damages.iter().any(|damage| matches!(damage, Damage::Missing { .. })), "{damages:?}");
        }
    }
}

#[test]
fn on_a_full_disk_the_trial_can_still_be_closed_and_the_loss_is_told() {
    let disk = StagedDisk::default();
    disk.set_capacity(Some(11_000));
    let mut journal = begin(&disk, small());
    let taken = record(&mut journal, &disk, 0, 150);
    assert!(taken.len() < 100 && journal.is_refusing());
    let close = Body::TrialClose(TrialClose {
        trial_id: "000001-abcdef".into(),
        reason: "disk full".into(),
        person: String::new(),
    });
    let closing_seq = journal.append(2000 * MS, DeviceIdx(0), &close).expect("room for the closing record");
    journal.commit(2000 * MS);
    journal.sync_soon();
    work(&mut journal, &disk, 2001 * MS);
    assert_eq!(read(&disk).0.last().map(|record| (record.seq, &record.body)), Some((closing_seq, &close)));

    disk.set_capacity(None);
    work(&mut journal, &disk, 3000 * MS);
    let later = record(&mut journal, &disk, 301, 5);
    assert_eq!(later.len(), 5);
    let (records, _) = read(&disk);
    let lost: u64 = records
        .iter()
        .filter_map(|record| match record.body {
            Body::Lost(lost) => Some(lost.n_events),
            _ => None,
        })
        .sum();
    assert_eq!(lost, 150 - taken.len() as u64);
    assert_eq!(journal.health(0).lost_events, lost);
}

#[test]
fn a_power_cut_takes_at_most_what_was_not_synced() {
    for seed in 0..300 {
        let disk = StagedDisk::default();
        let mut journal = begin(&disk, small());
        let n = 1 + seed % 97;
        let taken = record(&mut journal, &disk, 0, n);
        let after = disk.after_power_cut(&mut draws(seed));
        let (records, _) = read(&after);
        // 50 ms between syncs at a read each 10 ms: the last six reads are at risk, no other.
        let safe = taken.len().saturating_sub(6);
        assert_eq!(seqs(&records)[..safe], taken[..safe], "seed {seed}");
        assert!(records.iter().all(|record| record.body == bytes_of(record.seq - 1)), "seed {seed}");
    }
}

#[test]
fn a_journal_cut_at_any_byte_gives_every_whole_record_before_the_cut() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, Settings { segment_bytes: 1 << 20, ..small() });
    record(&mut journal, &disk, 0, 12);
    let path = Path::new(DIR).join(segment_name("000001-abc123", 1));
    let whole = disk.content(&path).unwrap();
    let (records, _) = read(&disk);
    let record_len = frame::record_bytes(100);
    let opening_len = whole.len() - 12 * record_len;
    for n in 1..whole.len() {
        let cut = StagedDisk::default();
        cut.create_new(&path).unwrap().append(&whole[..n]).unwrap();
        let opened = JournalReader::open(Arc::new(cut.clone()), Path::new(DIR), "000001-abc123");
        if n < opening_len {
            assert!(opened.is_err(), "cut at {n}");
            continue;
        }
        let (found, damages) = read(&cut);
        let n_whole = (n - opening_len) / record_len;
        assert_eq!(found, records[..n_whole], "cut at {n}");
        assert_eq!(damages.len(), usize::from(!(n - opening_len).is_multiple_of(record_len)), "cut at {n}");
    }
}

#[test]
fn segments_beyond_the_budget_go_but_never_one_a_trial_needs() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, Settings { budget_bytes: 10_000, ..small() });
    record(&mut journal, &disk, 0, 4000);
    journal.pin(3000);
    journal.release();
    work(&mut journal, &disk, 50_000 * MS);
    let (records, _) = read(&disk);
    assert!((900..=1000).contains(&records[0].seq), "lead-in of 2000 records kept: first {}", records[0].seq);
    journal.set_pin(None);
    journal.release();
    work(&mut journal, &disk, 50_000 * MS);
    assert!(journal.health(0).own_bytes <= 10_000);
    assert_eq!(read(&disk).0.last().map(|record| record.seq), Some(4000));
}

#[test]
fn a_preroll_begins_at_the_last_record_before_it() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, small());
    record(&mut journal, &disk, 0, 100);
    assert_eq!(journal.seq_at(505 * MS), (51, 500 * MS));
    assert_eq!(journal.seq_at(-5), (1, 0));
}

#[test]
fn exposure_is_measured_through_a_stall() {
    let clock_ns = Arc::new(std::sync::atomic::AtomicI64::new(0));
    let disk = StagedDisk::new(Arc::clone(&clock_ns));
    let mut journal = begin(&disk, small());
    record(&mut journal, &disk, 0, 50);
    assert!(journal.health(0).exposure_ns_max <= 60 * MS);
    disk.fail(Operation::Sync, disk.counts()[&Operation::Sync] + 1, Fault::Stall(5_000 * MS));
    journal.append(500 * MS, DeviceIdx(0), &bytes_of(1));
    journal.commit(500 * MS);
    let job = journal.next_job(600 * MS).unwrap();
    let outcome = job.run(&disk);
    journal.job_done(outcome, 600 * MS + clock_ns.load(std::sync::atomic::Ordering::SeqCst));
    assert!(journal.health(5_600 * MS).exposure_ns_lately() >= 5_000 * MS);
}

#[test]
fn what_is_written_while_a_sync_runs_is_as_old_as_it_is() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, small());
    work(&mut journal, &disk, 0);
    let put = |journal: &mut Journal, now_ns| {
        journal.append(now_ns, DeviceIdx(0), &bytes_of(1));
        journal.commit(now_ns);
    };
    put(&mut journal, 100 * MS);
    let sync = journal.next_job(150 * MS).unwrap();
    put(&mut journal, 160 * MS);
    journal.job_done(sync.run(&disk), 300 * MS);
    assert_eq!(journal.health(300 * MS).exposure_ns_max, 200 * MS);
    assert_eq!(journal.health(300 * MS).exposure_ns_now, 140 * MS, "the second record waits since 160 ms");
    let sync = journal.next_job(300 * MS).expect("it is overdue: no pause before the next sync");
    assert!(sync.is_sync());
    journal.job_done(sync.run(&disk), 310 * MS);
    assert_eq!(journal.health(310 * MS).exposure_ns_now, 0);
}

#[test]
fn a_sync_that_fails_late_leaves_its_records_exposed_since_they_were_written() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, small());
    work(&mut journal, &disk, 0);
    journal.append(100 * MS, DeviceIdx(0), &bytes_of(1));
    journal.commit(100 * MS);
    let failed = Outcome::SyncFailed { error: io::Error::from_raw_os_error(5) };
    assert!(journal.next_job(150 * MS).unwrap().is_sync());
    journal.job_done(failed, 400 * MS);
    work(&mut journal, &disk, 420 * MS);
    assert_eq!(journal.health(420 * MS).exposure_ns_max, 320 * MS);
    assert!(journal.is_clean());
}

#[test]
fn data_wait_fifty_milliseconds_for_a_sync_and_an_event_does_not_wait() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, small());
    work(&mut journal, &disk, 0);
    journal.append(100 * MS, DeviceIdx(0), &bytes_of(1));
    journal.commit(100 * MS);
    assert!(journal.next_job(149 * MS).is_none());
    assert!(journal.next_job(150 * MS).is_some_and(|job| job.is_sync()));
    let mut journal = begin(&StagedDisk::default(), small());
    work(&mut journal, &disk, 0);
    let event = |kind: &str| crate::journal::EventBody {
        kind: kind.into(),
        source: "daemon".into(),
        person: None,
        text: "now".into(),
    };
    journal.append(100 * MS, DeviceIdx(0), &Body::Event(event("mark")));
    journal.commit(100 * MS);
    assert!(journal.next_job(100 * MS).is_some_and(|job| job.is_sync()));
}

#[test]
fn a_removal_that_takes_long_holds_up_no_sync() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, small());
    work(&mut journal, &disk, 0);
    journal.forget(Path::new(DIR).join("000000-000000-000001.tjl"));
    let chore = journal.next_job(10 * MS).unwrap();
    assert!(matches!(chore, Job::Remove { .. }), "{chore:?}");
    journal.append(20 * MS, DeviceIdx(0), &bytes_of(1));
    journal.commit(20 * MS);
    assert!(journal.next_job(80 * MS).is_some_and(|job| job.is_sync()), "while the removal is under way");
    assert!(journal.next_job(80 * MS).is_none(), "one of each at a time");
}

#[test]
fn a_segment_made_ahead_too_late_is_not_begun_behind_a_later_one() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, small());
    let sync = journal.next_job(0).unwrap();
    let prepare = journal.next_job(0).unwrap();
    assert!(sync.is_sync() && matches!(prepare, Job::Prepare { .. }));
    disk.fail(Operation::Sync, 1, Fault::Error(5));
    journal.append(0, DeviceIdx(0), &bytes_of(0));
    journal.commit(0);
    journal.job_done(sync.run(&disk), 10 * MS);
    journal.job_done(prepare.run(&disk), 10 * MS);
    record(&mut journal, &disk, 2, 100);
    assert_eq!(seqs(&read(&disk).0), (1..=101).collect::<Vec<_>>());
}

#[test]
fn room_a_killed_writer_left_reserved_counts_against_the_budget() {
    let disk = StagedDisk::default();
    let mut journal = begin(&disk, small());
    record(&mut journal, &disk, 0, 5);
    let killed = disk.after_kill();
    let reader = JournalReader::open(Arc::new(killed.clone()), Path::new(DIR), "000001-abc123").unwrap();
    let left = &reader.segments()[0];
    assert_eq!(left.held_bytes, small().segment_bytes + small().reserve_bytes);
    let start = Start { segment: 9, seq: 100, ..Start::fresh() };
    let mut next = Journal::begin(Arc::new(killed), Path::new(DIR), origin(), start, small(), 0).unwrap();
    next.adopt(left, 6);
    assert!(next.health(0).own_bytes > left.held_bytes);
}

/// Sebastiano Vigna's SplitMix64, for drawing what survives.
fn draws(seed: u64) -> impl FnMut() -> u64 {
    let mut state = seed;
    move || {
        state = state.wrapping_add(0x9e37_79b9_7f4a_7c15);
        let mut z = state;
        z = (z ^ (z >> 30)).wrapping_mul(0xbf58_476d_1ce4_e5b9);
        z = (z ^ (z >> 27)).wrapping_mul(0x94d0_49bb_1331_11eb);
        z ^ (z >> 31)
    }
}
