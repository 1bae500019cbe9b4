//! What cords have served, counted from an archive of trials that were really sealed. Invented data.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

#[expect(dead_code, reason = "nominal launches of the usual journal are for other tests")]
#[path = "support/journal.rs"]
mod journal_file;
mod support;

use std::path::{Path, PathBuf};
use std::process::{Command, Output};
use std::sync::Arc;

use journal_file::{JournalFile, RIG_TEXT, opened_of, played};
use serde_json::Value;
use tautrail::archive::seal;
use tautrail::journal::{Disk, RealDisk};
use virtual_rig::performance::Options;

fn tautrail(folder: &Path, args: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_tautrail")).current_dir(folder).env("NO_COLOR", "1").args(args).output().unwrap()
}

fn text(output: &Output) -> String {
    String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr)
}

/// The rehearsal's rig with one cord that retires after so many cycles, and five that don't.
fn rig_with_cords(retire_cycles: u32) -> String {
    let cord = |number: u32| {
        let retire = if number == 1 { retire_cycles } else { 500 };
        format!(
            "[[cord]]\nserial = \"7-0{number}\"\nlot = \"7\"\nplace = \"place {number}\"\nin_service_since = \"2031-05-04\"\n\
             cycles_before = 10\nhours_before = \"0.5 h\"\nretire_cycles = {retire}\n"
        )
    };
    RIG_TEXT.replacen("[losses]", &format!("{}\n[losses]", (1..=6).map(cord).collect::<String>()), 1)
}

/// Plays a scenario into a journal and seals it into a file of this name in `archive`.
fn trial(archive: &Path, (journal_id, scenario): (&str, &str), rig_text: &str, name: &str) -> PathBuf {
    let at_work = tempfile::tempdir().unwrap();
    let options = Options { pace: 0.1, scenario: scenario.into(), ..Options::default() };
    played(JournalFile::begin_of(at_work.path(), journal_id, rig_text), &options, true);
    let (reader, range) = opened_of(at_work.path(), journal_id);
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    let sealed = seal(&reader, &range, at_work.path(), &disk).unwrap();
    let path = archive.join(name);
    std::fs::copy(sealed.path, &path).unwrap();
    path
}

fn cords(folder: &Path) -> (Value, Option<i32>) {
    let output = tautrail(folder, &["--json", "cord", "service", "rig.toml", "--trials", "trials"]);
    (serde_json::from_slice(&output.stdout).unwrap_or_else(|_| panic!("{}", text(&output))), output.status.code())
}

/// Time with any tension above the rig file's slack threshold, by h5py and NumPy.
const LOADED_BY_H5PY: &str = r"
import sys, h5py, numpy as np
with h5py.File(sys.argv[1]) as trial:
    loaded = []
    for name in ('line', 'anchor'):
        t, v = trial['signals'][name]['time'][()], trial['signals'][name]['value'][()]
        both = (v[1:] > 15) & (v[:-1] > 15)
        loaded.append(float(np.diff(t)[both].sum()))
    print(max(loaded))
";

