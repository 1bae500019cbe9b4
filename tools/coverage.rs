//! How near the truth readings come, and how often their intervals hold it: tables over seeds of the virtual rig.
//!
//!     cargo run --example coverage -- all 40 1           every table, seeds 1 to 40 and the fresh ones 41 to 80
//!     cargo run --example coverage -- nominal 100 1      results of one scenario
//!     cargo run --example coverage -- outcomes 5 1       what each scenario is called
//!     cargo run --example coverage -- budgets 1 7 nominal    what the uncertainties of seed 7 are made of
//!
//! Every seed draws calibration errors, clocks, noise, masses, friction, wind and cords that the reading never sees; three
//! seeds in four also a trouble of the line. Sensor sets are made by leaving channels out; the poor rig's from what it
//! would have had of them. Prints Markdown.

use std::collections::BTreeMap;
use std::process::ExitCode;

use tautrail::reading::read;
use tautrail::rig::{Given, RailSupport, Rig};
use virtual_rig::performance::Options;
use virtual_rig::scenario::{self, Scenario};

#[path = "coverage/quantities.rs"]
mod quantities;
#[path = "coverage/sensor_sets.rs"]
mod sensor_sets;
#[path = "../tests/support/virtual_trial.rs"]
mod virtual_trial;

use quantities::{Quantity, Tally, quantities};
use sensor_sets::SETS;
use virtual_trial::{play, rehearsal_rig};

/// Scenarios that end in a launch, for the tables of results.
const LAUNCHES: [&str; 5] = ["nominal", "incline-head-wind", "soft-rail", "stage-1", "gas-launcher"];
/// Troubles of the lines that go round with the seed.
const TROUBLES: [&str; 4] = ["", "all:batch=16", "all:drift=60", "all:bit-errors=1e-6"];
const PACE: f64 = 0.3;

/// What the crew's rig file would say where it is not the nominal rig.
fn rig_for(scenario: &Scenario) -> Rig {
    let mut rig = rehearsal_rig();
    rig.rail.incline_rad = scenario.launcher.incline_rad;
    rig.site.head_wind_mps = scenario.launcher.head_wind_mps;
    // As well as a crew knows it on the day; what the virtual rig draws about it is hidden from the reading.
    rig.details.settings.head_wind_mps = 0.3;
    let feet = scenario.launcher.rail;
    if scenario.name == "soft-rail" {
        rig.details.rail_support = Some(RailSupport {
            mass_kg: Given { value: feet.mass_kg, standard_uncertainty: 0.1 * feet.mass_kg },
            stiffness_n_per_m: Given {
                value: feet.stiffness_n_per_m,
                standard_uncertainty: 0.2 * feet.stiffness_n_per_m,
            },
            damping_n_per_mps: feet.damping_n_s_per_m,
        });
    }
    if scenario.name == "gas-launcher" {
        rig.cords.count = 0;
    }
    if scenario.name.starts_with("stage") {
        rig.cords.count = scenario.launcher.cords.iter().map(|set| set.count).sum::<f64>().round() as u32;
    }
    let dummy = scenario.launcher.payload.filter(|_| scenario.name.starts_with("stage"));
    if let Some(payload) = dummy {
        rig.payload.mass_kg.value = payload.mass_kg;
        rig.payload.drag_area_m2.value = payload.drag_area_m2;
        rig.payload.drag_area_m2.standard_uncertainty = 0.1 * payload.drag_area_m2;
    }
    rig
}

fn options(name: &str, seed: u64) -> Options {
    let trouble = TROUBLES[(seed % 4) as usize];
    let faults = if trouble.is_empty() { Vec::new() } else { trouble.parse().into_iter().collect() };
    Options { scenario: name.to_owned(), seed, pace: PACE, vary: true, faults, ..Options::default() }
}

/// One line a scenario: what happened, and what the reading called it, over seeds.
fn print_outcomes(n_seeds: u64, first: u64) {
    println!("\nOutcomes, seeds {first} to {}.\n", first + n_seeds - 1);
    println!("| scenario | happened | read as |\n| --- | --- | --- |");
    for scenario in scenario::all(0, first) {
        let rig = rig_for(&scenario);
        let mut called = BTreeMap::<String, u64>::new();
        let mut happened = "";
        for seed in first..first + n_seeds {
            let trial = play(&Options { scenario: scenario.name.to_owned(), ..options("nominal", seed) }, &rig);
            happened = trial.truth.outcome;
            *called.entry(read(&trial.signals, &rig).outcome.word().to_owned()).or_default() += 1;
        }
        let called: Vec<String> = called.into_iter().map(|(word, n)| format!("{word} ({n})")).collect();
        println!("| {} | {happened} | {} |", scenario.name, called.join(", "));
    }
}

