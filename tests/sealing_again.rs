//! Sealing again: the same records in other segments give the same bytes, and a kept journal is enough to seal from.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]

#[path = "support/journal.rs"]
mod journal_file;
mod support;

use std::path::{Path, PathBuf};
use std::process::Command;
use std::sync::Arc;

use journal_file::{JOURNAL_ID, JournalFile, TRIAL_ID, nominal, opened, opening};
use tautrail::archive::{Fate, ReleaseError, Sealed, kept, recover, release, seal};
use tautrail::journal::{
    Body, Clocks, Disk, Item, Journal, JournalReader, Origin, RealDisk, Settings, Start, TrialRange,
};

const PACE: f64 = 0.1;

/// Writes the records of the journal in `from` into `to` by the journal's own writer; gives the segments.
fn rewrite(from: &Path, to: &Path, settings: Settings) -> Vec<PathBuf> {
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let (reader, _) = opened(from);
    let open = opening(&journal_file::RIG_TEXT);
    let origin = Origin {
        journal_id: JOURNAL_ID.into(),
        program_version: open.program_version,
        kernel_boot_id: open.kernel_boot_id,
        rig_text: open.rig_text,
        devices: open.devices,
    };
    let dir = to.join("journal");
    let mut journal = Journal::begin(Arc::clone(&disk), &dir, origin, Start::fresh(), settings, 0).unwrap();
    for item in reader.records() {
        let Item::Record(record) = item.unwrap() else { continue };
        assert_eq!(journal.append(record.host_ns, record.device, &record.body), Some(record.seq));
        journal.commit(record.host_ns);
        while let Some(job) = journal.next_job(record.host_ns) {
            let outcome = job.run(&*disk);
            journal.job_done(outcome, record.host_ns);
        }
    }
    drop(journal);
    let reader = JournalReader::open(disk, &dir, JOURNAL_ID).unwrap();
    reader.segments().iter().map(|segment| segment.path.clone()).collect()
}

fn segments_of(segment_bytes: u64) -> Settings {
    Settings { segment_bytes, segment_ns: i64::MAX, ..Settings::default() }
}

fn sealed_bytes(dir: &Path, cut: impl Fn(TrialRange) -> TrialRange) -> Vec<u8> {
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let (reader, range) = opened(dir);
    let sealed = seal(&reader, &cut(range), dir, &disk).unwrap();
    let bytes = std::fs::read(&sealed.path).unwrap();
    std::fs::remove_file(&sealed.path).unwrap();
    bytes
}

#[test]
fn the_same_records_in_other_segments_give_the_same_bytes() {
    let source = tempfile::tempdir().unwrap();
    nominal(source.path(), PACE, true);
    let whole = |range: TrialRange| range;
    // Begins in the middle: a lead-in comes before it, of another length for every way to cut the segments.
    let later = |range: TrialRange| TrialRange { first_seq: range.last_seq / 2, ..range };
    let (one, half) = (sealed_bytes(source.path(), whole), sealed_bytes(source.path(), later));
    assert!(half.len() < one.len());
    for segment_bytes in [150_001, 40_003] {
        let cut = tempfile::tempdir().unwrap();
        let n_segments = rewrite(source.path(), cut.path(), segments_of(segment_bytes)).len();
        assert!(n_segments > 3, "{n_segments} segments");
        assert!(sealed_bytes(cut.path(), whole) == one, "segments of {segment_bytes} bytes: other bytes");
        assert!(sealed_bytes(cut.path(), later) == half, "segments of {segment_bytes} bytes, begun later: other bytes");
    }
}

fn real() -> Arc<dyn Disk> {
    Arc::new(RealDisk)
}

fn segment() -> PathBuf {
    Path::new("journal").join(tautrail::journal::segment_name(JOURNAL_ID, 1))
}

fn seal_in(dir: &Path) -> Sealed {
    let (reader, range) = opened(dir);
    seal(&reader, &range, dir, &real()).unwrap()
}

