//! `tautrail trials`: what it selects and in which order, and that its index is never the truth.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]
#![allow(dead_code, reason = "the support files serve several tests")]

#[path = "support/archive.rs"]
mod archive;
#[path = "support/journal.rs"]
mod journal_file;
mod support;

use std::fs;
use std::path::{Path, PathBuf};
use std::time::{Duration, SystemTime};

use archive::{json, sealed_trial, shown, tautrail, unlock};
use tautrail::archive::{Catalogue, Index, catalogue};

/// What differs between the trials of the test archive: INVENTED DATA.
/// (trial id, started, rig, outcome, series, configuration, launch speed)
const TRIALS: [(&str, &str, &str, &str, &str, &str, f64); 4] = [
    ("000001-aaaaaa", "2026-11-30T23:59:59Z", "north-pier", "launched", "", "00aa", 15.0),
    ("000002-bbbbbb", "2026-12-01T00:00:00Z", "north-pier", "let-down", "buildup", "00ab", 0.5),
    ("000003-cccccc", "2026-12-02T10:00:00Z", "south-pier", "launched", "buildup", "11aa", 17.5),
    ("000004-dddddd", "1970-01-01T00:00:09Z", "north-pier", "launched", "", "11aa", 16.0),
];

/// Copies of the sealed trial with other headers.
fn archive_of_four() -> tempfile::TempDir {
    let dir = tempfile::tempdir().unwrap();
    let mut args = Vec::new();
    for (id, started, rig, outcome, series, configuration, speed) in TRIALS {
        let path = dir.path().join(format!("trial-{id}.h5"));
        fs::copy(sealed_trial(), &path).unwrap();
        unlock(&path);
        args.push([shown(&path), id, started, rig, outcome, series, configuration, &speed.to_string()].join("|"));
    }
    let script = r#"
import sys, h5py
for row in sys.argv[1:]:
    path, trial_id, started, rig, outcome, series, configuration, speed = row.split('|')
    with h5py.File(path, 'r+') as f:
        for name, value in dict(trial_id=trial_id, started=started, rig=rig, outcome=outcome, series=series, configuration_hash=configuration).items():
            f.attrs.modify(name, value)
        f['result/launch_speed'][()] = float(speed)
        if trial_id[5] == '3':
            text = f['rig/rig.toml'].asstr()[()]
            own, mark, attached = text.partition('\n#@attached')
            f['rig/rig.toml'][()] = own + '''
[[cord]]
serial = "NP-07"
lot = "invented"
place = "left"
in_service_since = "2026-01-01"
''' + mark + attached
"#;
    support::run_oracle(script, &args.iter().map(String::as_str).collect::<Vec<_>>());
    age(dir.path());
    dir
}

/// Sets every trial's time of change back, so that the index takes them.
fn age(dir: &Path) {
    for path in trial_files(dir) {
        let long_ago = SystemTime::now() - Duration::from_secs(3600);
        fs::File::options().write(true).open(path).unwrap().set_modified(long_ago).unwrap();
    }
}

fn trial_files(dir: &Path) -> Vec<PathBuf> {
    let all = fs::read_dir(dir).unwrap().map(|entry| entry.unwrap().path());
    all.filter(|path| path.extension().is_some_and(|ending| ending == "h5")).collect()
}

fn list(dir: &Path, index: Index) -> Catalogue {
    catalogue(dir, index, SystemTime::now(), |_, _| {}).unwrap()
}

/// Rows and what each file said, to compare lists.
fn rows(catalogue: &Catalogue) -> Vec<String> {
    catalogue.trials.iter().map(|trial| format!("{:?} {} {:?}", trial.path, trial.held, trial.what)).collect()
}

fn ids(dir: &Path, args: &[&str]) -> Vec<String> {
    let listed = json(&[&["trials", shown(dir)], args].concat());
    let id = |trial: &serde_json::Value| trial["trial_id"].as_str().unwrap()[..6].trim_start_matches('0').to_owned();
    listed["trials"].as_array().unwrap().iter().map(id).collect()
}

