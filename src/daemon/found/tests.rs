use super::*;
use crate::journal::{Body, Journal, Origin, Settings, StagedDisk, TrialClose, TrialOpen};
use crate::link::DeviceIdx;

const ARCHIVE: &str = "archive";
const JOURNALS: &str = "archive/journal";
const TRIAL: &str = "000004-fedcba";
const HERE: Present<'static> = Present { kernel_boot_id: "boot", rig_text: "rig" };

fn journal(disk: &StagedDisk, id: &str) -> Journal {
    let origin = Origin {
        journal_id: id.into(),
        program_version: "0".into(),
        kernel_boot_id: "boot".into(),
        rig_text: "rig".into(),
        devices: Vec::new(),
    };
    Journal::begin(Arc::new(disk.clone()), Path::new(JOURNALS), origin, Start::fresh(), Settings::default(), 0).unwrap()
}

fn open_trial(journal: &mut Journal) {
    journal.append(1, DeviceIdx(0), &Body::Heartbeat);
    let open = TrialOpen {
        trial_id: TRIAL.into(),
        first_seq: 1,
        first_host_ns: 1,
        reason: "tension".into(),
        person: String::new(),
        continues: None,
    };
    journal.append(2, DeviceIdx(0), &Body::TrialOpen(open));
    journal.append(3, DeviceIdx(0), &Body::Heartbeat);
    journal.commit(3);
}

/// A disk on which a daemon was killed with a trial open.
fn left_open() -> StagedDisk {
    let disk = StagedDisk::default();
    open_trial(&mut journal(&disk, "000007-abc123"));
    disk.after_kill()
}

fn found(disk: &StagedDisk, present: Present<'_>, sealed: bool) -> Found {
    found_knowing(disk, present, sealed, None)
}

fn found_knowing(disk: &StagedDisk, present: Present<'_>, sealed: bool, settled: Option<Settled>) -> Found {
    let disk: Arc<dyn Disk> = Arc::new(disk.clone());
    let known = Known { is_sealed: &|_| sealed, settled: &|_| settled };
    look(&disk, Path::new(ARCHIVE), Path::new(JOURNALS), present, known).unwrap()
}

#[test]
fn a_killed_daemon_s_trial_goes_on_in_the_same_journal() {
    let found = found(&left_open(), HERE, false);
    let resumed = found.resumed.unwrap();
    assert_eq!(resumed.journal_id, "000007-abc123");
    assert_eq!((resumed.start.segment, resumed.start.seq, resumed.last_host_ns), (2, 4, 3));
    assert_eq!(resumed.open_trial.unwrap().trial_id, TRIAL);
    assert_eq!((found.unsealed, found.next_trial_number), (vec![], 5));
}

#[test]
fn after_a_restart_of_the_machine_or_with_another_rig_file_the_trial_is_sealed_and_a_new_journal_begins() {
    for present in [Present { kernel_boot_id: "other", ..HERE }, Present { rig_text: "other", ..HERE }] {
        let found = found(&left_open(), present, false);
        assert_eq!(found.resumed, None);
        assert_eq!(found.next_journal_number, 8);
        let n_bytes = found.unsealed[0].n_bytes;
        assert!(n_bytes > 100, "{n_bytes} bytes of journal");
        let unsealed = Unsealed { journal_id: "000007-abc123".into(), trial_id: TRIAL.into(), first_seq: 1, n_bytes };
        assert_eq!(found.unsealed, [unsealed]);
        assert_eq!(found.unfinished.as_deref(), Some(TRIAL));
        assert_eq!(found.segments, [], "its segments stay until it is sealed");
    }
}

#[test]
fn a_trial_that_recover_sealed_does_not_go_on() {
    let found = found(&left_open(), HERE, true);
    assert_eq!(found.resumed.unwrap().open_trial, None);
    assert_eq!((found.unsealed, found.unfinished.as_deref()), (vec![], Some(TRIAL)));
}

#[test]
fn a_closed_trial_without_a_file_is_sealed_by_the_next_start() {
    let disk = StagedDisk::default();
    let mut journal = journal(&disk, "000007-abc123");
    open_trial(&mut journal);
    let close = TrialClose { trial_id: TRIAL.into(), reason: "rest".into(), person: String::new() };
    journal.append(4, DeviceIdx(0), &Body::TrialClose(close));
    journal.commit(4);
    let found = found(&disk.after_kill(), HERE, false);
    assert_eq!(found.unsealed.len(), 1);
    assert_eq!(found.resumed.unwrap().open_trial, None);
}

