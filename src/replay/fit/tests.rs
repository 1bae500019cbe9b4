//! Fits of data that the model itself made, and of what goes wrong with trials.

#![allow(clippy::unwrap_used, reason = "a test that cannot go on stops here")]

use super::joint::Joint;
use super::*;
use crate::estimation::Random;
use crate::model::{LaunchSetup, passings};
use crate::rig::{Given, LossCard, Rig};

fn north_pier() -> Rig {
    let mut rig = crate::rig::testing::north_pier();
    rig.losses.friction_n = Given { value: 12.0, standard_uncertainty: 6.0 };
    rig
}

/// Losses that the rig file knows nothing of.
fn true_losses(rig: &mut Rig) {
    rig.losses.friction_n.value = 17.0;
    rig.details.losses.viscous_n_per_mps = Some(Given::exactly(0.4));
    rig.details.losses.cord_lag = Some(Given::exactly(0.02));
}

/// Cords, payload mass, draw.
const CONFIGURATIONS: [(u32, f64, f64); 5] =
    [(3, 4.0, 4.0), (3, 6.2, 3.4), (5, 6.2, 4.0), (6, 6.2, 4.0), (6, 3.0, 3.0)];
const U_MPS: f64 = 0.01;

/// Trials that the model made with losses of their own: noise on every speed, a hold that is a little off.
fn made(seed: u64, losses: fn(&mut Rig)) -> Vec<FitTrial> {
    let mut random = Random::new(seed, 0);
    let trial = |(number, (count, mass_kg, draw_m)): (usize, (u32, f64, f64))| {
        let mut rig = north_pier();
        (rig.cords.count, rig.payload.mass_kg.value, rig.plan.draw_m) = (count, mass_kg, draw_m);
        let mut real = rig.clone();
        losses(&mut real);
        let mut setup = LaunchSetup::planned(&real).unwrap();
        let nuisance = Nuisance::PullOverMass { u: 0.002 };
        nuisance.put(&mut setup, random.normal());
        let way_m = rig.rail.zero_mark_x_m - setup.start_x_m;
        let places_m: Vec<f64> = (1..=20).map(|k| setup.start_x_m + way_m * f64::from(k) / 21.5).collect();
        let seen = passings(&setup, &places_m).unwrap();
        let speeds: Vec<f64> = seen.iter().map(|one| one.unwrap().v_mps + U_MPS * random.normal()).collect();
        let trial = FitTrial::from_speeds(&format!("made-{number}"), &rig, &places_m, &speeds, U_MPS).unwrap();
        FitTrial { nuisances: vec![nuisance], ..trial }
    };
    CONFIGURATIONS.into_iter().enumerate().map(trial).collect()
}

const TERMS: [Term; 3] = [Term::Friction, Term::Viscous, Term::CordLag];
const TRUTH: [f64; 3] = [17.0, 0.4, 0.02];

