//! Calibration beside the real daemon: a board on a pty, masses hung on its cell, the guided command as a person runs it.
//! The bench is the virtual rig's, with hidden errors of masses, gravity, air and cell. Invented data.

use std::fs;
use std::path::Path;

use tautrail::calibration::{readings_from_csv, to_value, value_uncertainty};
use tautrail::rig::CalibrationRecord;
use virtual_rig::weights::{self, WeightBench};

use crate::board::{Board, Prints};
use crate::guided::{Guided, daemon, rig_text};

/// The bench runs this many times as fast as a crew, so that swings die down sooner.
const HURRY: usize = 4;

/// What a board on the bench prints.
struct Bench {
    cell: WeightBench,
    /// Printed in place of the cell's counts.
    stuck_at: Option<f64>,
}

impl Prints for Bench {
    fn line(&mut self) -> String {
        let counts = (0..HURRY).map(|_| self.cell.tell().mean_counts).sum::<f64>() / HURRY as f64;
        format!("{:.2}", self.stuck_at.unwrap_or(counts))
    }
}

impl Bench {
    fn hang(&mut self, n_masses: usize) {
        let force_n = self.cell.weight_n(&(0..n_masses).collect::<Vec<_>>());
        self.cell.hang_n(force_n);
    }
}

fn sheet_text() -> String {
    use weights::*;
    let mut text = format!(
        "kind = \"cell\"\nchannel = \"line\"\nsensor = \"invented cell\"\nperson = \"rig engineer\"\ndate = \"2020-01-06\"\n\
         valid_until = \"2099-12-31\"\ninvented = true\ndrift_per_year = \"0.05 %\"\nmasses_common_uncertainty = \"{} %\"\n\
         counts_step = 0.01\n[place]\ngravity = \"{GRAVITY_MPS2} m/s2\"\ngravity_uncertainty = \"{GRAVITY_UNCERTAINTY_MPS2} m/s2\"\n\
         air_density = \"{AIR_KG_PER_M3} kg/m3\"\nair_density_uncertainty = \"{AIR_UNCERTAINTY_KG_PER_M3} kg/m3\"\n",
        100.0 * COMMON_RELATIVE
    );
    for index in 0..N_MASSES {
        text.push_str(&format!(
            "[[mass]]\nname = \"M{index}\"\nmass = \"{NOMINAL_KG} kg\"\nuncertainty = \"{MASS_UNCERTAINTY_KG} kg\"\n\
             density = \"{DENSITY_KG_PER_M3} kg/m3\"\n"
        ));
    }
    text
}

const GUIDED: [&str; 9] =
    ["calibrate", "cell", "sheet.toml", "--live", "--plan", "plan.csv", "--record", "records/line.toml", "--readings"];

#[test]
fn a_new_cell_is_calibrated_beside_the_daemon_and_its_record_covers_the_truth() {
    let dir = tempfile::tempdir().unwrap();
    let bench = Bench { cell: WeightBench::new(1), stuck_at: None };
    let board = Board::at(&dir.path().join("ports/bench-board"), bench);
    fs::write(dir.path().join("rig.toml"), rig_text("")).unwrap();
    fs::write(dir.path().join("sheet.toml"), sheet_text()).unwrap();
    let stacks = [0_usize, 3, 6, 10, 0];
    let name = |n: usize| (0..n).map(|index| format!("M{index}")).collect::<Vec<_>>().join("+");
    let steps = stacks.iter().enumerate().map(|(index, n)| {
        format!("1,{},{}\n", if index == 4 { "down" } else { "up" }, if *n == 0 { "0".to_owned() } else { name(*n) })
    });
    fs::write(dir.path().join("plan.csv"), format!("run,direction,load\n{}", steps.collect::<String>())).unwrap();
    let mut daemon = daemon(dir.path());
    daemon.wait_for("link", "is open at");

    let mut guided = Guided::start(dir.path(), &[&GUIDED[..], &["taken.csv"]].concat());
    let mut settled = Vec::new();
    for (index, n) in stacks.iter().enumerate() {
        guided.asked(&format!("step {} of 5", index + 1));
        board.shown.lock().unwrap().hang(*n);
        guided.answer("");
        guided.asked(" counts, scatter ");
        // Where the cell stands once it is quiet, noise and all.
        let mut later = board.shown.lock().unwrap().cell.clone();
        later.pass(4.0);
        settled.push((0..60).map(|_| later.tell().mean_counts).sum::<f64>() / 60.0);
    }
    let (code, said) = guided.end();
    assert_eq!(code, Some(0), "{said}");
    let taken = readings_from_csv(&fs::read_to_string(dir.path().join("taken.csv")).unwrap()).unwrap();
    assert_eq!(taken.len(), 5);
    for (reading, settled) in taken.iter().zip(settled) {
        // A load of some 300 N swings by 2400 counts at first; creep goes on by a few counts a second.
        assert!((reading.counts - settled).abs() < 60.0, "{} counts, at rest {settled}: {said}", reading.counts);
        assert!(reading.n.unwrap() >= 80.0, "three seconds at 30 lines a second: {reading:?}");
        // What is left of the swing shows in the scatter, and evens out in the mean.
        assert!((1.0..500.0).contains(&reading.sd_counts.unwrap()), "{reading:?}");
    }

    let text = fs::read_to_string(dir.path().join("records/line.toml")).unwrap();
    let record = CalibrationRecord::read("line.toml", &text).0.unwrap();
    let mut used = board.shown.lock().unwrap().cell.clone();
    for n in [2_usize, 5, 9] {
        let truth_n = used.weight_n(&(0..n).collect::<Vec<_>>());
        used.hang_n(truth_n);
        used.pass(20.0);
        let found_n = to_value(&record.coefficients, used.tell().mean_counts);
        let half_n = 1.96 * value_uncertainty(&record.coefficients, found_n);
        assert!((found_n - truth_n).abs() <= half_n, "{found_n} N for {truth_n} N, ± {half_n} N");
        assert!(half_n < 0.01 * truth_n.max(100.0), "worth something: ± {half_n} N at {truth_n} N");
    }
    refusals(dir.path(), &board);
    assert_eq!(daemon.stop(), Some(0));
}

/// What a person can get wrong beside the running daemon is told in a sentence, before anything is written over.
fn refusals(dir: &Path, board: &Board<Bench>) {
    let (code, said) = Guided::start(dir, &[&GUIDED[..], &["taken.csv"]].concat()).end();
    assert!(code == Some(2) && said.contains("readings are never overwritten"), "{said}");
    let other = sheet_text().replace("channel = \"line\"", "channel = \"lien\"");
    fs::write(dir.join("sheet.toml"), other).unwrap();
    let mut guided = Guided::start(dir, &[&GUIDED[..], &["other.csv"]].concat());
    guided.answer("");
    let (code, said) = guided.end();
    assert!(code == Some(2) && said.contains("there is no channel \"lien\", there are: line"), "{said}");
    fs::write(dir.join("sheet.toml"), sheet_text()).unwrap();
    board.shown.lock().unwrap().stuck_at = Some(8_388_607.0);
    let mut guided = Guided::start(dir, &[&GUIDED[..], &["saturated.csv"]].concat());
    guided.answer("");
    let (code, said) = guided.end();
    assert!(code == Some(2) && said.contains("line is saturated, ") && said.contains("take less load"), "{said}");
}