#[test]
fn an_empty_archive_begins_at_one() {
    let found = found(&StagedDisk::default(), HERE, false);
    assert_eq!((found.next_journal_number, found.next_trial_number, found.resumed), (1, 1, None));
}

#[test]
fn a_segment_made_ahead_and_never_begun_is_cleared_away() {
    let disk = left_open();
    let path = Path::new(JOURNALS).join("000007-abc123-000002.tjl");
    disk.create_new(&path).unwrap();
    let found = found(&disk, HERE, false);
    assert_eq!(found.never_begun, [path]);
    assert_eq!(found.resumed.unwrap().start.segment, 3, "its number is not used again");
}

#[test]
fn what_is_noted_as_done_with_is_not_read_again() {
    let disk = StagedDisk::default();
    let mut older = journal(&disk, "000006-abc123");
    open_trial(&mut older);
    for i in 4..4000 {
        older.append(i, DeviceIdx(0), &Body::Heartbeat);
    }
    older.commit(4000);
    journal(&disk, "000007-abc123").commit(1);
    let disk = disk.after_kill();
    let fresh = found(&disk, HERE, true);
    assert_eq!(fresh.done_with, ["000006-abc123"], "read, and found to be done with");
    let settled = Settled { from_segment: None, trial_number: 9 };
    // Its trial would be unsealed if it were looked at.
    let later = found_knowing(&disk, HERE, false, Some(settled));
    assert_eq!((later.unsealed, later.next_trial_number), (vec![], 10));
    assert_eq!(later.done_with, [""; 0], "noted already");
    assert_eq!(later.segments.len(), 2, "its segments are looked after all the same");
}

#[test]
fn a_journal_is_read_from_the_segment_that_is_not_done_with() {
    let disk = left_open();
    let from = |number| Some(Settled { from_segment: Some(number), trial_number: 4 });
    let resumed = found_knowing(&disk, HERE, false, from(1)).resumed.unwrap();
    assert_eq!(resumed.open_trial.unwrap().trial_id, TRIAL);
    // A note of a segment that is not there any more: the last one is read.
    let resumed = found_knowing(&disk, HERE, false, from(700)).resumed.unwrap();
    assert_eq!((resumed.start.seq, resumed.open_trial.is_some()), (4, true));
}

#[test]
fn a_journal_that_cannot_be_read_keeps_nobody_from_recording() {
    for operation in [crate::journal::Operation::Open, crate::journal::Operation::List] {
        let disk = left_open();
        open_trial(&mut journal(&disk, "000008-abc123"));
        let disk = disk.after_kill();
        // Open: of the older journal's only segment. List: the archive, the journals, then the older journal's segments.
        let nth = if operation == crate::journal::Operation::Open { 1 } else { 3 };
        disk.fail(operation, nth, crate::journal::Fault::Error(5));
        let found = found(&disk, HERE, false);
        assert!(disk.n_faults_hit() == 1 && found.unreadable.len() == 1, "{operation:?}: {found:?}");
        assert!(found.unreadable[0].path().starts_with(JOURNALS), "{operation:?}: {found:?}");
        assert_eq!(found.resumed.as_ref().unwrap().journal_id, "000008-abc123", "the sound one goes on");
        assert_eq!((found.unsealed.len(), found.next_journal_number), (0, 9));
        assert!(!found.segments.iter().any(|(segment, _)| segment.open.journal_id == "000007-abc123"), "left alone");
    }
}

#[test]
fn a_trial_that_a_full_disk_ended_under_tension_is_what_the_next_one_continues() {
    for (slack, unfinished) in [(false, Some(TRIAL.to_owned())), (true, None)] {
        let disk = StagedDisk::default();
        let mut journal = journal(&disk, "000007-abc123");
        open_trial(&mut journal);
        let reason = words::disk_full(slack).to_owned();
        let close = TrialClose { trial_id: TRIAL.into(), reason, person: String::new() };
        journal.append(4, DeviceIdx(0), &Body::TrialClose(close));
        journal.commit(4);
        let found = found(&disk.after_kill(), HERE, false);
        assert_eq!((found.unfinished, found.unsealed.len()), (unfinished, 1));
    }
}