/// Tallies of one scenario: a row a sensor set, a column a quantity.
fn tallies(scenario: &Scenario, quantities: &[Quantity], n_seeds: u64, first: u64) -> Vec<Vec<Tally>> {
    let rig = rig_for(scenario);
    let mut tallies: Vec<Vec<Tally>> =
        SETS.iter().map(|_| quantities.iter().map(|_| Tally::default()).collect()).collect();
    for seed in first..first + n_seeds {
        let trial = play(&options(scenario.name, seed), &rig);
        let truths: Vec<Option<f64>> = quantities.iter().map(|quantity| (quantity.truth)(&trial)).collect();
        for (set, tallies) in SETS.iter().zip(&mut tallies) {
            let reading = read(&(set.seen)(&trial.signals, seed), &rig);
            for ((quantity, truth), tally) in quantities.iter().zip(&truths).zip(tallies) {
                tally.take(&reading, quantity, *truth);
            }
        }
    }
    tallies
}

/// One line a result and sensor set; the first seeds, and the fresh ones beside them.
fn print_coverage(name: &str, n_seeds: u64, first: u64) {
    let Some(scenario) = scenario::by_name(name, 0, first) else { return eprintln!("there is no scenario {name}") };
    let quantities = quantities();
    let fresh = first + n_seeds;
    let first_half = tallies(&scenario, &quantities, n_seeds, first);
    let second_half = tallies(&scenario, &quantities, n_seeds, fresh);
    println!("\nScenario {name}, seeds {first} to {} | {fresh} to {}.\n", fresh - 1, fresh + n_seeds - 1);
    println!(
        "| result | sensors | mean error | median error | 95 % error | mean half-width | width over error | inside |"
    );
    println!("| --- | --- | --- | --- | --- | --- | --- | --- |");
    for (idx, quantity) in quantities.iter().enumerate() {
        for (set, (a, b)) in SETS.iter().zip(first_half.iter().zip(&second_half)) {
            if let Some(row) = Tally::row(&a[idx], &b[idx], quantity, set.name) {
                println!("{row}");
            }
        }
    }
}

/// What the uncertainties of one seed are made of, beside the error: for the search of causes.
fn print_budgets(name: &str, seed: u64) {
    let Some(scenario) = scenario::by_name(name, 0, seed) else { return eprintln!("there is no scenario {name}") };
    let rig = rig_for(&scenario);
    let trial = play(&options(name, seed), &rig);
    for set in &SETS {
        let reading = read(&(set.seen)(&trial.signals, seed), &rig);
        println!("\n{}, {name}, seed {seed}: {:?}", set.name, reading.findings);
        for quantity in quantities() {
            let (Some(row), Some(truth)) = (reading.result(quantity.result), (quantity.truth)(&trial)) else {
                continue;
            };
            println!(
                "{} {:.6}, error {:+.2e}, u {:.2e}",
                row.name,
                row.value,
                row.value - truth,
                row.standard_uncertainty
            );
            for term in &row.budget {
                println!("    {:.2e} {}", term.standard_uncertainty, term.source);
            }
        }
    }
}

fn main() -> ExitCode {
    let words: Vec<String> = std::env::args().skip(1).collect();
    let number = |idx: usize, otherwise: u64| words.get(idx).map_or(Ok(otherwise), |word| word.parse::<u64>());
    let (Some(what), Ok(n_seeds), Ok(first)) = (words.first(), number(1, 20), number(2, 1)) else {
        eprintln!("coverage all|outcomes|SCENARIO|budgets [SEEDS] [FIRST SEED] [SCENARIO]");
        return ExitCode::from(2);
    };
    match what.as_str() {
        "all" => {
            LAUNCHES.iter().for_each(|name| print_coverage(name, n_seeds, first));
            print_outcomes(n_seeds.min(10), first);
        }
        "budgets" => print_budgets(words.get(3).map_or("nominal", String::as_str), first),
        "outcomes" => print_outcomes(n_seeds, first),
        name => print_coverage(name, n_seeds, first),
    }
    ExitCode::SUCCESS
}
