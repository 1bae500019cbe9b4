//! Facts of the trade and handling of odd plans.

use super::super::{Curve, EventKind, ForceTable, LaunchSetup, ModelError, launch_answers, simulate};
use super::{assert_close, linear_cord};
use crate::rig;
use crate::units::STANDARD_GRAVITY_MPS2;

fn cords(count: f64) -> LaunchSetup {
    let mut setup = LaunchSetup::bare(2.0, 6.0);
    setup.payload_mass_kg = 6.0;
    let mut set = linear_cord(30.0, 3.5);
    set.count = count;
    setup.cords.push(set);
    setup
}

#[test]
fn three_cords_against_seven_give_three_sevenths_of_the_acceleration_and_its_root_of_the_speed() {
    // Common practice, no published source: cord mass, incline and drag off.
    let (three, seven) = (launch_answers(&cords(3.0)).unwrap(), launch_answers(&cords(7.0)).unwrap());
    assert_close("acceleration", three.peak_kinematic_mps2 / seven.peak_kinematic_mps2, 3.0 / 7.0, 1e-9, 0.0);
    let speed = |answers: super::super::Answers| answers.separation.unwrap().launch_speed_mps;
    assert_close("speed", speed(three) / speed(seven), (3.0_f64 / 7.0).sqrt(), 1e-9, 0.0);
}

#[test]
fn a_constant_loss_of_one_and_a_half_g_takes_three_metres_a_second_of_twenty_three() {
    // Common practice, no published source: over 4.5 m, 9.6 g and 23.4 m/s without loss become 8.1 g and 20.4 m/s.
    const STROKE_M: f64 = 4.5;
    let mean_g = 23.4 * 23.4 / (2.0 * STROKE_M * STANDARD_GRAVITY_MPS2);
    let (first_g, last_g) = (9.6, 2.0 * mean_g - 9.6);
    let mass_kg = 8.0;
    let force_n = |g: f64| mass_kg * g * STANDARD_GRAVITY_MPS2;
    let mut setup = LaunchSetup::bare(mass_kg, 6.0);
    let table = Curve::through(&[(0.0, force_n(first_g)), (STROKE_M, force_n(last_g))]).unwrap();
    setup.tables.push(ForceTable { force_n: table });
    let end = |setup: &LaunchSetup| {
        let run = simulate(setup).unwrap();
        (
            run.answers.peak_kinematic_mps2 / STANDARD_GRAVITY_MPS2,
            run.samples.iter().map(|s| s.v_mps).fold(0.0, f64::max),
        )
    };
    let (peak_g, speed_mps) = end(&setup);
    assert_close("loss-free peak", peak_g, 9.6, 1e-9, 0.0);
    assert_close("loss-free speed", speed_mps, 23.4, 1e-6, 0.0);
    setup.losses.friction_n = force_n(1.5);
    let (peak_g, speed_mps) = end(&setup);
    assert_close("peak", peak_g, 8.1, 5e-3, 0.0);
    assert_close("speed", speed_mps, 20.4, 5e-3, 0.0);
}

#[test]
fn a_rail_that_ends_before_the_cords_are_slack_is_told_as_an_end_stop() {
    let mut setup = cords(5.0);
    setup.rail_end_x_m = 2.0;
    let run = simulate(&setup).unwrap();
    assert_eq!(run.events.last().map(|event| event.kind), Some(EventKind::EndStop));
    assert!(run.answers.separation.is_none());
    assert!(run.energy_at_end.still_stored_j > 100.0);
}

#[test]
fn a_stroke_longer_than_the_extension_coasts_on() {
    let mut setup = cords(5.0);
    setup.rail_end_x_m = 30.0;
    setup.losses.friction_n = 40.0;
    let run = simulate(&setup).unwrap();
    let kinds: Vec<EventKind> = run.events.iter().map(|event| event.kind).collect();
    assert_eq!(kinds, [EventKind::Release, EventKind::Separation, EventKind::CordsSlack { set: 0 }, EventKind::Rest]);
}

#[test]
fn draws_beyond_the_curve_are_refused_or_flagged_in_every_result() {
    let long = rig::testing::NORTH_PIER.replace("free_length = \"2.7 m\"", "free_length = \"2.5 m\"");
    assert!(rig::check(&long).rig.is_none(), "the reader refuses it");
    let asked = long.replace("[cords]\n", "[cords]\nextrapolate = true\n");
    let rig = rig::parse(&asked).unwrap();
    let setup = LaunchSetup::planned(&rig).unwrap();
    assert!(setup.extrapolations()[0].starts_with("EXTRAPOLATED: cord set 0 is drawn to 160.0 %"));
    assert!(simulate(&setup).is_ok());
    let mut silent = rig.clone();
    silent.details.cords.extrapolate = false;
    assert!(matches!(LaunchSetup::planned(&silent), Err(ModelError::BeyondCard { set: 0, .. })));
}