/// Speeds squared along x and their derivative by friction and drag, from the equations of motion and their variation:
/// m w' = 2 (F − f − k w), m s' = 2 (−1 − k s) and m s' = 2 (−ρ w / 2 − k s), by Runge and Kutta's method.
#[test]
fn derivatives_are_those_of_the_equations_varied() {
    let mut rig = north_pier();
    rig.cords.mass_kg = 0.0; // without a wave the speed has a closed equation in x
    rig.rail.incline_rad = 0.0;
    let trial = {
        let setup = LaunchSetup::planned(&rig).unwrap();
        let places_m: Vec<f64> = (1..=14).map(|k| 0.25 * f64::from(k)).collect();
        let speeds: Vec<f64> = passings(&setup, &places_m).unwrap().iter().map(|one| one.unwrap().v_mps).collect();
        FitTrial::from_speeds("one", &rig, &places_m, &speeds, 0.01).unwrap()
    };
    let terms = [Term::Friction, Term::ShuttleDragArea];
    let joint = Joint::of(&[&trial], &terms, 1).unwrap();
    let parameters = [12.0, 0.02];
    let found = joint.slopes(0, &parameters);
    let setup = joint.setup(0, &parameters);
    let mass_kg = setup.shuttle_mass_kg + setup.payload_mass_kg;
    let half_density = 0.5 * setup.air_density_kg_per_m3;
    let drag = half_density * (setup.payload_drag_area_m2 + setup.shuttle_drag_area_m2);
    let rates = |x_m: f64, [w, by_friction, by_drag]: [f64; 3]| {
        let set = &setup.cords[0];
        let pull_n = set.pull_n(set.released(set.elongation(setup.start_x_m)), set.elongation(x_m));
        [
            2.0 * (pull_n - 12.0 - drag * w) / mass_kg,
            2.0 * (-1.0 - drag * by_friction) / mass_kg,
            2.0 * (-half_density * w - drag * by_drag) / mass_kg,
        ]
    };
    let (mut x_m, mut y, step_m) = (setup.start_x_m, [0.0; 3], 1e-4);
    for (i, place_m) in trial.places_m.iter().enumerate() {
        while x_m < place_m - 0.5 * step_m {
            let moved = |k: [f64; 3], part: f64| std::array::from_fn(|j| y[j] + part * step_m * k[j]);
            let k1 = rates(x_m, y);
            let k2 = rates(x_m + 0.5 * step_m, moved(k1, 0.5));
            let k3 = rates(x_m + 0.5 * step_m, moved(k2, 0.5));
            let k4 = rates(x_m + step_m, moved(k3, 1.0));
            for j in 0..3 {
                y[j] += step_m / 6.0 * (k1[j] + 2.0 * k2[j] + 2.0 * k3[j] + k4[j]);
            }
            x_m += step_m;
        }
        let v_mps = y[0].sqrt();
        assert!((v_mps - trial.v_mps[i]).abs() < 1e-6, "{v_mps} at {place_m}");
        for (term, wanted) in [(0, 0.5 * y[1] / v_mps), (1, 0.5 * y[2] / v_mps)] {
            let slope = found[term].1[i];
            assert!((slope / wanted - 1.0).abs() < 2e-6, "{:?} at {place_m}: {slope}, {wanted}", terms[term]);
        }
    }
}

/// Intervals over seeds 1 to N and the fresh ones after them; `cargo run --example fit-coverage` runs 200 of each.
#[test]
fn losses_that_the_model_was_given_are_inside_their_intervals() {
    const N: u64 = 6;
    let mut inside = [0; 3];
    let mut n_misfits = 0;
    for seed in 1..=2 * N {
        let options = FitOptions { examine: false, ..FitOptions::of(TERMS.to_vec()) };
        let found = fit(&made(seed, true_losses), &options).unwrap();
        n_misfits += u32::from(found.misfits());
        for (k, one) in found.terms.iter().enumerate() {
            let Given { value, standard_uncertainty } = one.fitted;
            inside[k] += u32::from((value - TRUTH[k]).abs() <= 1.96 * standard_uncertainty);
            assert!((value - TRUTH[k]).abs() <= 4.5 * standard_uncertainty, "seed {seed}: {one:?}");
            assert!(standard_uncertainty < 0.5 * TRUTH[k], "a width that says something: {one:?}");
        }
    }
    // 12 draws of 95 %: fewer than 9 come twice in a thousand (binomial).
    assert!(inside.iter().all(|n| *n >= 9), "{inside:?} of {}", 2 * N);
    assert!(n_misfits <= 1, "{n_misfits} fits of data that the model made were called misfits");
}

#[test]
fn a_trial_with_a_wrong_mass_does_not_belong_to_the_others() {
    let mut trials = made(3, true_losses);
    trials[2].rig.payload.mass_kg.value -= 0.9;
    let found = fit(&trials, &FitOptions::of(vec![Term::Friction, Term::CordLag])).unwrap();
    let outliers: Vec<&str> =
        found.trials.iter().filter(|trial| trial.outlier.is_some()).map(|trial| trial.id.as_str()).collect();
    assert_eq!(outliers, ["made-2"], "{:?}", found.left_out);
    let good = fit(&made(3, true_losses), &FitOptions::of(vec![Term::Friction, Term::CordLag])).unwrap();
    assert!(good.trials.iter().all(|trial| trial.outlier.is_none()), "{:?}", good.left_out);
}

