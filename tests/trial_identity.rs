//! What a trial is called: a running number and a random part, whatever the computer's clock says and whatever names the rig
//! has given its devices.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]
#![allow(dead_code, reason = "the support files serve several tests")]

#[path = "support/archive.rs"]
mod archive;
#[path = "support/journal.rs"]
mod journal_file;
mod support;

use std::fs;
use std::path::Path;

use archive::{json, shown, tautrail};
use journal_file::{JournalFile, RIG_TEXT};
use tautrail::archive::{SealError, trial_path};
use tautrail::journal::{Body, Clocks, TrialClose, TrialOpen};

/// A journal of a computer whose clock starts in 1970, with a short trial for each id.
fn journal_of_1970(dir: &Path, ids: &[&str]) {
    let mut file = JournalFile::begin(dir, &RIG_TEXT);
    for (k, id) in ids.iter().enumerate() {
        // Every start of the computer finds the same second.
        let host_ns = 10_000_000_000 + k as i64 * 1_000_000_000;
        let realtime_ns = 9_000_000_000;
        let (monotonic_raw_ns, boottime_ns) = (host_ns, host_ns);
        let clocks =
            Clocks { monotonic_ns: host_ns, monotonic_raw_ns, boottime_ns, realtime_ns, wall_clock_set: false };
        let first_seq = file.add(host_ns, 0, Body::Clocks(clocks));
        let (trial_id, reason, person) = ((*id).to_owned(), "tension".to_owned(), String::new());
        let open = TrialOpen { trial_id, first_seq, first_host_ns: host_ns, reason, person, continues: None };
        file.add(host_ns, 0, Body::TrialOpen(open));
        file.bytes(host_ns + 1000, 0, vec![0, 1, 2, 3, 0]);
        let (trial_id, reason, person) = ((*id).to_owned(), "slack again".to_owned(), String::new());
        file.add(host_ns + 2000, 0, Body::TrialClose(TrialClose { trial_id, reason, person }));
    }
    file.save();
}

#[test]
fn trials_of_a_clock_that_starts_in_1970_are_distinct_and_in_order() {
    let dir = tempfile::tempdir().unwrap();
    let ids = ["000009-ffffff", "000010-000000", "000011-7f3a9c"];
    journal_of_1970(dir.path(), &ids);
    let (code, said) = tautrail(&["recover", shown(dir.path())]);
    assert_eq!(code, 0, "{said}");
    let listed = json(&["trials", shown(dir.path())]);
    let trials = listed["trials"].as_array().unwrap();
    let of = |key: &str| trials.iter().map(|trial| trial[key].as_str().unwrap()).collect::<Vec<_>>();
    assert_eq!(of("trial_id"), ids, "the running number orders them, not the clock");
    assert_eq!(of("started"), ["1970-01-01T00:00:09Z"; 3], "and the clock could not");
    assert_eq!(of("started_quality"), ["never set"; 3]);
    let by_start = json(&["trials", "--sort", "started", shown(dir.path())]);
    assert_eq!(by_start["trials"][0]["trial_id"], ids[0], "equal starts stay in the order of their numbers");
    let (_, out) = (tautrail(&["export", shown(dir.path()), "--out", shown(&dir.path().join("fleet"))]), dir.path());
    let day = out.join("fleet/trials/rig=north-pier/date=__HIVE_DEFAULT_PARTITION__");
    assert_eq!(fs::read_dir(day).unwrap().count(), 3, "a day that nobody knows is not 1 January 1970");
}

#[test]
fn no_id_leads_out_of_the_archive() {
    let dir = tempfile::tempdir().unwrap();
    let inner = dir.path().join("inner");
    fs::create_dir(&inner).unwrap();
    let bad = ["../000001-7f3a9c", "/etc/x", "a/b", "..", "", "a\0b", "a.h5", "ü"];
    for id in bad {
        assert!(matches!(trial_path(&inner, id), Err(SealError::TrialId { .. })), "{id:?}");
    }
    journal_of_1970(&inner, &bad[..3]);
    let (code, said) = tautrail(&["recover", shown(&inner)]);
    assert!(code == 1 && said.matches("cannot be part of a file name").count() == 3, "{said}");
    for id in bad {
        let (code, said) = tautrail(&["recover", shown(&inner), "--release", &id.replace('\0', "%")]);
        assert_eq!(code, 2, "{said}");
    }
    let names: Vec<_> = fs::read_dir(dir.path()).unwrap().map(|entry| entry.unwrap().file_name()).collect();
    assert_eq!(names, ["inner"]);
    let outside = fs::read_dir(&inner)
        .unwrap()
        .filter(|e| e.as_ref().unwrap().path().extension().is_some_and(|ending| ending == "h5"));
    assert_eq!(outside.count(), 0, "no trial file was made");
}
