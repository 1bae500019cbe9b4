//! `tautrail cord` as a crew meets it: sheet to card, card to rig file, rig file to forecast.

#![allow(clippy::expect_used, clippy::unwrap_used, reason = "a test that cannot go on stops here")]

use std::fs;
use std::path::Path;
use std::process::{Command, Output};

use serde_json::Value;

#[path = "support/rehearsal_rig.rs"]
mod rehearsal_rig;
mod support;
#[path = "support/virtual_lot.rs"]
mod virtual_lot;

use rehearsal_rig::rig_text;

use tautrail::calibration::cord::{characterise, held_part};
use tautrail::estimation::Curve;
use tautrail::rig::{CordSheet, RelaxationTerm};

fn tautrail(folder: &Path, args: &[&str]) -> Output {
    Command::new(env!("CARGO_BIN_EXE_tautrail")).current_dir(folder).args(args).output().unwrap()
}

fn text(output: &Output) -> String {
    String::from_utf8_lossy(&output.stdout).into_owned() + &String::from_utf8_lossy(&output.stderr)
}

/// A folder with the sheet and readings of a virtual lot.
fn bench(seed: u64) -> tempfile::TempDir {
    let folder = tempfile::tempdir().unwrap();
    let (sheet, csv) = virtual_lot::sheet(seed, 4);
    fs::write(folder.path().join("sheet.toml"), sheet).unwrap();
    fs::write(folder.path().join("lot.csv"), csv).unwrap();
    folder
}

/// The rehearsal's rig with its cords taken from a card, and what else is appended.
fn rig_with_card(more: &str) -> String {
    let rig = rig_text("north-pier.toml");
    let (before, after) = rig.split_once("[cords]").unwrap();
    let (_, losses) = after.split_once("[losses]").unwrap();
    format!("{before}[cords]\ncount = 6\ntravel_ratio = 1.0\ncard = \"card.toml\"\n\n{more}\n[losses]{losses}")
}

#[test]
fn a_sheet_becomes_a_card_that_the_forecast_uses_whole() {
    let folder = bench(1);
    let made = tautrail(folder.path(), &["cord", "card", "--out", "card.toml", "--page", "page.html", "sheet.toml"]);
    assert_eq!(made.status.code(), Some(0), "{}", text(&made));
    for part in [
        "straight line",
        "at steps left out",
        "lost in a cycle",
        "between cords",
        "one turning point",
        "no safety device",
    ] {
        assert!(text(&made).contains(part), "{part:?} is missing in {}", text(&made));
    }
    let again = tautrail(folder.path(), &["cord", "card", "--out", "card.toml", "sheet.toml"]);
    assert_eq!(again.status.code(), Some(2));
    assert!(text(&again).contains("already there"), "{}", text(&again));

    fs::write(folder.path().join("rig.toml"), rig_with_card("")).unwrap();
    let checked = tautrail(folder.path(), &["check", "--no-ports", "rig.toml"]);
    assert_eq!(checked.status.code(), Some(0), "{}", text(&checked));
    assert!(text(&checked).contains("card card.toml: lot virtual 1, 4 cords tested to"), "{}", text(&checked));
    let speed = |rig: &str| {
        let output = tautrail(folder.path(), &["forecast", "--json", "--draws", "200", rig]);
        let value: Value = serde_json::from_slice(&output.stdout).unwrap_or_else(|_| panic!("{}", text(&output)));
        value["quantities"][0]["best"].as_f64().unwrap()
    };
    let by_card = speed("rig.toml");
    let card = fs::read_to_string(folder.path().join("card.toml")).unwrap();
    let stiffer =
        card.replace("curve_cycle", "curve_relaxed_to = \"80 %\"\nloading_curve_relaxed_to = \"80 %\"\ncurve_cycle");
    fs::write(folder.path().join("card.toml"), stiffer).unwrap();
    assert!(
        speed("rig.toml") > 1.08 * by_card,
        "a quarter more tension must show: {} against {by_card}",
        speed("rig.toml")
    );
}

