//! From a rig file's numbers: the invented north-pier rig.

use super::super::{
    EventKind, ForecastOptions, Known, LaunchSetup, ModelError, answers_to_rest, forecast, hold_pull_band_n,
    launch_answers, planned_line_tension_n, released_now, simulate, stored_energy_j,
};
use super::assert_close;
use crate::rig::testing::north_pier;

#[test]
fn the_nominal_launch_meets_its_window_and_rests_in_the_run_out() {
    let run = simulate(&LaunchSetup::planned(&north_pier()).unwrap()).unwrap();
    let separation = run.answers.separation.unwrap();
    assert!((15.0..18.0).contains(&separation.launch_speed_mps), "{separation:?}");
    assert!(separation.x_m < 4.0 && separation.x_m > 3.8, "{separation:?}");
    let rest = run.event(EventKind::Rest).unwrap();
    assert!(rest.x_m > 5.0 && rest.x_m < 7.0, "{rest:?}");
    assert_close("speed at rest", rest.v_mps, 0.0, 0.0, 1e-12);
}

#[test]
fn release_acceleration_is_pull_over_carried_mass_without_the_cords() {
    // F/m at the first instant: the far parts of the cords do not know of the release yet.
    let setup = LaunchSetup::planned(&north_pier()).unwrap();
    let run = simulate(&setup).unwrap();
    let expected = (setup.cord_pull_n(0.0) - 12.0) / 8.6 - setup.gravity_along_mps2();
    assert_close("release acceleration", run.samples[0].a_mps2, expected, 1e-12, 0.0);
}

#[test]
fn energy_closes_and_every_share_has_a_name() {
    let run = simulate(&LaunchSetup::planned(&north_pier()).unwrap()).unwrap();
    for energy in [run.energy_at_separation, run.energy_at_end] {
        assert_close("closure", energy.closure_j, 0.0, 0.0, 1e-8 * energy.stored_j);
    }
    assert!(run.energy_at_end.cords_left_j > 0.0);
}

#[test]
fn the_quick_way_agrees_with_the_whole_launch() {
    let setup = LaunchSetup::planned(&north_pier()).unwrap();
    let (whole, quick) = (simulate(&setup).unwrap().answers, launch_answers(&setup).unwrap());
    let speed = |answers: super::super::Answers| answers.separation.unwrap().launch_speed_mps;
    assert_close("speed", speed(quick), speed(whole), 1e-9, 0.0);
    assert_close("peak", quick.peak_specific_mps2, whole.peak_specific_mps2, 1e-9, 0.0);
}

#[test]
fn a_measured_tension_scales_the_launch() {
    let rig = north_pier();
    let planned = LaunchSetup::planned(&rig).unwrap();
    let line_n = planned.cord_pull_n(0.0) - planned.hold_weight_n();
    let same = LaunchSetup::drawn(&rig, line_n, 0.0).unwrap();
    assert_close("pull", same.cord_pull_n(0.0), planned.cord_pull_n(0.0), 1e-12, 0.0);
    let weaker = LaunchSetup::drawn(&rig, 0.9 * line_n, 0.0).unwrap();
    let speed = |setup: &LaunchSetup| launch_answers(setup).unwrap().separation.unwrap().launch_speed_mps;
    assert!(speed(&weaker) < 0.97 * speed(&same));
}

#[test]
fn a_release_now_is_told_with_an_interval() {
    let rig = north_pier();
    let tension_n = planned_line_tension_n(&rig, 4.0).unwrap() - hold_pull_band_n(&rig);
    let now = released_now(&rig, tension_n, 0.0).unwrap();
    let speed = now.launch_speed_mps;
    let planned = simulate(&LaunchSetup::planned(&rig).unwrap()).unwrap().answers;
    assert_close("speed", speed.value, planned.separation.unwrap().launch_speed_mps, 1e-5, 0.0);
    assert!(speed.low < speed.value && speed.value < speed.high);
    assert!((0.05..1.0).contains(&speed.standard_uncertainty), "{speed:?}");
    assert!((7.0..9.0).contains(&now.peak_g.value) && now.peak_g.standard_uncertainty > 0.01, "{:?}", now.peak_g);
}

#[test]
fn slack_cords_hold_nothing_and_taut_ones_what_their_curve_says() {
    let rig = north_pier();
    assert_close("slack", stored_energy_j(&rig, 100.0, 4.2).unwrap(), 0.0, 0.0, 0.0);
    let setup = LaunchSetup::planned(&rig).unwrap();
    let line_n = setup.cord_pull_n(0.0) - setup.hold_weight_n();
    let stored_j = stored_energy_j(&rig, line_n, 0.0).unwrap();
    assert_close("stored", stored_j, simulate(&setup).unwrap().energy_at_end.stored_j, 1e-12, 0.0);
}

