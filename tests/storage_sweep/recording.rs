//! The recorder's code on a disk that fails in one place, dies, or stays full.

use tautrail::journal::{Fault, Operation, Report};

use crate::run::{MS, N_READS, Virtual, read, record, stage};
use crate::{table_head, table_row};

const EIO: i32 = 5;
const ENOSPC: i32 = 28;
pub const FAULTS: [Fault; 4] = [Fault::Error(EIO), Fault::Error(ENOSPC), Fault::Short(5), Fault::Stall(5_000 * MS)];

/// A write that is cut short is a fault of appends only.
pub fn applies(fault: Fault, operation: Operation) -> bool {
    !matches!(fault, Fault::Short(_)) || operation == Operation::Append
}

#[test]
fn no_single_fault_costs_a_record_that_was_taken() {
    let clock = Virtual::default();
    let clean = record(stage(&clock), &clock, N_READS).expect("a sound disk");
    clean.check("no fault");
    assert!(clean.reports.iter().any(|report| matches!(report, Report::TrialClosed { durable: true, .. })));
    use Operation::{Append, Create, CreateDir, FreeBytes, Remove, Reserve, Sync, SyncDir, Trim};
    for operation in [Append, Create, CreateDir, FreeBytes, Remove, Reserve, Sync, SyncDir, Trim] {
        assert!(clean.disk.counts().contains_key(&operation), "{operation:?} was never swept");
    }
    table_head();
    for (operation, n_times) in clean.disk.counts() {
        for fault in FAULTS.into_iter().filter(|&fault| applies(fault, operation)) {
            let refused = (1..=n_times).filter(|&nth| !survives(operation, nth, fault)).count();
            table_row("recording", &format!("{operation:?}"), n_times, &format!("{fault:?}"), refused as u64);
            assert!(refused <= 4, "{operation:?}, {fault:?}: only a start may be refused, {refused} were");
        }
    }
}

/// False: the journal refused to start, which loses nothing.
fn survives(operation: Operation, nth: u64, fault: Fault) -> bool {
    let what = format!("{operation:?} {nth}, {fault:?}");
    let clock = Virtual::default();
    let disk = stage(&clock);
    disk.fail(operation, nth, fault);
    let run = record(disk.clone(), &clock, N_READS);
    assert!(disk.n_faults_hit() > 0, "{what}: never met");
    let Some(run) = run else { return false };
    run.check(&what);
    assert_eq!(run.lost_events, 0, "{what}: a single fault loses nothing");
    let n_given_up = run.reports.iter().filter(|report| matches!(report, Report::Notice(_))).count();
    let is_told = !matches!(fault, Fault::Error(_)) || !matches!(operation, Operation::Append | Operation::Sync);
    assert!(is_told || n_given_up > 0, "{what}: the crew is told");
    true
}

#[test]
fn a_kill_or_a_power_cut_at_any_instant_keeps_the_promise() {
    for n_reads in 1..=N_READS {
        let clock = Virtual::default();
        let run = record(stage(&clock), &clock, n_reads).expect("a sound disk");
        run.check(&format!("after {n_reads} reads"));
        let seen = read(&run.disk.after_kill(), "a kill");
        // A sync is begun at 50 ms and ends 10 ms later, at a read each 10 ms.
        let at_risk = seen.reads.range(run.durable_before..).count();
        assert!(at_risk <= 7, "after {n_reads} reads {at_risk} are not on the disk");
    }
}

#[test]
fn a_disk_that_stays_full_keeps_the_closing_record_and_says_what_is_missing() {
    for capacity in (10_000..34_000).step_by(997) {
        let clock = Virtual::default();
        let disk = stage(&clock);
        disk.set_capacity(Some(capacity));
        let Some(run) = record(disk, &clock, N_READS) else { continue };
        let seen = read(&run.disk.after_kill(), &format!("capacity {capacity}"));
        assert!(seen.trial_is_closed(), "capacity {capacity}: the trial is closed on the disk");
        let (n_found, n_given) = (seen.reads.len() as u64, run.given.len() as u64);
        assert!(n_found + run.lost_events >= n_given, "capacity {capacity}: {n_found} found, {} lost", run.lost_events);
    }
}
