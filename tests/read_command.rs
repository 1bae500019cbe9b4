//! `tautrail read` and `tautrail replay` on sealed trials, as a crew runs them.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a test that cannot go on stops here")]

#[path = "support/journal.rs"]
mod journal_file;
mod support;

use std::path::{Path, PathBuf};
use std::process::{Command, Output};
use std::sync::{Arc, LazyLock};

use journal_file::{JournalFile, RIG_TEXT, nominal, opened};
use serde_json::Value;
use tautrail::archive::seal;
use tautrail::journal::{Disk, RealDisk};

/// A nominal launch of the virtual rig, sealed once for all tests.
static SEALED: LazyLock<(tempfile::TempDir, PathBuf)> = LazyLock::new(|| {
    let dir = tempfile::tempdir().unwrap();
    nominal(dir.path(), 0.1, true);
    let path = sealed_in(dir.path());
    (dir, path)
});

fn sealed_in(dir: &Path) -> PathBuf {
    let (reader, range) = opened(dir);
    let disk: Arc<dyn Disk> = Arc::new(RealDisk);
    seal(&reader, &range, dir, &disk).unwrap().path
}

fn tautrail(args: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_tautrail")).args(args).env("NO_COLOR", "1").output().expect("tautrail starts")
}

fn said(output: &Output) -> String {
    assert!(output.stderr.is_empty(), "{}", String::from_utf8_lossy(&output.stderr));
    String::from_utf8(output.stdout.clone()).expect("UTF-8")
}

fn json(args: &[&str]) -> Value {
    serde_json::from_str(&said(&tautrail(args))).expect("JSON")
}

fn sealed() -> &'static str {
    SEALED.1.to_str().unwrap()
}

fn number(reading: &Value, name: &str) -> f64 {
    let rows = reading["results"].as_array().unwrap();
    let row = rows.iter().find(|row| row["name"] == name).unwrap_or_else(|| panic!("{name} in {reading:#}"));
    row["value"].as_f64().unwrap()
}

#[test]
fn read_prints_the_launch_with_units_and_uncertainty() {
    let text = said(&tautrail(&["read", sealed()]));
    let line =
        text.lines().find(|line| line.trim_start().starts_with("launch_speed ")).unwrap_or_else(|| panic!("{text}"));
    assert!(line.contains('±') && line.contains(" m/s   ("), "{line}");
    assert!(text.contains("launched") && text.contains("95 % interval"), "{text}");
    assert!(text.contains("no safety device"), "{text}");
    let budget = said(&tautrail(&["read", "--budget", sealed()]));
    assert!(budget.contains("place of separation"), "{budget}");
}

#[test]
fn what_was_sealed_and_what_is_read_again_are_the_same_numbers() {
    let (read, shown) = (json(&["read", "--json", sealed()]), json(&["show", "--json", sealed()]));
    for name in ["launch_speed", "peak_g_cfc60_specific", "hold_tension", "winch_back_work"] {
        assert_eq!(number(&read, name), number(&shown, name), "{name}");
    }
}

