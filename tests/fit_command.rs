//! `tautrail fit` on sealed trials, and a forecast with the card it writes, as a crew runs them.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]

#[path = "support/journal.rs"]
#[allow(dead_code, reason = "each test uses its part")]
mod journal_file;

use std::path::{Path, PathBuf};
use std::process::{Command, Output};
use std::sync::{Arc, LazyLock};

use journal_file::{JournalFile, RIG_TEXT, opened, played};
use serde_json::Value;
use tautrail::archive::seal;
use tautrail::journal::{Disk, RealDisk};
use virtual_rig::performance::Options;

struct Sealed {
    _dir: tempfile::TempDir,
    trials: Vec<PathBuf>,
}

/// Launches of the virtual rig with 3, 5 and 6 cords, each its own rig file, sealed once for all tests.
static SEALED: LazyLock<Sealed> = LazyLock::new(|| {
    let dir = tempfile::tempdir().unwrap();
    let dummy = |count: u32, mass: &str| {
        RIG_TEXT
            .replace("count = 6", &format!("count = {count}"))
            .replace("mass = \"6.2 kg\"", &format!("mass = \"{mass}\""))
            .replace("drag_area = \"0.050 m2\"", "drag_area = \"0.012 m2\"")
            .replace("drag_area_uncertainty = \"0.005 m2\"", "drag_area_uncertainty = \"0.001 m2\"")
    };
    let launches = [
        ("000001-aaaaaa", "stage-1", dummy(3, "4.0 kg")),
        ("000002-bbbbbb", "stage-2", dummy(5, "6.2 kg")),
        ("000003-cccccc", "nominal", RIG_TEXT.clone()),
    ];
    let trials = (1..).zip(launches).map(|(seed, (id, scenario, text))| {
        let folder = dir.path().join(id);
        let options = Options { scenario: scenario.into(), seed, pace: 0.1, vary: true, ..Options::default() };
        let mut file = JournalFile::begin(&folder, &text);
        file.trial_id = id.to_owned();
        played(file, &options, true);
        let (reader, range) = opened(&folder);
        let disk: Arc<dyn Disk> = Arc::new(RealDisk);
        seal(&reader, &range, &folder, &disk).unwrap().path
    });
    let trials = trials.collect();
    Sealed { _dir: dir, trials }
});

fn tautrail(args: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_tautrail")).args(args).env("NO_COLOR", "1").output().expect("tautrail starts")
}

fn fit(more: &[&str], trials: &[&Path]) -> Output {
    let trials = trials.iter().map(|path| path.to_str().unwrap());
    tautrail(&["fit"].into_iter().chain(more.iter().copied()).chain(trials).collect::<Vec<_>>())
}

fn said(output: &Output) -> String {
    format!("{}{}", String::from_utf8_lossy(&output.stdout), String::from_utf8_lossy(&output.stderr))
}

fn all() -> Vec<&'static Path> {
    SEALED.trials.iter().map(PathBuf::as_path).collect()
}

#[test]
fn a_crew_fits_its_trials_and_forecasts_with_the_card() {
    let dir = tempfile::tempdir().unwrap();
    let card = dir.path().join("losses.toml");
    let results = dir.path().join("fit.json");
    let (card, results) = (card.to_str().unwrap(), results.to_str().unwrap());
    let output = fit(&["--terms", "friction,cord_lag", "--out", card, "--results", results], &all());
    let text = said(&output);
    assert_eq!(output.status.code(), Some(0), "{text}");
    for part in ["friction", "cord_lag", "left out", "Akaike", "a trial with", "INVENTED", "no safety device"] {
        assert!(text.contains(part), "{part:?} is missing in {text}");
    }
    let value: Value = serde_json::from_str(&std::fs::read_to_string(results).unwrap()).unwrap();
    let friction = value["fit"]["terms"][0]["fitted"]["value"].as_f64().unwrap();
    // The virtual rig draws 12 N about 0.8 N; what else it loses (README of the virtual rig) may stand in for some of it.
    assert!((5.0..25.0).contains(&friction), "{friction}");
    assert!(value["fit"]["trials"][0]["raw_sha256"].as_str().unwrap().len() == 64);
    // A card that is there is not overwritten.
    let again = fit(&["--terms", "friction", "--out", card], &all());
    assert_eq!(again.status.code(), Some(2));
    assert!(said(&again).contains("--replace"), "{}", said(&again));
    forecasts_with(dir.path());
}

