//! How near the truth readings come, and how often their intervals hold it: a table over seeds of the virtual rig.
//!
//!     cargo run --example coverage -- nominal 100 1       results of a scenario, seeds 1 to 100
//!     cargo run --example coverage -- outcomes 5 1        what each scenario is called
//!
//! Every seed draws calibration errors, clocks and noise that the reading never sees. Sensor sets are made by leaving
//! channels out. Prints Markdown.

use std::collections::BTreeMap;
use std::process::ExitCode;

use tautrail::calibration::Signal;
use tautrail::reading::{Reading, read};
use tautrail::rig::{Rig, Role};
use virtual_rig::performance::Options;
use virtual_rig::scenario::{self, Scenario};

#[path = "../tests/support/virtual_trial.rs"]
mod virtual_trial;

use virtual_trial::{VirtualTrial, play, rehearsal_rig};

const SETS: [(&str, &[Role]); 3] = [
    ("encoder and accelerometer", &[]),
    ("encoder only", &[Role::ShuttleSpecificForce]),
    ("accelerometer only", &[Role::ShuttlePosition]),
];

struct Quantity {
    result: &'static str,
    unit: &'static str,
    truth: fn(&VirtualTrial) -> Option<f64>,
}

const QUANTITIES: [Quantity; 8] = [
    Quantity { result: "launch_speed", unit: "m/s", truth: |t| t.truth.launch.as_ref().map(|l| l.speed_ground_mps) },
    Quantity { result: "release_time", unit: "s", truth: |t| t.event_s("release") },
    Quantity { result: "peak_g_cfc60_specific", unit: "g", truth: |t| peak(t).map(|p| p.0) },
    Quantity { result: "peak_g_cfc60_kinematic", unit: "g", truth: |t| peak(t).map(|p| p.1) },
    Quantity { result: "separation_x", unit: "m", truth: |t| t.truth.launch.as_ref().map(|l| l.separation_x_m) },
    Quantity { result: "hold_tension", unit: "N", truth: |t| Some(t.truth.tension.hold_line_n) },
    Quantity { result: "draw", unit: "m", truth: |t| Some(4.0 - t.truth.tension.hold_x_m) },
    Quantity { result: "winch_back_work", unit: "J", truth: |t| Some(t.winch_work_j) },
];

fn peak(trial: &VirtualTrial) -> Option<(f64, f64)> {
    trial.truth.peaks.iter().find(|peak| peak.filter == "cfc60").map(|peak| (peak.specific_g, peak.kinematic_g))
}

#[derive(Default)]
struct Tally {
    errors: Vec<f64>,
    half_widths: Vec<f64>,
    n_inside: usize,
    n_absent: usize,
}

impl Tally {
    fn take(&mut self, reading: &Reading, quantity: &Quantity, trial: &VirtualTrial) {
        let Some(truth) = (quantity.truth)(trial) else { return };
        let Some(row) = reading.result(quantity.result) else {
            self.n_absent += 1;
            return;
        };
        self.errors.push((row.value - truth).abs());
        self.half_widths.push(0.5 * (row.high - row.low));
        self.n_inside += usize::from((row.low..=row.high).contains(&truth));
    }

    fn quantile(&self, share: f64) -> f64 {
        let mut sorted = self.errors.clone();
        sorted.sort_by(f64::total_cmp);
        let place = (share * sorted.len() as f64).ceil() as usize;
        sorted.get(place.clamp(1, sorted.len().max(1)) - 1).copied().unwrap_or(f64::NAN)
    }

    fn print(&self, quantity: &Quantity, set: &str) {
        let n = self.errors.len();
        if n == 0 {
            println!("| {} | {set} | absent in all {} | | | | |", quantity.result, self.n_absent);
            return;
        }
        let width = self.half_widths.iter().sum::<f64>() / n as f64;
        println!(
            "| {} | {set} | {:.3e} {unit} | {:.3e} {unit} | {width:.3e} {unit} | {:.2} | {:.1} % of {n} |",
            quantity.result,
            self.quantile(0.5),
            self.quantile(0.95),
            width / self.quantile(0.95),
            100.0 * self.n_inside as f64 / n as f64,
            unit = quantity.unit,
        );
    }
}

/// What the crew's rig file would say where it is not the nominal rig.
fn rig_for(scenario: &Scenario) -> Rig {
    let mut rig = rehearsal_rig();
    rig.rail.incline_rad = scenario.launcher.incline_rad;
    rig.site.head_wind_mps = scenario.launcher.head_wind_mps;
    rig
}

/// One line a scenario: what happened, and what the reading called it, over seeds.
fn print_outcomes(n_seeds: u64, first: u64) {
    println!("| scenario | happened | read as |\n| --- | --- | --- |");
    for scenario in scenario::all(0, first) {
        let rig = rig_for(&scenario);
        let mut called = BTreeMap::<String, u64>::new();
        let mut happened = "";
        for seed in first..first + n_seeds {
            let options = Options { scenario: scenario.name.to_owned(), seed, pace: 0.3, ..Options::default() };
            let trial = play(&options, &rig);
            happened = trial.truth.outcome;
            *called.entry(read(&trial.signals, &rig).outcome.word().to_owned()).or_default() += 1;
        }
        let called: Vec<String> = called.into_iter().map(|(word, n)| format!("{word} ({n})")).collect();
        println!("| {} | {happened} | {} |", scenario.name, called.join(", "));
    }
}

/// One line a result and sensor set.
fn print_coverage(name: &str, n_seeds: u64, first: u64) {
    let Some(scenario) = scenario::by_name(name, 0, first) else { return eprintln!("there is no scenario {name}") };
    let rig = rig_for(&scenario);
    let mut tallies: Vec<Vec<Tally>> =
        SETS.iter().map(|_| QUANTITIES.iter().map(|_| Tally::default()).collect()).collect();
    for seed in first..first + n_seeds {
        let trial = play(&Options { scenario: name.to_owned(), seed, pace: 0.3, ..Options::default() }, &rig);
        for ((_, without), tallies) in SETS.iter().zip(&mut tallies) {
            let seen: Vec<Signal> = trial.signals.iter().filter(|s| !without.contains(&s.role)).cloned().collect();
            let reading = read(&seen, &rig);
            for (quantity, tally) in QUANTITIES.iter().zip(tallies) {
                tally.take(&reading, quantity, &trial);
            }
        }
    }
    println!("Scenario {name}, seeds {first} to {}, rig north-pier (invented).\n", first + n_seeds - 1);
    println!(
        "| result | sensors | median error | 95 % error | mean half-width of the interval | width / error | inside |"
    );
    println!("| --- | --- | --- | --- | --- | --- | --- |");
    for (idx, quantity) in QUANTITIES.iter().enumerate() {
        for ((set, _), tallies) in SETS.iter().zip(&tallies) {
            tallies[idx].print(quantity, set);
        }
    }
}

fn main() -> ExitCode {
    let words: Vec<String> = std::env::args().skip(1).collect();
    let number = |idx: usize, otherwise: u64| words.get(idx).map_or(Ok(otherwise), |word| word.parse::<u64>());
    let (Some(what), Ok(n_seeds), Ok(first)) = (words.first(), number(1, 20), number(2, 1)) else {
        eprintln!("coverage outcomes|SCENARIO [SEEDS] [FIRST SEED]");
        return ExitCode::from(2);
    };
    match what.as_str() {
        "outcomes" => print_outcomes(n_seeds, first),
        name => print_coverage(name, n_seeds, first),
    }
    ExitCode::SUCCESS
}
