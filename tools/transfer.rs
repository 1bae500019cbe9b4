//! How honest a forecast is of a configuration that was never launched: losses fitted on 3- and 5-cord trials of a virtual rig,
//! then 7 cords forecast from the hold, over many rigs. Prints Markdown.
//!
//!     cargo run --example transfer -- 50 1            rigs 1 to 50 and the fresh ones 51 to 100
//!     cargo run --example transfer -- 3 1 friction,cord_lag     with these losses in place of the usual ones
//!
//! Each rig has its own friction, drags, hysteresis, relaxation and damping of the cords, its own lot; each trial its own cords
//! of the lot, masses, wind, draw and length of hold. All are drawn independently, none is seen by the fit: it gets the crew's
//! rig file, which is the same for all rigs, and what the sensors showed. Data are invented.

use std::process::ExitCode;

use tautrail::estimation::Random;
use tautrail::model::{ForecastOptions, Known, LAUNCH_SPEED, forecast};
use tautrail::reading::{Reading, read};
use tautrail::replay::fit::{CardHeading, FitOptions, FitTrial, LossFit, Term, card_text, fit};
use tautrail::rig::{Given, LossCard, Rig};
use virtual_rig::performance::{Options, prepare_changed};
use virtual_rig::scenario::{Act, Scenario};

#[path = "../tests/support/virtual_trial.rs"]
mod virtual_trial;

use virtual_trial::{measured, rehearsal_rig};

/// Cords, dummy mass (none: the payload), draw.
const LIGHTER: [(u32, Option<f64>, f64); 4] =
    [(3, Some(4.0), 3.9), (3, Some(6.2), 3.6), (5, Some(6.2), 3.9), (5, Some(6.2), 3.9)];
const DUMMY_DRAG_AREA_M2: f64 = 0.012;
const USUAL: [Term; 4] = [Term::Friction, Term::Viscous, Term::CordLag, Term::ShuttleDragArea];

/// A rig as it really is: what differs from the nominal virtual rig.
struct Truth {
    friction_n: f64,
    shuttle_drag: f64,
    payload_drag: f64,
    hysteresis: f64,
    relaxation: [f64; 2],
    damping: f64,
    lot: f64,
}

fn between(random: &mut Random, low: f64, high: f64) -> f64 {
    low + (high - low) * random.even()
}

impl Truth {
    fn of(seed: u64) -> Self {
        let mut random = Random::new(seed, 0);
        let mut draw = |low, high| between(&mut random, low, high);
        Self {
            friction_n: draw(6.0, 24.0),
            shuttle_drag: draw(0.8, 1.2),
            payload_drag: draw(0.9, 1.1),
            hysteresis: draw(0.03, 0.09),
            relaxation: [draw(0.5, 1.5), draw(0.5, 1.5)],
            damping: draw(0.3, 2.0),
            lot: 1.0 + 0.01 * (random.normal()),
        }
    }

    /// One trial of it.
    fn change(
        &self,
        scenario: &mut Scenario,
        seed: u64,
        number: u64,
        (count, dummy_kg, draw_m): (u32, Option<f64>, f64),
    ) {
        let mut random = Random::new(seed, number);
        let launcher = &mut scenario.launcher;
        launcher.shuttle.friction_running_n = self.friction_n;
        launcher.shuttle.friction_static_n = 1.25 * self.friction_n;
        launcher.shuttle.drag_area_m2 *= self.shuttle_drag;
        launcher.shuttle.mass_kg += 0.005 * random.normal();
        launcher.head_wind_mps += 0.3 * random.normal();
        for group in &mut launcher.cords {
            group.count = f64::from(count);
            group.kind.hysteresis = self.hysteresis;
            group.kind.damping_n_s *= self.damping;
            group.kind.relaxation.iter_mut().zip(self.relaxation).for_each(|(term, factor)| term.0 *= factor);
        }
        launcher.scale_cords(self.lot * (1.0 + 0.015 * random.normal() / f64::from(count).sqrt()));
        if let Some(payload) = &mut launcher.payload {
            payload.drag_area_m2 = dummy_kg.map_or(payload.drag_area_m2 * self.payload_drag, |_| DUMMY_DRAG_AREA_M2);
            payload.mass_kg = dummy_kg.unwrap_or(payload.mass_kg) + 0.010 * random.normal();
        }
        let hold_s = between(&mut random, 2.0, 30.0);
        for act in &mut scenario.acts {
            match act {
                Act::Draw { draw_m: to, .. } => *to = draw_m + 0.005 * random.normal(),
                Act::Wait { phase: "hold", duration_s } => *duration_s = hold_s,
                _ => {}
            }
        }
    }
}

