//! Every operation of the disk fails in turn, the daemon is killed and the power is cut, under the daemon's own storage
//! code, in virtual time.
//!
//! Promises checked: what was taken is read back after a kill, all of it; after a power cut all that was synced is
//! there; nothing is ever read that was not written; what was not taken is counted. A fault that is never met fails the
//! sweep. What a disk may do to unsynced data: see the staged disk.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

use std::collections::BTreeMap;
use std::path::Path;
use std::sync::Arc;
use std::sync::atomic::{AtomicI64, Ordering};

use bytes::Bytes;
use tautrail::journal::{
    Body, DeviceAtOpen, Disk, EventBody, Fault, Item, Journal, JournalReader, Operation, Origin, Settings, StagedDisk,
    Start, TrialClose, TrialOpen,
};
use tautrail::link::{DeviceIdx, LinkWhat};

const DIR: &str = "archive/journal";
const ID: &str = "000001-abc123";
const TRIAL: &str = "000001-fedcba";
const NEVER_BEGUN: &str = "000000-000000-000001.tjl";
const MS: i64 = 1_000_000;
const N_READS: u64 = 130;
const OPENED_AT: u64 = 40;
const CLOSED_AT: u64 = 110;
const EIO: i32 = 5;
const ENOSPC: i32 = 28;

/// What a run left behind.
struct Run {
    disk: StagedDisk,
    /// Every record taken, by sequence number.
    taken: BTreeMap<u64, Body>,
    n_refused: u64,
    /// Records before this one were said to be on the disk.
    durable_before: u64,
}

fn read_body(i: u64) -> Body {
    Body::Link(LinkWhat::Bytes(Bytes::from(i.to_le_bytes().repeat(12))))
}

fn event(text: String) -> Body {
    Body::Event(EventBody { kind: "journal".into(), source: "journal".into(), person: None, text })
}

fn body(i: u64, first_seq: u64) -> Body {
    let trial_id = TRIAL.to_owned();
    match i {
        OPENED_AT => Body::TrialOpen(TrialOpen {
            trial_id,
            first_seq,
            first_host_ns: 0,
            reason: "sweep".into(),
            person: String::new(),
            continues: None,
        }),
        CLOSED_AT => Body::TrialClose(TrialClose { trial_id, reason: "sweep".into(), person: String::new() }),
        _ => read_body(i),
    }
}

/// A disk on which an earlier run left a file that it never began.
fn stage(clock_ns: &Arc<AtomicI64>) -> StagedDisk {
    let disk = StagedDisk::new(Arc::clone(clock_ns));
    disk.create_new(&Path::new(DIR).join(NEVER_BEGUN)).expect("a file");
    disk.after_kill() // counts from here on
}

/// Records as the recorder does, a read each 10 ms, for `n_reads`; `None` when the journal refused to start.
fn record(disk: StagedDisk, clock_ns: &AtomicI64, n_reads: u64) -> Option<Run> {
    let device = DeviceAtOpen { name: "winch-node".into(), port: "p".into(), describe_hex: String::new() };
    let origin = Origin {
        journal_id: ID.into(),
        program_version: "0".into(),
        kernel_boot_id: "boot".into(),
        rig_text: "invented".into(),
        devices: vec![device],
    };
    let settings = Settings {
        segment_bytes: 4096,
        reserve_bytes: 2048,
        tail_bytes_max: 1 << 16,
        budget_bytes: 12_000,
        ..Settings::default()
    };
    let now = || clock_ns.load(Ordering::SeqCst);
    let mut journal =
        Journal::begin(Arc::new(disk.clone()), Path::new(DIR), origin, Start::fresh(), settings, now()).ok()?;
    journal.forget(Path::new(DIR).join(NEVER_BEGUN));
    let (mut taken, mut n_refused) = (BTreeMap::new(), 0);
    for i in 1..=n_reads {
        clock_ns.fetch_add(10 * MS, Ordering::SeqCst);
        let before = journal.next_seq();
        let body = body(i, before.saturating_sub(10).max(1));
        match journal.append(now(), DeviceIdx(0), &body) {
            Some(seq) => {
                taken.insert(seq, body);
            }
            None => n_refused += 1,
        }
        if i == OPENED_AT {
            journal.pin(before);
        }
        journal.release();
        journal.commit(now());
        while let Some(job) = journal.next_job(now()) {
            let outcome = job.run(&disk);
            journal.job_done(outcome, now());
        }
        for notice in journal.take_notices() {
            if let Some(seq) = journal.append(now(), DeviceIdx(0), &event(notice.clone())) {
                taken.insert(seq, event(notice));
            }
        }
    }
    journal.commit(now());
    let durable_before = journal.durable_before();
    Some(Run { disk, taken, n_refused, durable_before })
}