// scipy.signal: Butterworth of order 2 at 2.0775·CFC, forward and backward (SAE J211-1 / ISO 6487 algorithm).
#[test]
fn the_filtered_peak_is_that_of_scipy_on_the_file_s_own_samples() {
    let script = r#"
import sys, json, h5py, numpy as np
from scipy.signal import butter, filtfilt
reading = json.load(open(sys.argv[2]))
value = {r["name"]: r["value"] for r in reading["results"]}
at = {i["name"]: i["time_s"] for i in reading["instants"]}
with h5py.File(sys.argv[1]) as f:
    t, f_along = f["signals/accel/time"][:], f["signals/accel/value"][:]
near = (t > at["release"] - 0.5) & (t < at["separation"] + 0.5)
t, f_along = t[near], f_along[near]
b, a = butter(2, 2.0775 * 60, fs=(len(t) - 1) / (t[-1] - t[0]))
filtered = filtfilt(b, a, f_along, padtype=None)
inside = (t >= at["release"]) & (t < at["separation"])
scale = 1 + value["accelerometer_scale_error"]
peak = (filtered[inside].max() - value["accelerometer_bias"]) / scale / 9.80665
row = next(r for r in reading["results"] if r["name"] == "peak_g_cfc60_specific")
shares = [t["standard_uncertainty"] for t in row["budget"] if t["source"].startswith("noise's share")]
# Half of what noise adds to a greatest value stands in the budget; all of it is taken off the peak.
off = 2 * sum(shares) / scale
print(repr(float(min((peak - off, peak + off), key=lambda p: abs(p - value["peak_g_cfc60_specific"])))), float(off))
"#;
    let reading = json(&["read", "--json", sealed()]);
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("reading.json");
    std::fs::write(&path, reading.to_string()).unwrap();
    let printed = support::run_oracle(script, &[sealed(), path.to_str().unwrap()]);
    let numbers: Vec<f64> = printed.split_whitespace().map(|number| number.parse().unwrap()).collect();
    let (peak, off) = (numbers[0], numbers[1]);
    assert!(off < 0.005 * peak, "noise is said to add {off} g");
    let found = number(&reading, "peak_g_cfc60_specific");
    assert!((found - peak).abs() < 1e-6 * peak, "{found} for {peak}");
}

// NumPy: cubics by least squares through the encoder's own samples, 12 ms about each of five places in the stroke.
#[test]
fn the_smoothed_speed_is_that_of_a_local_fit_to_the_encoder() {
    let script = r#"
import sys, json, h5py, numpy as np
reading = json.load(open(sys.argv[2]))
at = {i["name"]: i["time_s"] for i in reading["instants"]}
with h5py.File(sys.argv[1]) as f:
    t, x = f["signals/encoder/time"][:], f["signals/encoder/value"][:]
    tm, vm = f["signals/motion_velocity/time"][:], f["signals/motion_velocity/value"][:]
worst = 0.0
for share in (0.2, 0.4, 0.6, 0.8, 0.9):
    middle = at["release"] + share * (at["separation"] - at["release"])
    near = np.abs(t - middle) < 0.012
    fit, covariance = np.polyfit(t[near] - middle, x[near], 3, cov=True)
    off = abs(fit[2] - np.interp(middle, tm, vm)) / np.hypot(np.sqrt(covariance[2, 2]), 0.003)
    worst = max(worst, off)
print(repr(float(worst)))
"#;
    let dir = tempfile::tempdir().unwrap();
    let path = dir.path().join("reading.json");
    std::fs::write(&path, json(&["read", "--json", sealed()]).to_string()).unwrap();
    let worst: f64 = support::run_oracle(script, &[sealed(), path.to_str().unwrap()]).trim().parse().unwrap();
    assert!(worst < 4.0, "{worst} times what both allow");
}

#[test]
fn two_trials_side_by_side_show_what_is_the_same_and_a_film_is_refused_with_both_numbers() {
    let text = said(&tautrail(&["compare", sealed(), sealed()]));
    assert!(text.contains("the same in all: rig") && text.contains("chance 100.0 %"), "{text}");
    let differing = said(&tautrail(&["compare", "--differences", sealed(), sealed()]));
    assert!(!differing.contains("launch_speed"), "{differing}");
    let dir = tempfile::tempdir().unwrap();
    let film = dir.path().join("film.csv");
    let rows: Vec<String> = (0..20).map(|k| format!("{k},{:.6},{k}", f64::from(k) / 120.0)).collect();
    std::fs::write(&film, format!("frame,time_s,x_mm\n{}\n", rows.join("\n"))).unwrap();
    let output = tautrail(&["read", "--camera", film.to_str().unwrap(), "--frame-rate", "240", sealed()]);
    assert_eq!(output.status.code(), Some(2));
    let error = String::from_utf8_lossy(&output.stderr);
    assert!(error.contains("8.333 ms") && error.contains("4.167 ms"), "{error}");
}