/// What the crew's rig file says of a configuration.
fn rig_file((count, dummy_kg, draw_m): (u32, Option<f64>, f64)) -> Rig {
    let mut rig = rehearsal_rig();
    rig.losses.friction_n = Given { value: 15.0, standard_uncertainty: 6.0 };
    // As a hold on the bench shows how a lot relaxes, and a return from it how it damps.
    rig.details.losses.cord_lag = Some(Given { value: 0.02, standard_uncertainty: 0.01 });
    rig.details.losses.cord_viscous_n_per_mps = Some(Given { value: 0.03, standard_uncertainty: 0.03 });
    rig.details.settings.head_wind_mps = 0.3;
    rig.cords.count = count;
    rig.plan.draw_m = draw_m;
    if let Some(mass_kg) = dummy_kg {
        rig.payload.mass_kg.value = mass_kg;
        rig.payload.drag_area_m2 = Given { value: DUMMY_DRAG_AREA_M2, standard_uncertainty: 0.001 };
    }
    rig
}

struct Seen {
    trial: FitTrial,
    reading: Reading,
    true_speed_mps: f64,
}

fn seen(truth: &Truth, seed: u64, number: u64, what: (u32, Option<f64>, f64)) -> Option<Seen> {
    let rig = rig_file(what);
    let options = Options { seed: 1000 * seed + number, ..Options::default() };
    let performance = prepare_changed(&options, |scenario| truth.change(scenario, seed, number, what)).ok()?;
    let virtual_trial = measured(performance, &rig);
    let reading = read(&virtual_trial.signals, &rig);
    let true_speed_mps = virtual_trial.truth.launch.as_ref()?.speed_ground_mps;
    let trial = FitTrial::of(&format!("{seed}-{number}"), "", &virtual_trial.signals, &reading, &rig);
    let trial = trial.inspect_err(|why| eprintln!("rig {seed}, trial {number}: {why}")).ok()?;
    Some(Seen { trial, reading, true_speed_mps })
}

/// Error and half-width of one way to forecast, relative to the true speed.
#[derive(Clone, Copy)]
struct Row {
    error: f64,
    half_width: f64,
}

fn forecast_of(rig: &Rig, known: Known, truth_mps: f64) -> Option<Row> {
    let made = forecast(rig, ForecastOptions { known, draws: 500, seed: 1, threads: 2 });
    let made = made.inspect_err(|why| eprintln!("no forecast: {why}")).ok()?;
    let (low, high) = made.quantities[LAUNCH_SPEED].monte_carlo.interval_95();
    Some(Row { error: f64::midpoint(low, high) / truth_mps - 1.0, half_width: 0.5 * (high - low) / truth_mps })
}

fn with_card(found: &LossFit, mut rig: Rig) -> Option<Rig> {
    let heading = CardHeading { date: jiff::civil::date(2031, 5, 4), program: "transfer".to_owned() };
    let (card, findings) = LossCard::read("card", &card_text(found, &heading));
    findings.iter().for_each(|finding| eprintln!("{finding}"));
    card?.put_into(&mut rig);
    Some(rig)
}

fn without_losses(mut rig: Rig) -> Rig {
    rig.losses.friction_n = Given::exactly(0.0);
    rig.losses.shuttle_drag_area_m2 = Given::exactly(0.0);
    rig.payload.drag_area_m2 = Given::exactly(0.0);
    rig
}

/// The ways to forecast, in the order of the table.
const WAYS: [&str; 5] =
    ["fitted, drawn", "fitted, planned", "rig file, drawn", "no losses, drawn", "constant loss, drawn"];