/// What a reader finds, `lost` records apart; panics where it finds what was never written.
#[track_caller]
fn read(disk: &StagedDisk, run: &Run, what: &str) -> BTreeMap<u64, Body> {
    let Ok(reader) = JournalReader::open(Arc::new(disk.clone()), Path::new(DIR), ID) else { return BTreeMap::new() };
    let mut found = BTreeMap::new();
    for item in reader.records() {
        if let Item::Record(record) = item.expect("the staged disk reads")
            && !matches!(record.body, Body::Lost(_))
        {
            assert_eq!(
                run.taken.get(&record.seq),
                Some(&record.body),
                "{what}: record {} was never written",
                record.seq
            );
            found.insert(record.seq, record.body);
        }
    }
    for trial in reader.trials().expect("the staged disk reads") {
        assert_eq!(trial.trial_id, TRIAL, "{what}");
        assert!(trial.last_seq <= *found.keys().last().expect("a record"), "{what}: a trial claims more than there is");
    }
    found
}

/// The first record that must still be there: those before it were let go by the budget.
fn first_kept(found: &BTreeMap<u64, Body>) -> u64 {
    found.keys().next().copied().unwrap_or(1)
}

#[track_caller]
fn check(run: &Run, what: &str) {
    let after_kill = read(&run.disk.after_kill(), run, what);
    let first = first_kept(&after_kill);
    let held: Vec<u64> = run.taken.keys().copied().filter(|&seq| seq >= first).collect();
    assert_eq!(after_kill.keys().copied().collect::<Vec<_>>(), held, "{what}: after a kill");
    assert!(first < OPENED_AT, "{what}: the pinned trial's records are kept, the first is {first}");
    for seed in 0..3 {
        let cut = run.disk.after_power_cut(&mut draws(seed));
        let found = read(&cut, run, what);
        let synced = run.taken.keys().copied().filter(|&seq| seq >= first && seq < run.durable_before);
        for seq in synced {
            assert!(found.contains_key(&seq), "{what}: synced record {seq} is gone after power cut {seed}");
        }
    }
}

#[test]
fn no_single_fault_costs_a_record_that_was_taken() {
    let clock_ns = Arc::new(AtomicI64::new(0));
    let clean = record(stage(&clock_ns), &clock_ns, N_READS).expect("a sound disk");
    check(&clean, "no fault");
    assert_eq!(clean.n_refused, 0);
    let mut rows = Vec::new();
    for (operation, n_times) in clean.disk.counts() {
        for fault in [Fault::Error(EIO), Fault::Error(ENOSPC), Fault::Short(5), Fault::Stall(5_000 * MS)] {
            if matches!(fault, Fault::Short(_)) && operation != Operation::Append {
                continue;
            }
            let mut n_starts_refused = 0;
            for nth in 1..=n_times {
                let what = format!("{operation:?} {nth}, {fault:?}");
                let clock_ns = Arc::new(AtomicI64::new(0));
                let disk = stage(&clock_ns);
                disk.fail(operation, nth, fault);
                match record(disk.clone(), &clock_ns, N_READS) {
                    Some(run) => {
                        check(&run, &what);
                        assert_eq!(run.n_refused, 0, "{what}: a single fault loses nothing");
                    }
                    None => n_starts_refused += 1,
                }
                assert!(disk.n_faults_hit() > 0, "{what}: never met");
            }
            rows.push(format!("{operation:?} × {n_times}, {fault:?}: {n_starts_refused} starts refused, 0 reads lost"));
        }
    }
    println!("{}", rows.join("\n"));
    for operation in [Operation::Create, Operation::Append, Operation::Reserve, Operation::Sync, Operation::Trim] {
        assert!(clean.disk.counts().contains_key(&operation), "{operation:?} was never swept");
    }
    for operation in [Operation::Remove, Operation::SyncDir, Operation::FreeBytes, Operation::CreateDir] {
        assert!(clean.disk.counts().contains_key(&operation), "{operation:?} was never swept");
    }
}

#[test]
fn a_kill_or_a_power_cut_at_any_instant_keeps_the_promise() {
    for n_reads in 1..=N_READS {
        let clock_ns = Arc::new(AtomicI64::new(0));
        let run = record(stage(&clock_ns), &clock_ns, n_reads).expect("a sound disk");
        check(&run, &format!("after {n_reads} reads"));
        // One sync interval of 50 ms at a read each 10 ms, and the read of the sync itself.
        let at_risk = run.taken.keys().filter(|&&seq| seq >= run.durable_before).count();
        assert!(at_risk <= 6, "after {n_reads} reads {at_risk} are not on the disk");
    }
}

#[test]
fn a_disk_that_stays_full_keeps_the_closing_record() {
    for capacity in (10_000..40_000).step_by(997) {
        let clock_ns = Arc::new(AtomicI64::new(0));
        let disk = stage(&clock_ns);
        disk.set_capacity(Some(capacity));
        let Some(run) = record(disk, &clock_ns, N_READS) else { continue };
        let found = read(&run.disk.after_kill(), &run, &format!("capacity {capacity}"));
        let closed = found.values().any(|body| matches!(body, Body::TrialClose(_)));
        assert!(closed, "capacity {capacity}: the trial is closed on the disk");
    }
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
