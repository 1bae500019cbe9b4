//! A joint fit of four losses over twenty trials, against SciPy with its own solver on the same residuals.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a figure that can't be had stops the bench")]

#[path = "../../tests/support/made_trials.rs"]
mod made_trials;
#[path = "../../tests/support/mod.rs"]
mod support;

use std::hint::black_box;
use std::time::Instant;

use made_trials::{TERMS, for_oracle, made_trials};
use tautrail::replay::fit::{FitOptions, fit};

const TARGET: f64 = 100.0;

fn main() {
    let before = unevenness();
    let trials = made_trials(20, 1, false);
    let options = FitOptions {
        examine: false,
        threads: std::thread::available_parallelism().map_or(1, usize::from),
        ..FitOptions::of(TERMS.to_vec())
    };
    let found = fit(&trials, &options).expect("trials that the model made can be fitted");
    let ours_s = best_s(20, || black_box(fit(&trials, &options)).is_ok());
    let alone_s = best_s(10, || black_box(fit(&trials, &FitOptions { threads: 1, ..options.clone() })).is_ok());
    // SciPy as a person would run it: two-point differences, a solver tolerance of 1e-8.
    let numbers = for_oracle(&trials, &found, "2-point", 1e-8, 3);
    let text = support::run_oracle(include_str!("../oracles/losses_fit.py"), &[&numbers.to_string()]);
    let scipy: serde_json::Value = serde_json::from_str(&text).unwrap();
    let scipy_s = scipy["seconds"].as_f64().unwrap();
    let after = unevenness();
    println!(
        "control: worst tenth of rounds of plain arithmetic over the best one: {before:.2} before, {after:.2} after"
    );
    for (k, one) in found.terms.iter().enumerate() {
        let theirs = scipy["values"][k].as_f64().unwrap();
        println!("{}: {:.6}, SciPy {theirs:.6}", one.term.name(), one.fitted.value);
    }
    let fit = before.max(after) < 2.0;
    print("joint_fit_4_losses_20_trials", ours_s, scipy_s, TARGET, fit);
    print("joint_fit_4_losses_20_trials_one_thread", alone_s, scipy_s, 0.0, fit);
}

fn print(name: &str, value_s: f64, reference_s: f64, target: f64, fit: bool) {
    let ratio = reference_s / value_s;
    let verdict = match (ratio >= target, fit) {
        _ if target == 0.0 => "",
        (true, _) => " met",
        (false, true) => " MISSED",
        (false, false) => " inconclusive: the machine is busy",
    };
    println!(
        "figure {name} value={:.3e} unit=ms reference={:.3e} ratio={ratio:.1} target={target}{verdict}",
        value_s * 1e3,
        reference_s * 1e3
    );
}

/// Control: a loop of plain arithmetic; where a tenth of its rounds take over twice the best one, the machine is unfit.
fn unevenness() -> f64 {
    let mut rounds: Vec<f64> = (0..200)
        .map(|_| {
            let begin = Instant::now();
            black_box((0..100_000).fold(1.0_f64, |x, _| black_box(x) * 1.000_000_1));
            begin.elapsed().as_secs_f64()
        })
        .collect();
    rounds.sort_by(f64::total_cmp);
    rounds[rounds.len() * 9 / 10] / rounds[0]
}

fn best_s(rounds: u32, call: impl Fn() -> bool) -> f64 {
    let mut best_s = f64::INFINITY;
    for _ in 0..rounds {
        let begin = Instant::now();
        assert!(call());
        best_s = best_s.min(begin.elapsed().as_secs_f64());
    }
    best_s
}