/// One rig: every way's row, and chi-square per degree of freedom of the fit.
fn one_rig(seed: u64, terms: &[Term]) -> Option<([Row; WAYS.len()], f64)> {
    let truth = Truth::of(seed);
    let lighter: Vec<Seen> =
        (1..).zip(LIGHTER).map(|(number, what)| seen(&truth, seed, number, what)).collect::<Option<_>>()?;
    let heavy = (7, None, 3.9);
    let next = seen(&truth, seed, 9, heavy)?;
    let trials: Vec<FitTrial> = lighter.iter().map(|seen| seen.trial.clone()).collect();
    let found = fit(&trials, &FitOptions { threads: 2, ..FitOptions::of(terms.to_vec()) });
    let found = found.inspect_err(|why| eprintln!("rig {seed}: {why}")).ok()?;
    let constant = fit(&trials, &FitOptions { threads: 2, ..FitOptions::of(vec![Term::Friction]) }).ok()?;
    let rig = rig_file(heavy);
    let x_m = rig.rail.zero_mark_x_m - next.reading.result("draw")?.value;
    let drawn = Known::HoldTension { tension_n: next.reading.result("hold_tension")?.value, x_m };
    let truth_mps = next.true_speed_mps;
    let rows = [
        forecast_of(&with_card(&found, rig.clone())?, drawn, truth_mps)?,
        forecast_of(&with_card(&found, rig.clone())?, Known::Plan, truth_mps)?,
        forecast_of(&rig, drawn, truth_mps)?,
        forecast_of(&without_losses(rig.clone()), drawn, truth_mps)?,
        forecast_of(&with_card(&constant, rig.clone())?, drawn, truth_mps)?,
    ];
    eprintln!(
        "rig {seed}: {}; widened {:.0}, unexplained {:.2} %; friction was {:.1} N; fitted drawn {:+.2} ± {:.2} %, constant {:+.2} %",
        found
            .terms
            .iter()
            .map(|one| format!("{} {:.3} ± {:.3}", one.term.name(), one.fitted.value, one.fitted.standard_uncertainty))
            .collect::<Vec<_>>()
            .join(", "),
        found.inflation,
        100.0 * found.unexplained,
        truth.friction_n,
        100.0 * rows[0].error,
        100.0 * rows[0].half_width,
        100.0 * rows[4].error,
    );
    Some((rows, found.chi_square_per_degree()))
}

fn print_table(n_rigs: u64, first: u64, terms: &[Term]) {
    let made: Vec<_> = (first..first + n_rigs).filter_map(|seed| one_rig(seed, terms)).collect();
    let n = made.len();
    println!(
        "\nRigs {first} to {}, {n} of {n_rigs} forecast; 7 cords from trials with 3 and 5; launch speed.\n",
        first + n_rigs - 1
    );
    println!("| forecast | median error | 95 % error | mean error | mean half-width | inside |");
    println!("| --- | --- | --- | --- | --- | --- |");
    if n == 0 {
        return;
    }
    for (way, name) in WAYS.iter().enumerate() {
        let rows: Vec<Row> = made.iter().map(|(rows, _)| rows[way]).collect();
        let mut sizes: Vec<f64> = rows.iter().map(|row| row.error.abs()).collect();
        sizes.sort_by(f64::total_cmp);
        let quantile = |share: f64| 100.0 * sizes[((share * n as f64).ceil() as usize).clamp(1, n) - 1];
        let mean = |of: &dyn Fn(&Row) -> f64| 100.0 * rows.iter().map(of).sum::<f64>() / n as f64;
        let inside = rows.iter().filter(|row| row.error.abs() <= row.half_width).count();
        println!(
            "| {name} | {:.2} % | {:.2} % | {:+.2} % | {:.2} % | {inside} of {n} |",
            quantile(0.5),
            quantile(0.95),
            mean(&|row| row.error),
            mean(&|row| row.half_width),
        );
    }
    let mut chi: Vec<f64> = made.iter().map(|(_, chi)| *chi).collect();
    chi.sort_by(f64::total_cmp);
    println!(
        "\nChi-square per degree of freedom of the fits: {:.1} to {:.1}, median {:.1}.",
        chi[0],
        chi[n - 1],
        chi[n / 2]
    );
}

fn main() -> ExitCode {
    let words: Vec<String> = std::env::args().skip(1).collect();
    let number = |idx: usize, otherwise: u64| words.get(idx).map_or(Ok(otherwise), |word| word.parse::<u64>());
    let terms: Option<Vec<Term>> =
        words.get(2).map_or_else(|| Some(USUAL.to_vec()), |names| names.split(',').map(Term::named).collect());
    let (Ok(n_rigs), Ok(first), Some(terms)) = (number(0, 2), number(1, 1), terms) else {
        eprintln!("transfer [RIGS] [FIRST RIG] [LOSS,…]");
        return ExitCode::from(2);
    };
    print_table(n_rigs, first, &terms);
    if words.get(3).is_none_or(|word| word != "once") {
        print_table(n_rigs, first + n_rigs, &terms);
    }
    ExitCode::SUCCESS
}
