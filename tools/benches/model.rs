//! What a launch costs: against SciPy, for a thousand draws, for the live display.

#![allow(clippy::unwrap_used, clippy::expect_used, reason = "a figure that can't be had stops the bench")]

#[path = "../../tests/support/full_featured.rs"]
mod full_featured;
#[path = "../../tests/support/mod.rs"]
mod support;

use std::hint::black_box;
use std::time::Instant;

use full_featured::{full_featured, number, setup_of};
use tautrail::estimation::Random;
use tautrail::model::{
    FAST, Inputs, Known, LaunchSetup, answers_to_rest, launch_answers, planned_line_tension_n, released_now,
};

fn main() {
    let numbers = full_featured();
    let mut setup = setup_of(&numbers);
    setup.relative_tolerance = FAST;
    let text = support::run_oracle(include_str!("../oracles/launch_speed.py"), &[&numbers.to_string()]);
    let scipy: serde_json::Value = serde_json::from_str(&text).unwrap();
    let launch_s = best_s(20, 200, || black_box(launch_answers(&setup)).is_ok());
    let speed_at = |relative_tolerance: f64| {
        let setup = LaunchSetup { relative_tolerance, ..setup.clone() };
        launch_answers(&setup).unwrap().separation.unwrap().launch_speed_mps
    };
    let off = (speed_at(FAST) / speed_at(1e-12) - 1.0).abs();
    let scipy_off = (number(&scipy["speed"]) / number(&scipy["exact_speed"]) - 1.0).abs();
    figure(
        "full_launch",
        launch_s * 1e6,
        "us",
        number(&scipy["solve_ivp_s"]) * 1e6,
        "at least 300 times faster than solve_ivp",
    );
    figure("full_launch_per_numpy_march", launch_s * 1e6, "us", number(&scipy["march_s_per_launch"]) * 1e6, "faster");
    println!(
        "figure full_launch_speed_error value={off:.1e} unit=relative reference={scipy_off:.1e} ratio={:.1} \
         target=below solve_ivp's",
        scipy_off / off
    );
    draws();
}

fn draws() {
    let rig = tautrail::rig::parse(include_str!("../rehearsal/north-pier.toml")).unwrap();
    let setup = LaunchSetup { relative_tolerance: FAST, ..LaunchSetup::planned(&rig).unwrap() };
    let inputs = Inputs::of(&rig, Known::Plan).unwrap();
    let thousand = |to_rest: bool| {
        best_s(10, 1, || {
            (0..1000).all(|draw| {
                let mut random = Random::new(1, draw);
                let independent: Vec<f64> = inputs.all.iter().map(|_| random.normal()).collect();
                let moved = inputs.moved(&setup, &inputs.correlate(&independent));
                if to_rest { answers_to_rest(&moved.setup) } else { launch_answers(&moved.setup) }.is_ok()
            })
        })
    };
    if machine_is_busy() {
        println!(
            "figure thousand_draws_to_separation inconclusive: the machine is busy, a plain loop takes uneven time"
        );
        return;
    }
    figure("thousand_draws_to_separation", thousand(false) * 1e3, "ms", 33.0, "under 33 ms on one core");
    figure("thousand_draws_to_rest", thousand(true) * 1e3, "ms", 33.0, "-");
    let tension_n = planned_line_tension_n(&rig, 4.0).unwrap();
    let now_s = best_s(10, 20, || black_box(released_now(&rig, tension_n, 0.0)).is_ok());
    figure("released_now_first_order", now_s * 1e6, "us", 1000.0, "under 1 ms");
}

/// Control: a loop of plain arithmetic whose worst round takes over twice its best one has company.
fn machine_is_busy() -> bool {
    let rounds: Vec<f64> = (0..200)
        .map(|_| {
            let begin = Instant::now();
            black_box((0..100_000).fold(1.0_f64, |x, _| black_box(x) * 1.000_000_1));
            begin.elapsed().as_secs_f64()
        })
        .collect();
    let best_s = rounds.iter().copied().fold(f64::INFINITY, f64::min);
    let mut sorted = rounds;
    sorted.sort_by(f64::total_cmp);
    sorted[sorted.len() * 9 / 10] > 2.0 * best_s
}

/// Best time of one call over several rounds: what the machine can do when nobody else wants it.
fn best_s(rounds: u32, calls: u32, mut call: impl FnMut() -> bool) -> f64 {
    let mut best_s = f64::INFINITY;
    for _ in 0..rounds {
        let begin = Instant::now();
        for _ in 0..calls {
            assert!(call());
        }
        best_s = best_s.min(begin.elapsed().as_secs_f64() / f64::from(calls));
    }
    best_s
}

fn figure(name: &str, value: f64, unit: &str, reference: f64, target: &str) {
    println!(
        "figure {name} value={value:.2} unit={unit} reference={reference:.2} ratio={:.1} target={target}",
        reference / value
    );
}