#[test]
fn the_journal_of_an_abnormal_trial_stays_until_a_person_lets_it_go() {
    let dir = tempfile::tempdir().unwrap();
    nominal(dir.path(), PACE, false);
    let journal = std::fs::read(dir.path().join(segment())).unwrap();
    let sealed = seal_in(dir.path());
    assert_eq!((sealed.outcome.as_str(), sealed.journal_kept), ("truncated", true));
    // What the recorder lets go of to stay within its budget.
    std::fs::remove_file(dir.path().join(segment())).unwrap();
    let [one] = &kept(dir.path()).unwrap()[..] else { panic!("one journal") };
    assert_eq!((one.trial_id.as_str(), one.n_bytes), (TRIAL_ID, journal.len() as u64));
    // It is enough to seal again from.
    std::fs::rename(&sealed.path, dir.path().join("elsewhere.h5")).unwrap();
    assert!(matches!(release(dir.path(), TRIAL_ID), Err(ReleaseError::NotSealed { .. })), "all there is of it");
    let again = recover(dir.path(), &real(), &mut |_| {}).unwrap().trials;
    assert!(matches!(&again[..], [one] if matches!(one.fate, Fate::Sealed(_))), "{again:?}");
    assert!(std::fs::read(&sealed.path).unwrap() == std::fs::read(dir.path().join("elsewhere.h5")).unwrap());
    let let_go = Command::new(env!("CARGO_BIN_EXE_tautrail"))
        .arg("recover")
        .arg(dir.path())
        .args(["--release", TRIAL_ID])
        .output()
        .unwrap();
    assert!(let_go.status.success(), "{let_go:?}");
    assert_eq!(kept(dir.path()).unwrap(), []);
    assert!(matches!(release(dir.path(), TRIAL_ID), Err(ReleaseError::NotKept { .. })));
    for trial_id in ["..", "../..", "kept"] {
        assert!(release(dir.path(), trial_id).is_err(), "{trial_id}");
    }
    assert!(sealed.path.exists() && dir.path().join("journal").exists());
}

#[test]
fn counts_over_several_segments_equal_what_an_independent_reader_finds() {
    let (source, dir) = (tempfile::tempdir().unwrap(), tempfile::tempdir().unwrap());
    nominal(source.path(), PACE, true);
    let segments = rewrite(source.path(), dir.path(), segments_of(100_003));
    assert!(segments.len() > 5, "{segments:?}");
    let sealed = seal_in(dir.path());
    let paths = segments.iter().chain([&sealed.path]).map(|path| path.to_str().unwrap());
    let compared = support::run_oracle(include_str!("support/decode_journal.py"), &paths.collect::<Vec<_>>());
    assert_eq!(compared.trim().parse(), Ok(2 * sealed.n_samples), "two channels a device");
    assert!(sealed.n_samples > 50_000 && sealed.n_missing == 0, "{sealed:?}");
}

#[test]
fn the_journal_of_a_launch_is_kept_where_its_recording_said_so_whoever_seals_it() {
    let source = tempfile::tempdir().unwrap();
    nominal(source.path(), PACE, true);
    for keep in [false, true] {
        let dir = tempfile::tempdir().unwrap();
        rewrite(source.path(), dir.path(), Settings { keep, ..segments_of(1 << 20) });
        let output =
            Command::new(env!("CARGO_BIN_EXE_tautrail")).args(["--json", "recover"]).arg(dir.path()).output().unwrap();
        let told: serde_json::Value = serde_json::from_slice(&output.stdout).unwrap();
        let (sealed, kept) = (&told["trials"][0]["detail"], told["kept_journals"].as_array().unwrap());
        assert_eq!((&sealed["outcome"], &sealed["journal_kept"]), (&"launched".into(), &keep.into()), "{told}");
        assert_eq!(kept.len(), usize::from(keep), "{told}");
    }
}

#[test]
fn a_computer_that_slept_and_a_wall_clock_that_was_set_are_events_of_the_trial() {
    const S: i64 = 1_000_000_000;
    let dir = tempfile::tempdir().unwrap();
    let mut journal = JournalFile::begin(dir.path(), &journal_file::RIG_TEXT);
    let mut clocks = |host_ns: i64, slept_ns: i64, set_ns: i64| {
        let boottime_ns = host_ns + slept_ns;
        let realtime_ns = 1_796_000_000 * S + boottime_ns + set_ns;
        let (monotonic_ns, monotonic_raw_ns) = (host_ns, host_ns);
        let body = Clocks { monotonic_ns, monotonic_raw_ns, boottime_ns, realtime_ns, wall_clock_set: true };
        journal.add(host_ns, 0, Body::Clocks(body));
    };
    clocks(S, 0, 0);
    clocks(2 * S, 30 * S, 0);
    clocks(3 * S, 30 * S, 0);
    clocks(4 * S, 30 * S, -2 * S);
    journal.open_trial(5 * S, 1, S);
    journal.close_trial(6 * S);
    journal.save();
    let (reader, range) = opened(dir.path());
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let sealed = seal(&reader, &range, dir.path(), &disk).unwrap();
    let events = tautrail::trial::TrialFile::open(&sealed.path).unwrap().events().unwrap();
    let of_clocks: Vec<(f64, &str)> =
        events.iter().filter(|event| event.kind == "clock").map(|event| (event.time_s, event.text.as_str())).collect();
    let [(slept_s, slept), (set_s, set)] = of_clocks[..] else { panic!("{events:?}") };
    assert!(slept.contains("suspended for 30.0 s") && set.contains("set back by 2.000 s"), "{slept}; {set}");
    assert_eq!(set_s - slept_s, 2.0);
}