#[test]
fn impossible_rigs_are_refused_with_their_number() {
    let mut rig = north_pier();
    rig.payload.mass_kg.value = -1.0;
    let error = simulate(&LaunchSetup::planned(&rig).unwrap()).unwrap_err();
    assert!(error.to_string().contains("payload mass is -1 kg"), "{error}");
    let mut rig = north_pier();
    rig.cords.curve.clear();
    assert!(matches!(LaunchSetup::planned(&rig), Err(ModelError::CordCurve { .. })));
    let mut rig = north_pier();
    rig.plan.draw_m = 5.5;
    assert!(matches!(LaunchSetup::planned(&rig), Err(ModelError::BeyondCard { .. })));
    let mut rig = north_pier();
    rig.plan.draw_m = 0.01;
    let barely = LaunchSetup::planned(&rig).unwrap();
    assert!(matches!(simulate(&barely), Err(ModelError::CannotMove { .. })));
}

#[test]
fn cords_as_warm_as_rubber_theory_says_pull_and_throw_by_absolute_temperature() {
    // The kinetic theory of rubber: at equal elongation the tension is proportional to absolute temperature (L. R. G. Treloar,
    // The Physics of Rubber Elasticity, 3rd edition, 1975, chapter 4; from memory). Without losses, so is the stored energy,
    // and the speed on a level rail goes with its root.
    let launch = |temperature_c: f64| {
        let mut rig = north_pier();
        rig.rail.incline_rad = 0.0;
        rig.losses.friction_n.value = 0.0;
        rig.losses.shuttle_drag_area_m2.value = 0.0;
        rig.payload.drag_area_m2.value = 0.0;
        let cords = &mut rig.details.cords;
        (cords.temperature_c, cords.card_temperature_c) = (Some(temperature_c), Some(20.0));
        cords.tension_per_kelvin = 1.0 / 293.15;
        let setup = LaunchSetup::planned(&rig).unwrap();
        let speed = launch_answers(&setup).unwrap().separation.unwrap().launch_speed_mps;
        (setup.cord_pull_n(0.0), speed)
    };
    let (cold, warm) = (launch(0.0), launch(35.0));
    let expected = (35.0 + 273.15) / 273.15_f64;
    assert_close("pull", warm.0 / cold.0, expected, 1e-12, 0.0);
    assert_close("speed", warm.1 / cold.1, expected.sqrt(), 1e-6, 0.0);
}

#[test]
fn worn_cords_pull_less_by_the_cards_loss_for_every_tenfold_of_cycles() {
    let pull_n = |cycles: f64| {
        let mut rig = north_pier();
        (rig.details.cords.loss_per_tenfold_cycles, rig.details.cords.cycles) = (0.03, cycles);
        LaunchSetup::planned(&rig).unwrap().cord_pull_n(0.0)
    };
    assert_close("100 cycles", pull_n(100.0) / pull_n(1.0), 0.94, 1e-12, 0.0);
    assert!(pull_n(1000.0) < pull_n(100.0));
}

#[test]
fn a_shuttle_that_never_reaches_the_brake_did_not_hit_the_end_stop() {
    let mut rig = north_pier();
    rig.losses.friction_n.value = 150.0;
    rig.rail.length_m = 60.0;
    rig.rail.brake_x_m = 58.0;
    let setup = LaunchSetup::planned(&rig).unwrap();
    let rests = answers_to_rest(&setup).unwrap();
    assert!(rests.separation.is_some() && rests.stopping_distance_m.is_none() && !rests.at_end_stop, "{rests:?}");
    rig.losses.friction_n.value = 12.0;
    (rig.rail.length_m, rig.rail.brake_x_m, rig.rail.brake_force_n) = (6.0, 5.5, 50.0);
    let hits = answers_to_rest(&LaunchSetup::planned(&rig).unwrap()).unwrap();
    assert!(hits.at_end_stop && hits.stopping_distance_m.is_none(), "{hits:?}");
    let options = ForecastOptions { known: Known::Plan, draws: 100, seed: 1, threads: 2 };
    assert_close("all of them", forecast(&rig, options).unwrap().probabilities.end_stop, 1.0, 0.0, 0.0);
}