#[test]
fn each_filter_keeps_what_it_says_and_they_add_up() {
    let dir = archive_of_four();
    let check = |args: &[&str], expected: &[&str]| assert_eq!(ids(dir.path(), args), expected, "{args:?}");
    check(&[], &["1", "2", "3", "4"]);
    check(&["--from", "2026-12-01"], &["2", "3"]);
    check(&["--from", "2026-11-30", "--to", "2026-12-01"], &["1", "2"]);
    check(&["--to", "2026-12-01T00:00:00Z"], &["1", "4"]);
    check(&["--rig", "south-pier"], &["3"]);
    check(&["--outcome", "let-down"], &["2"]);
    check(&["--series", "buildup"], &["2", "3"]);
    check(&["--configuration", "11A"], &["3", "4"]);
    check(&["--cord", "NP-07"], &["3"]);
    check(&["--result", "launch_speed=15..16"], &["1", "4"]);
    check(&["--result", "launch_speed=15..", "--rig", "north-pier", "--from", "2026-01-01"], &["1"]);
    check(&["--held"], &[]);
}

#[test]
fn lists_are_sorted_by_name_start_or_result_either_way() {
    let dir = archive_of_four();
    let check = |args: &[&str], expected: &[&str]| assert_eq!(ids(dir.path(), args), expected, "{args:?}");
    check(&["--sort", "started"], &["4", "1", "2", "3"]);
    check(&["--sort", "launch_speed", "--reverse"], &["3", "4", "1", "2"]);
    check(&["--sort", "outcome"], &["1", "3", "4", "2"]);
    check(&["--reverse"], &["4", "3", "2", "1"]);
    check(&["--sort", "no_such_result"], &["1", "2", "3", "4"]);
}

#[test]
fn text_says_unit_selection_and_what_was_asked_wrongly() {
    let dir = archive_of_four();
    let (code, said) = tautrail(&["trials", shown(dir.path()), "--rig", "south-pier"]);
    assert_eq!(code, 0, "{said}");
    assert!(said.contains("launch_speed [m/s]") && said.contains("17.50") && said.contains("1 of 4 trials"), "{said}");
    let (_, said) = tautrail(&["trials", shown(dir.path()), "--rig", "nowhere"]);
    assert!(said.contains("none of the 4 trials"), "{said}");
    for (args, expected) in [
        (["--result", "launch_speed>3"], "no range of a result"),
        (["--from", "yesterday"], "no date"),
        (["--csv", "--json"], "cannot be used with"),
    ] {
        let (code, said) = tautrail(&["trials", shown(dir.path()), args[0], args[1]]);
        assert_eq!(code, 2, "{said}");
        assert!(said.contains(expected), "{said}");
    }
}

#[test]
fn csv_is_what_another_reader_reads() {
    let dir = archive_of_four();
    let (code, said) = tautrail(&["trials", "--csv", shown(dir.path())]);
    assert_eq!(code, 0);
    // RFC 4180, section 2: records end with CRLF, each has as many fields as the header.
    assert!(said.lines().count() == 5 && said.matches("\r\n").count() == 5, "{said}");
    let path = dir.path().join("list.csv");
    fs::write(&path, &said).unwrap();
    let script = "
import csv, sys
rows = list(csv.DictReader(open(sys.argv[1], newline='')))
print([(row['trial'], row['rig'], float(row['launch_speed [m/s]'])) for row in rows])";
    let read = support::run_oracle(script, &[shown(&path)]);
    assert!(read.starts_with("[('000001-aaaaaa', 'north-pier', 15.0), "), "{read}");
}

#[test]
fn a_warm_index_reads_no_file_and_says_the_same() {
    let dir = archive_of_four();
    let cold = list(dir.path(), Index::Used);
    assert_eq!(cold.n_read, 4);
    let warm = list(dir.path(), Index::Used);
    assert_eq!(warm.n_read, 0);
    assert!(rows(&warm) == rows(&cold), "the index says something else");
    assert!(rows(&list(dir.path(), Index::Unused)) == rows(&cold));
    assert_eq!(list(dir.path(), Index::Rebuilt).n_read, 4);
}

#[test]
fn what_changed_is_read_again_and_what_went_is_forgotten() {
    let dir = archive_of_four();
    list(dir.path(), Index::Used);
    let first = dir.path().join("trial-000001-aaaaaa.h5");
    support::run_oracle(
        "import sys,h5py\nwith h5py.File(sys.argv[1],'r+') as f: f.attrs.modify('outcome','hook slip')",
        &[shown(&first)],
    );
    fs::remove_file(dir.path().join("trial-000002-bbbbbb.h5")).unwrap();
    fs::write(dir.path().join("trial-000003-cccccc.amend-0001.toml"), "not an amendment").unwrap();
    let after = list(dir.path(), Index::Used);
    assert_eq!((after.n_read, after.trials.len()), (2, 3));
    assert_eq!(after.trials[0].what.as_ref().unwrap().outcome, "hook slip");
    assert!(after.trials[1].what.as_ref().unwrap().findings[0].contains("amend-0001.toml"));
    let (_, said) = tautrail(&["trials", shown(dir.path())]);
    assert!(said.contains("AMENDMENTS NOT SOUND"), "{said}");
}