#[test]
fn too_few_trials_for_the_losses_are_refused_with_the_trial_that_would_help() {
    let mut trials = made(1, true_losses);
    trials.truncate(1);
    let terms = vec![Term::LoadFriction, Term::PullFriction, Term::Viscous, Term::CordLag, Term::CordViscous];
    let error = fit(&trials, &FitOptions::of(terms)).unwrap_err();
    let FitError::Undetermined { n_trials: 1, advice, .. } = &error else { panic!("{error}") };
    assert!(advice.contains("make a trial with"), "{advice}");
}

#[test]
fn trials_of_different_rigs_are_not_fitted_together() {
    let mut trials = made(1, true_losses);
    trials[1].rig.name = "south-mole".to_owned();
    let error = fit(&trials, &FitOptions::of(vec![Term::Friction])).unwrap_err();
    assert!(error.to_string().contains("north-pier, south-mole"), "{error}");
    assert_eq!(fit(&[], &FitOptions::of(vec![Term::Friction])).unwrap_err(), FitError::NoTrial);
}

#[test]
fn a_loss_that_is_not_there_ends_at_zero_and_says_so() {
    let found = fit(&made(2, |rig| rig.losses.friction_n.value = 17.0), &FitOptions::of(TERMS.to_vec())).unwrap();
    let (friction, lag) = (&found.terms[0].fitted, &found.terms[2].fitted);
    assert!((friction.value - 17.0).abs() < 4.0 * friction.standard_uncertainty, "{friction:?}");
    assert!(lag.value < 3.0 * lag.standard_uncertainty && lag.value >= 0.0, "{lag:?}");
}

#[test]
fn what_the_trials_say_nothing_of_keeps_its_width() {
    let mut trials = made(4, true_losses);
    // Light trials at low speed say little of the payload's drag.
    trials.truncate(2);
    let terms = vec![Term::Friction, Term::PayloadDragArea];
    let found = fit(&trials, &FitOptions { examine: false, ..FitOptions::of(terms) }).unwrap();
    let drag = &found.terms[1];
    assert!(drag.fitted.standard_uncertainty > 0.9 * drag.prior.standard_uncertainty, "{drag:?}");
    assert!(found.combinations[0].determined && !found.combinations[1].determined, "{:?}", found.combinations);
}

#[test]
fn the_smallest_adequate_set_is_proposed() {
    let trials = made(5, |rig| {
        rig.losses.friction_n.value = 30.0;
    });
    let proposal =
        propose(&trials, &[Term::Friction, Term::Viscous, Term::CordLag], &FitOptions::of(Vec::new())).unwrap();
    assert_eq!(proposal.terms, [Term::Friction], "{:?}", proposal.steps);
}

#[test]
fn a_card_says_what_the_fit_found_and_where_it_holds() {
    let found = fit(&made(1, true_losses), &FitOptions::of(TERMS.to_vec())).unwrap();
    let heading = CardHeading { date: jiff::civil::date(2031, 5, 4), program: "test".to_owned() };
    let (card, findings) = LossCard::read("losses.toml", &card_text(&found, &heading));
    assert!(findings.is_empty(), "{findings:?}");
    let card = card.unwrap();
    for (term, fitted) in card.terms.iter().zip(&found.terms) {
        assert_eq!(term.name, fitted.term.name());
        assert!((term.fitted.value - fitted.fitted.value).abs() <= 1e-12 * fitted.fitted.value.abs());
    }
    let mut rig = north_pier();
    rig.details.losses.fit = vec!["viscous".to_owned()];
    card.put_into(&mut rig);
    assert_eq!(rig.losses.friction_n, card.terms[0].fitted);
    assert!(rig.details.losses.fit.is_empty() && rig.details.correlations.len() == 3);
    assert_eq!((card.valid.cord_count, card.rig.as_str()), ((3.0, 6.0), "north-pier"));
}
