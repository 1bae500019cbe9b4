//! How often a fit's 95 % intervals hold the losses that the model was given, and how wide they are. Prints Markdown.
//!
//!     cargo run --example fit-coverage -- 200 1      seeds 1 to 200 and the fresh ones 201 to 400
//!
//! Six trials of the model itself with 3 to 6 cords, noise on every speed, every hold a little off.

use std::process::ExitCode;

use tautrail::replay::fit::{FitOptions, fit};

#[path = "../tests/support/made_trials.rs"]
mod made_trials;

use made_trials::{TERMS, TRUTH, made_trials};

const TRIALS: u32 = 6;

fn print_table(n_seeds: u64, first: u64) {
    let options = FitOptions { examine: false, threads: 2, ..FitOptions::of(TERMS.to_vec()) };
    let (mut inside, mut widths, mut n_fits, mut n_misfits) = ([0_u64; 4], [0.0; 4], 0_u64, 0_u64);
    for seed in first..first + n_seeds {
        let found = match fit(&made_trials(TRIALS, seed, true), &options) {
            Ok(found) => found,
            Err(why) => {
                eprintln!("seed {seed}: {why}");
                continue;
            }
        };
        n_fits += 1;
        n_misfits += u64::from(found.misfits());
        for (k, one) in found.terms.iter().enumerate() {
            let half = 1.96 * one.fitted.standard_uncertainty;
            inside[k] += u64::from((one.fitted.value - TRUTH[k]).abs() <= half);
            widths[k] += half;
        }
    }
    println!("\nSeeds {first} to {}: {n_fits} fits, {n_misfits} called misfits.\n", first + n_seeds - 1);
    println!("| loss | true | mean half-width | inside |\n| --- | --- | --- | --- |");
    for (k, term) in TERMS.iter().enumerate() {
        let width = widths[k] / n_fits.max(1) as f64;
        println!("| {} | {} | {width:.4} | {} of {n_fits} |", term.name(), TRUTH[k], inside[k]);
    }
}

fn main() -> ExitCode {
    let words: Vec<String> = std::env::args().skip(1).collect();
    let number = |idx: usize, otherwise: u64| words.get(idx).map_or(Ok(otherwise), |word| word.parse::<u64>());
    let (Ok(n_seeds), Ok(first)) = (number(0, 10), number(1, 1)) else {
        eprintln!("fit-coverage [SEEDS] [FIRST SEED]");
        return ExitCode::from(2);
    };
    print_table(n_seeds, first);
    print_table(n_seeds, first + n_seeds);
    ExitCode::SUCCESS
}