#[test]
fn launches_and_let_downs_wear_cords_and_a_trial_sealed_again_does_not_wear_them_twice() {
    let folder = tempfile::tempdir().unwrap();
    let archive = folder.path().join("trials");
    std::fs::create_dir(&archive).unwrap();
    std::fs::write(folder.path().join("rig.toml"), rig_with_cords(12)).unwrap();
    let (none, code) = cords(folder.path());
    assert_eq!((&none["trials_counted"], &none["cords"][0]["cycles"], code), (&0.into(), &10.into(), Some(0)));

    let launch = trial(&archive, ("000001-abc123", "nominal"), &rig_with_cords(12), "trial-000001-7f3a9c.h5");
    let (one, code) = cords(folder.path());
    assert_eq!((&one["trials_counted"], &one["cords"][5]["cycles"], code), (&1.into(), &11.into(), Some(0)));
    let hours = one["cords"][0]["hours_loaded"].as_f64().unwrap() - 0.5;
    let by_h5py_s: f64 = support::run_oracle(LOADED_BY_H5PY, &[launch.to_str().unwrap()]).trim().parse().unwrap();
    assert!(by_h5py_s > 2.0 && (hours * 3600.0 - by_h5py_s).abs() < 1e-6 * by_h5py_s, "{hours} h, {by_h5py_s} s");

    // Sealed again, or copied: the same journal and trial id under another name.
    std::fs::copy(&launch, archive.join("trial-000001-aaaaaa.h5")).unwrap();
    let (again, _) = cords(folder.path());
    assert_eq!((&again["trials_counted"], &again["cords"][0]["cycles"]), (&1.into(), &11.into()));
    assert_eq!(again["cords"][0]["hours_loaded"], one["cords"][0]["hours_loaded"]);
    let told = text(&tautrail(folder.path(), &["cord", "service", "rig.toml", "--trials", "trials"]));
    assert!(told.contains("1 files hold a trial that was counted already"), "{told}");
    std::fs::remove_file(archive.join("trial-000001-aaaaaa.h5")).unwrap();

    // Another trial, of another journal: a let-down is a cycle too.
    trial(&archive, ("000002-def456", "let-down"), &rig_with_cords(12), "trial-000002-7f3a9c.h5");
    let (two, code) = cords(folder.path());
    assert_eq!((&two["trials_counted"], &two["cords"][5]["cycles"]), (&2.into(), &12.into()));
    assert!(two["cords"][0]["hours_loaded"].as_f64() > one["cords"][0]["hours_loaded"].as_f64());
    assert_eq!(two["cords"][0]["take_off"], serde_json::json!(["12 cycles, retired at 12"]));
    assert_eq!((&two["cords"][1]["take_off"], code), (&serde_json::json!([]), Some(1)));
    a_worn_cord_is_told_wherever_the_rig_is_looked_at(folder.path());

    // A trial whose rig file lists no cords wears none, and a file that is none stops nothing and is named.
    trial(&archive, ("000003-aaa111", "let-down"), &RIG_TEXT, "trial-000003-7f3a9c.h5");
    std::fs::write(archive.join("trial-000004-7f3a9c.h5"), "no trial").unwrap();
    let told = tautrail(folder.path(), &["cord", "service", "rig.toml", "--trials", "trials"]);
    let said = text(&told);
    assert!(said.contains("1 trials list no cords") && said.contains("NOT COUNTED trials/trial-000004"), "{said}");
    assert!(said.contains("12 cycles, ") && told.status.code() == Some(1), "{said}");
    let counted = tautrail(folder.path(), &["count-cords", "trials"]);
    assert!(text(&counted).contains("so the cords' service is not known"), "{}", text(&counted));
}

fn a_worn_cord_is_told_wherever_the_rig_is_looked_at(folder: &Path) {
    for command in [
        ["check", "--no-ports", "rig.toml"].as_slice(),
        &["stage", "--draws", "100", "rig.toml"],
        &["cord", "service", "rig.toml"],
    ] {
        let told = tautrail(folder, &[command, &["--trials", "trials"]].concat());
        assert_eq!(told.status.code(), Some(1), "{command:?}: {}", text(&told));
        assert!(text(&told).contains("12 cycles, retired at 12"), "{command:?}: {}", text(&told));
    }
    let stages = tautrail(folder, &["--json", "stage", "--draws", "100", "rig.toml", "--trials", "trials"]);
    let value: Value = serde_json::from_slice(&stages.stdout).unwrap();
    assert_eq!(value["take_off"], serde_json::json!(["cord 7-01 (place 1) is to come off: 12 cycles, retired at 12"]));
    std::fs::write(folder.join("rig.toml"), rig_with_cords(13)).unwrap();
    let stays = tautrail(folder, &["cord", "service", "rig.toml", "--trials", "trials"]);
    assert_eq!(stays.status.code(), Some(0), "{}", text(&stays));
    std::fs::write(folder.join("rig.toml"), rig_with_cords(12)).unwrap();
}