#[test]
fn a_card_that_is_missing_or_stands_beside_a_curve_is_an_error_with_its_place() {
    let folder = bench(2);
    fs::write(folder.path().join("rig.toml"), rig_with_card("")).unwrap();
    let checked = tautrail(folder.path(), &["check", "--no-ports", "rig.toml"]);
    assert_eq!(checked.status.code(), Some(1));
    assert!(text(&checked).contains("cords.card: card.toml can't be read"), "{}", text(&checked));
    assert_eq!(tautrail(folder.path(), &["cord", "card", "--out", "card.toml", "sheet.toml"]).status.code(), Some(0));
    let both = rig_with_card("").replace("card = \"card.toml\"", "card = \"card.toml\"\nfree_length = \"2.7 m\"");
    fs::write(folder.path().join("rig.toml"), both).unwrap();
    let checked = tautrail(folder.path(), &["check", "--no-ports", "rig.toml"]);
    assert!(text(&checked).contains("cords.free_length: stands beside card"), "{}", text(&checked));
}

#[test]
fn forty_six_kilograms_on_a_pair_of_wings_stand_for_ten_g() {
    // Common practice, no published source: 46 kg spread evenly over a pair of wings stands for a 10 g acceleration (implied
    // accelerated mass 4.6 kg).
    let proof = "[proof_load]\nstructure = \"survey-8, both wings\"\nmasses = \"46 kg\"\nspread = \"evenly over the span\"\n\
                 own_weight = \"not counted\"\naccelerated_mass = \"4.6 kg\"\ndirection = \"aft\"\nmargin = 1.25\n\
                 date = \"2031-04-02\"\ninspector = \"an inspector\"\n";
    let folder = bench(3);
    let rig = rig_text("north-pier.toml").replacen("[losses]", &format!("{proof}\n[losses]"), 1);
    fs::write(folder.path().join("rig.toml"), rig).unwrap();
    let checked = text(&tautrail(folder.path(), &["check", "--no-ports", "rig.toml"]));
    for part in
        ["stand for 10.00 g aft", "limit 8.00 g", "structural sign-off is licensed practice", "10.00 g is above 8.00 g"]
    {
        assert!(checked.contains(part), "{part:?} is missing in {checked}");
    }
    let forecast = text(&tautrail(folder.path(), &["forecast", "--draws", "100", "rig.toml"]));
    assert!(forecast.contains("limit 8.00 g"), "{forecast}");
}

#[test]
fn the_sheets_mistakes_are_told_and_no_card_is_written() {
    let folder = bench(4);
    let csv = fs::read_to_string(folder.path().join("lot.csv")).unwrap();
    let refused = |csv: &str, part: &str| {
        fs::write(folder.path().join("lot.csv"), csv).unwrap();
        let output = tautrail(folder.path(), &["cord", "card", "--out", "card.toml", "sheet.toml"]);
        assert_eq!(output.status.code(), Some(2), "{}", text(&output));
        assert!(text(&output).contains(part), "{part:?} is missing in {}", text(&output));
        assert!(!folder.path().join("card.toml").exists());
    };
    refused(&csv.replace("weight [kg]", "force [kg]"), "\"kg\" is a mass, not a force");
    refused(&csv.replace("weight [kg]", "weight"), "has no unit");
    refused(&csv.replacen("load, 5,", "load, NaN,", 1), "no number");
    let two: Vec<&str> = csv.lines().take(3).collect();
    refused(&two.join("\n"), "at least 4 are needed");
    fs::remove_file(folder.path().join("lot.csv")).unwrap();
    let output = tautrail(folder.path(), &["cord", "card", "sheet.toml"]);
    assert!(text(&output).contains("lot.csv: cannot be read"), "{}", text(&output));
}

/// The same Prony fit by SciPy: the hold's own tension eliminated, the ramp convolved.
const PRONY_BY_SCIPY: &str = r"
import sys, numpy as np
from scipy.optimize import least_squares
winch = float(sys.argv[1])
t, n = np.array([row.split(':') for row in sys.argv[2].split()], float).T
def part(p):
    g, tau = p[0::2], np.exp(p[1::2])
    ramp = -np.expm1(-winch / tau) / (winch / tau)
    return 1 - sum(gi * (1 - ri * np.exp(-t / ti)) for gi, ri, ti in zip(g, ramp, tau))
