//! The start after a crash, on the disk that the crash left, with a fault in each place of that start.

use std::collections::BTreeMap;

use tautrail::journal::{Operation, StagedDisk};

use crate::recording::{FAULTS, applies};
use crate::run::{Run, TRIAL, Virtual, go_on, journal_files, read, record, stage, start_again};
use crate::{draws, table_head, table_row};

/// Killed in the middle of the trial.
const KILLED_AT: u64 = 90;
const MORE_READS: u64 = 12;

fn crashed() -> (Virtual, Run) {
    let clock = Virtual::default();
    let run = record(stage(&clock), &clock, KILLED_AT).expect("a sound disk");
    (clock, run)
}

/// Starts on what the crash left and records a little; false when it refused. Either way the old files are as they were.
#[track_caller]
fn start_keeps_everything(disk: &StagedDisk, clock: &Virtual, before: &Run, what: &str) -> bool {
    let (old_files, old) = (journal_files(disk), read(&disk.after_kill(), what));
    let started = start_again(disk, clock);
    let went_on = started.is_ok();
    if let Ok((found, journal)) = started {
        let goes_on = found.resumed.as_ref().is_some_and(|resumed| resumed.open_trial.is_some());
        assert_eq!(goes_on, !old.trials.is_empty(), "{what}: the trial goes on if its opening is there");
        let run = go_on(&found, journal, disk.clone(), clock, MORE_READS);
        assert_eq!(run.lost_events, 0, "{what}");
        let mut expected = old.numbers();
        expected.extend(&run.given);
        assert_eq!(read(&disk.after_kill(), what).numbers(), expected, "{what}: old and new");
    }
    assert!(old.numbers().is_subset(&before.given), "{what}");
    untouched(&old_files, &journal_files(disk), what);
    went_on
}

#[track_caller]
fn untouched(old: &BTreeMap<std::path::PathBuf, Vec<u8>>, new: &BTreeMap<std::path::PathBuf, Vec<u8>>, what: &str) {
    for (path, content) in old.iter().filter(|(_, content)| !content.is_empty()) {
        assert_eq!(new.get(path), Some(content), "{what}: {} was written again", path.display());
    }
}

#[test]
fn no_fault_in_the_start_after_a_crash_costs_a_record_or_touches_an_old_file() {
    let (clock, run) = crashed();
    assert!(start_keeps_everything(&run.disk.after_kill(), &clock, &run, "no fault"));
    let clean = run.disk.after_kill();
    assert!(start_under_fault(&clean, &clock, &run, "no fault"));
    for operation in [Operation::List, Operation::Open, Operation::SyncDir, Operation::Create, Operation::Remove] {
        assert!(clean.counts().contains_key(&operation), "{operation:?} was never swept");
    }
    table_head();
    for (operation, n_times) in clean.counts() {
        for fault in FAULTS.into_iter().filter(|&fault| applies(fault, operation)) {
            let mut n_refused = 0;
            for nth in 1..=n_times {
                let what = format!("{operation:?} {nth}, {fault:?}");
                let (clock, run) = crashed();
                let disk = run.disk.after_kill();
                disk.fail(operation, nth, fault);
                let went_on = start_under_fault(&disk, &clock, &run, &what);
                assert!(disk.n_faults_hit() > 0, "{what}: never met");
                if !went_on {
                    n_refused += 1;
                    let again = disk.after_kill();
                    assert!(start_keeps_everything(&again, &clock, &run, &what), "{what}: the next start works");
                }
            }
            table_row("next start", &format!("{operation:?}"), n_times, &format!("{fault:?}"), n_refused);
        }
    }
}

/// Like the above, but nothing else asks anything of this disk: the checks read through copies.
#[track_caller]
fn start_under_fault(disk: &StagedDisk, clock: &Virtual, before: &Run, what: &str) -> bool {
    let old_files = journal_files(&disk.after_kill());
    let started = start_again(disk, clock);
    let went_on = started.is_ok();
    if let Ok((found, journal)) = started {
        let run = go_on(&found, journal, disk.clone(), clock, MORE_READS);
        let mut expected = before.given.clone();
        expected.extend(&run.given);
        assert_eq!(read(&disk.after_kill(), what).numbers(), expected, "{what}: old and new");
        // A journal that this start could not read was set aside: its trial is found by the one after it.
        let (later, _) = start_again(&disk.after_kill(), clock).expect("a sound disk");
        let open = later.resumed.iter().filter_map(|resumed| resumed.open_trial.as_ref()).map(|trial| &trial.trial_id);
        let found = later.unsealed.iter().map(|unsealed| &unsealed.trial_id).chain(open).any(|id| id == TRIAL);
        assert!(found, "{what}: the trial is forgotten: {later:?}");
    }
    untouched(&old_files, &journal_files(&disk.after_kill()), what);
    went_on
}

#[test]
fn a_start_after_a_power_cut_at_any_instant_keeps_what_is_left() {
    for n_reads in (1..=KILLED_AT).step_by(3) {
        for seed in 0..3 {
            let clock = Virtual::default();
            let run = record(stage(&clock), &clock, n_reads).expect("a sound disk");
            let cut = run.disk.after_power_cut(&mut draws(seed));
            let what = format!("power cut {seed} after {n_reads} reads");
            assert!(start_keeps_everything(&cut, &clock, &run, &what), "{what}: starts");
        }
    }
}