/// The rig file points to the card: the forecast takes it, and says where it was never tried.
fn forecasts_with(dir: &Path) {
    let rig = dir.join("north-pier.toml");
    let forecast = |text: &str| {
        std::fs::write(&rig, text).unwrap();
        said(&tautrail(&["forecast", "--draws", "200", rig.to_str().unwrap()]))
    };
    let (own, records) = tautrail::rig::take_apart(&RIG_TEXT);
    for record in records {
        let path = dir.join(&record.name);
        std::fs::create_dir_all(path.parent().unwrap()).unwrap();
        std::fs::write(path, record.text).unwrap();
    }
    let pointing = own.replace("[losses]\n", "[losses]\ncard = \"losses.toml\"\n");
    let inside = forecast(&pointing);
    assert!(inside.contains("held tension the cords don't give back") && !inside.contains("OUTSIDE"), "{inside}");
    let outside = forecast(&pointing.replace("count = 6", "count = 7"));
    assert!(
        outside.contains("OUTSIDE THE LOSS CARD'S RANGE") && outside.contains("the trials had 3 to 6"),
        "{outside}"
    );
    std::fs::write(&rig, own).unwrap();
    let card = dir.join("losses.toml");
    let named = [&card, &rig].map(|path| path.to_str().unwrap());
    let beside = said(&tautrail(&["forecast", "--draws", "200", "--losses", named[0], named[1]]));
    assert!(beside.contains("unexplained by the loss card"), "{beside}");
    let swept = said(&tautrail(&["forecast", "--sweep", "cords=4:8:3", "--losses", named[0], named[1]]));
    assert!(swept.contains("its trials had 3 to 6 cords") && swept.contains("EXTRAPOLATED"), "{swept}");
    let other = own.replace("name = \"north-pier\"", "name = \"south-mole\"");
    std::fs::write(&rig, other).unwrap();
    let refused = said(&tautrail(&["forecast", "--losses", named[0], named[1]]));
    assert!(refused.contains("losses don't travel between rigs"), "{refused}");
    let missing = forecast(&pointing.replace("losses.toml", "lost.toml"));
    assert!(missing.contains("losses.card") && missing.contains("lost.toml"), "{missing}");
}

#[test]
fn a_damaged_file_and_a_trial_named_twice_are_left_aside() {
    let dir = tempfile::tempdir().unwrap();
    let damaged = dir.path().join("damaged.h5");
    let mut bytes = std::fs::read(&SEALED.trials[0]).unwrap();
    bytes.truncate(bytes.len() / 2);
    std::fs::write(&damaged, bytes).unwrap();
    let copy = dir.path().join("copy.h5");
    std::fs::copy(&SEALED.trials[1], &copy).unwrap();
    let trials: Vec<&Path> = all().into_iter().chain([damaged.as_path(), copy.as_path()]).collect();
    let output = fit(&["--terms", "friction"], &trials);
    let text = said(&output);
    assert_eq!(output.status.code(), Some(1), "{text}");
    assert!(text.contains("from 3 trials"), "{text}");
    assert!(text.contains("left aside:") && text.contains("damaged.h5"), "{text}");
    assert!(text.contains("the same trial as 000002-bbbbbb"), "{text}");
    let none = fit(&["--terms", "friction"], &[&damaged]);
    assert_eq!(none.status.code(), Some(2), "{}", said(&none));
}

#[test]
fn an_unknown_loss_is_refused_with_those_there_are() {
    let output = fit(&["--terms", "fricton"], &[Path::new("none.h5")]);
    assert_eq!(output.status.code(), Some(2));
    assert!(said(&output).contains("fricton") && said(&output).contains("cord_lag"), "{}", said(&output));
}
