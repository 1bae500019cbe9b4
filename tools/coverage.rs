//! How near the truth readings come, and how often their intervals hold it: a table over seeds of the virtual rig.
//!
//!     cargo run --example coverage -- [SEEDS] [FIRST]
//!
//! Every seed draws calibration errors, clocks and noise that the reading never sees. Sensor sets are made by leaving
//! channels out. Prints a Markdown table; `docs` hold the last one.

use std::process::ExitCode;

use tautrail::calibration::Signal;
use tautrail::reading::{Reading, read};
use tautrail::rig::Role;
use virtual_rig::performance::Options;

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
    Quantity { result: "winch_back_work", unit: "J", truth: |t| t.truth.energy.as_ref().map(|e| e.winch_work_j) },
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

fn main() -> ExitCode {
    let mut numbers = std::env::args().skip(1).map(|word| word.parse::<u64>());
    let (Ok(n_seeds), Ok(first)) = (numbers.next().unwrap_or(Ok(20)), numbers.next().unwrap_or(Ok(1))) else {
        eprintln!("coverage [SEEDS] [FIRST]: two whole numbers");
        return ExitCode::from(2);
    };
    let rig = rehearsal_rig();
    let mut tallies: Vec<Vec<Tally>> =
        SETS.iter().map(|_| QUANTITIES.iter().map(|_| Tally::default()).collect()).collect();
    let mut findings = std::collections::BTreeMap::<String, u64>::new();
    for seed in first..first + n_seeds {
        let trial = play(&Options { seed, pace: 0.5, ..Options::default() }, &rig);
        for ((set, without), tallies) in SETS.iter().zip(&mut tallies) {
            let seen: Vec<Signal> = trial.signals.iter().filter(|s| !without.contains(&s.role)).cloned().collect();
            let reading = read(&seen, &rig);
            for (quantity, tally) in QUANTITIES.iter().zip(tallies) {
                tally.take(&reading, quantity, &trial);
            }
            *findings.entry(format!("{set}: {}", reading.outcome.word())).or_default() += 1;
            for finding in &reading.findings {
                let words: String = finding.chars().filter(|c| !c.is_ascii_digit()).take(60).collect();
                *findings.entry(format!("{set}: finding: {words}")).or_default() += 1;
            }
        }
    }
    println!("Scenario nominal, seeds {first} to {}, rig north-pier (invented).\n", first + n_seeds - 1);
    println!(
        "| result | sensors | median error | 95 % error | mean half-width of the interval | width / error | inside |"
    );
    println!("| --- | --- | --- | --- | --- | --- | --- |");
    for (idx, quantity) in QUANTITIES.iter().enumerate() {
        for ((set, _), tallies) in SETS.iter().zip(&tallies) {
            tallies[idx].print(quantity, set);
        }
    }
    println!();
    for (words, n) in findings {
        println!("- {words}: {n}");
    }
    ExitCode::SUCCESS
}