#[test]
fn a_file_changed_a_moment_ago_is_not_trusted_to_its_time_of_change() {
    let dir = archive_of_four();
    let path = dir.path().join("trial-000001-aaaaaa.h5");
    fs::File::options().write(true).open(path).unwrap().set_modified(SystemTime::now()).unwrap();
    list(dir.path(), Index::Used);
    assert_eq!(list(dir.path(), Index::Used).n_read, 1, "it may change again within the clock's step");
}

#[test]
fn a_deleted_index_costs_time_only() {
    let dir = archive_of_four();
    let cold = rows(&list(dir.path(), Index::Used));
    fs::remove_file(dir.path().join(".trials-index")).unwrap();
    let again = list(dir.path(), Index::Used);
    assert!(again.n_read == 4 && rows(&again) == cold);
}

#[test]
fn a_corrupted_index_is_never_believed() {
    let dir = archive_of_four();
    let truth = rows(&list(dir.path(), Index::Used));
    let index = dir.path().join(".trials-index");
    let whole = fs::read(&index).unwrap();
    // Every 37th byte in turn, the file cut at every 97th, and files that are nothing of the kind.
    let mut broken: Vec<Vec<u8>> = (0..whole.len()).step_by(37).map(|at| flipped(&whole, at)).collect();
    broken.extend((0..whole.len()).step_by(97).map(|at| whole[..at].to_vec()));
    broken.extend([vec![], vec![b'\n'; 1000], vec![0xff; 1000], b"tautrail-index 2 of tomorrow\n".to_vec()]);
    for bytes in broken {
        fs::write(&index, &bytes).unwrap();
        assert!(rows(&list(dir.path(), Index::Used)) == truth, "the index was believed");
    }
    fs::remove_file(&index).unwrap();
    fs::create_dir(&index).unwrap();
    assert!(rows(&list(dir.path(), Index::Used)) == truth, "not even a directory in its place does harm");
}

fn flipped(whole: &[u8], at: usize) -> Vec<u8> {
    let mut bytes = whole.to_vec();
    bytes[at] ^= 1 << (at % 8);
    bytes
}

#[test]
fn lists_made_at_once_and_trials_that_come_and_go_meanwhile_do_no_harm() {
    let dir = archive_of_four();
    let comer = dir.path().join("trial-000005-eeeeee.h5");
    let stays = |catalogue: &Catalogue| -> Vec<String> {
        rows(catalogue).into_iter().filter(|row| !row.contains("000005")).collect()
    };
    let truth = stays(&list(dir.path(), Index::Unused));
    std::thread::scope(|scope| {
        for _ in 0..3 {
            scope.spawn(|| (0..20).for_each(|_| assert!(stays(&list(dir.path(), Index::Used)) == truth)));
        }
        scope.spawn(|| {
            for _ in 0..20 {
                let _ = fs::remove_file(dir.path().join(".trials-index"));
                fs::copy(dir.path().join("trial-000004-dddddd.h5"), &comer).unwrap();
                fs::remove_file(&comer).unwrap();
            }
        });
    });
    assert!(rows(&list(dir.path(), Index::Used)) == truth, "the index was believed");
    let left = fs::read_dir(dir.path())
        .unwrap()
        .filter(|entry| entry.as_ref().unwrap().file_name().to_string_lossy().ends_with(".part"));
    assert_eq!(left.count(), 0, "no part of an index is left behind");
}

#[test]
fn an_index_that_cannot_be_written_is_done_without() {
    let dir = archive_of_four();
    let truth = rows(&list(dir.path(), Index::Unused));
    // A directory of the index's name is in the way of its rename, also for root, whom no permission stops.
    fs::create_dir(dir.path().join(".trials-index")).unwrap();
    let listed = list(dir.path(), Index::Used);
    assert!(listed.n_read == 4 && rows(&listed) == truth);
}