def residual(p):
    shape = part(p)
    return shape * (shape @ n) / (shape @ shape) / n - 1
fit = least_squares(residual, [0.05, np.log(6), 0.05, np.log(100)], xtol=1e-14, ftol=1e-14, gtol=1e-14)
for g, tau in sorted(zip(fit.x[0::2], np.exp(fit.x[1::2])), key=lambda pair: pair[1]):
    print(repr(float(g)), repr(float(tau)))
";

#[test]
fn relaxation_agrees_with_scipy() {
    let terms = [RelaxationTerm { share: 0.04, time_s: 6.0 }, RelaxationTerm { share: 0.05, time_s: 110.0 }];
    let (toml, _) = virtual_lot::sheet(1, 1);
    let mut csv = String::from("serial, cycle, branch, time [s], force [N], elongation [%]\n");
    for step in 1..=10 {
        csv.push_str(&format!(
            "a, 4, load, {:.1}, {:.4}, {}\n",
            1.5 * f64::from(step),
            8.0 * f64::from(step),
            10 * step
        ));
    }
    let mut held = String::new();
    for i in 0..45 {
        let t = (0.5 * 1.16_f64.powi(i) * 100.0).round() / 100.0;
        let seen_n = 80.0 * held_part(&terms, 13.5, t) * (1.0 + 3e-5 * (9.0 * t).sin());
        csv.push_str(&format!("a, 4, hold, {:.2}, {seen_n:.6}, 100\n", 15.0 + t));
        held.push_str(&format!("{t}:{seen_n:.6} "));
    }
    for step in (1..10).rev() {
        csv.push_str(&format!(
            "a, 4, unload, {:.1}, {:.4}, {}\n",
            1000.0 - f64::from(step),
            7.2 * f64::from(step),
            10 * step
        ));
    }
    let sheet = CordSheet::read(&toml, Some(&csv)).0.unwrap();
    let found = characterise(&sheet).unwrap().relaxation.unwrap();
    let by_scipy = support::run_oracle(PRONY_BY_SCIPY, &["13.5", &held]);
    assert_eq!((found.terms.len(), by_scipy.lines().count()), (2, 2), "{found:?}");
    for (term, line) in found.terms.iter().zip(by_scipy.lines()) {
        let (share, time_s) = line.split_once(' ').unwrap();
        let (share, time_s): (f64, f64) = (share.parse().unwrap(), time_s.parse().unwrap());
        assert!(
            (term.share / share - 1.0).abs() < 1e-4 && (term.time_s / time_s - 1.0).abs() < 1e-4,
            "{term:?}: {line}"
        );
    }
}

#[test]
fn the_splines_curve_is_scipys_monotone_one() {
    let script = "import sys, numpy as np\nfrom scipy.interpolate import PchipInterpolator\n\
                  x, y = np.array([p.split(':') for p in sys.argv[1].split()], float).T\n\
                  print(*[repr(float(v)) for v in PchipInterpolator(x, y)(np.linspace(x[0], x[-1], 41))])";
    // Rubber after Treloar 1944 (tests/reference/treloar_1944_uniaxial.csv, source there).
    let text = include_str!("reference/treloar_1944_uniaxial.csv");
    let rows = text.lines().filter(|line| line.starts_with(|first: char| first.is_ascii_digit()));
    let points: Vec<(f64, f64)> = rows
        .map(|line| {
            let cells: Vec<f64> = line.split(',').map(|cell| cell.parse().unwrap()).collect();
            (cells[0], cells[1])
        })
        .collect();
    let shown: Vec<String> = points.iter().map(|(x, y)| format!("{x}:{y}")).collect();
    let by_scipy = support::run_oracle(script, &[&shown.join(" ")]);
    let curve = Curve::through(&points).unwrap();
    let (first, last) = (curve.first(), curve.last());
    for (i, expected) in by_scipy.split_whitespace().enumerate() {
        let at = first + (last - first) * i as f64 / 40.0;
        let expected: f64 = expected.parse().unwrap();
        assert!((curve.value(at) - expected).abs() < 1e-10 * 64.0, "at {at}: {} against {expected}", curve.value(at));
    }
}