#[test]
fn show_and_read_round_alike_and_give_verdicts() {
    let (read, shown) = (said(&tautrail(&["read", sealed()])), said(&tautrail(&["show", sealed()])));
    let line =
        |text: &str| text.lines().find(|line| line.trim_start().starts_with("launch_speed ")).unwrap().to_owned();
    let (read_line, shown_line) = (line(&read), line(&shown));
    assert!(read_line.starts_with(&shown_line), "{read_line} | {shown_line}");
    let beyond = "channel accel reached ";
    assert!(
        read.contains(beyond) && shown.contains(beyond),
        "a launch is beyond ±1 g, and every reading says so: {read}"
    );
    for text in [&read, &shown] {
        assert!(text.contains("verdicts") && text.contains("met") && !text.contains("m/s^2"), "{text}");
    }
}

#[test]
fn replay_names_the_largest_misfit_and_says_where_it_is() {
    let text = said(&tautrail(&["replay", sealed()]));
    assert!(text.contains("the largest misfit is in") && text.contains("launch speed measured"), "{text}");
    let replays = json(&["replay", "--json", "--series", sealed()]);
    let residuals = replays[0]["residuals"].as_array().unwrap();
    let names: Vec<&str> = residuals.iter().map(|r| r["quantity"].as_str().unwrap()).collect();
    assert_eq!(names, ["acceleration", "velocity", "position", "anchor tension"]);
    for residual in residuals {
        let series = residual["residual"].as_array().unwrap();
        let square: f64 = series.iter().map(|r| r.as_f64().unwrap().powi(2)).sum();
        let rms = residual["rms"].as_f64().unwrap();
        assert!((rms - (square / series.len() as f64).sqrt()).abs() < 1e-9 * rms);
    }
}

#[test]
fn a_file_that_is_no_trial_is_named_and_stops_none_of_the_others() {
    let dir = tempfile::tempdir().unwrap();
    let other = dir.path().join("notes.txt");
    std::fs::write(&other, "not a trial").unwrap();
    let other = other.to_str().unwrap();
    let alone = tautrail(&["read", other]);
    assert_eq!(alone.status.code(), Some(2));
    assert!(String::from_utf8_lossy(&alone.stderr).contains("notes.txt"));
    let both = tautrail(&["replay", other, sealed()]);
    assert_eq!(both.status.code(), Some(1));
    let text = said(&both);
    assert!(text.contains("no replay:") && text.contains("the largest misfit"), "{text}");
    assert!(Path::new(sealed()).exists());
}

#[test]
fn a_trial_of_noise_alone_has_no_number_and_a_reason_for_each() {
    let dir = tempfile::tempdir().unwrap();
    let mut journal = JournalFile::begin(dir.path(), &RIG_TEXT);
    journal.clocks(1);
    let first = journal.bytes(2, 0, vec![0x55; 64]);
    journal.open_trial(3, first, 2);
    journal.close_trial(4);
    journal.save();
    let path = sealed_in(dir.path());
    let reading = json(&["read", "--json", path.to_str().unwrap()]);
    assert_eq!(reading["results"].as_array().unwrap().len(), 0, "{reading:#}");
    let absent = reading["absent"].as_array().unwrap();
    assert!(absent.iter().any(|row| row["name"] == "launch_speed"), "{reading:#}");
    assert!(absent.iter().all(|row| !row["reason"].as_str().unwrap().is_empty()));
    let replay = tautrail(&["replay", path.to_str().unwrap()]);
    assert_eq!(replay.status.code(), Some(1));
}

#[test]
fn help_shows_examples_and_the_caution() {
    for command in ["read", "replay", "compare"] {
        let text = said(&tautrail(&[command, "--help"]));
        assert!(text.contains("Examples:") && text.contains("no safety device"), "{text}");
    }
}
