//! The rig file's promises: a good one is understood whole, a bad one is answered with every finding at once.

use super::*;
use crate::units::STANDARD_GRAVITY_MPS2;

/// The invented rig of the rehearsals.
const NORTH_PIER: &str = include_str!("../../tools/rehearsal/north-pier.toml");

fn north_pier() -> Rig {
    parse(NORTH_PIER).unwrap_or_else(|error| panic!("{error}"))
}

/// Findings of north-pier after replacing one text, one a line.
#[track_caller]
fn findings_with(from: &str, to: &str) -> String {
    assert!(NORTH_PIER.contains(from), "{from:?} is not in the rig file");
    findings_of(&NORTH_PIER.replacen(from, to, 1))
}

fn findings_of(text: &str) -> String {
    check(text).findings.iter().map(ToString::to_string).collect::<Vec<_>>().join("\n")
}

#[test]
fn the_rehearsal_rig_is_read_whole_and_in_si() {
    let rig = north_pier();
    assert_eq!(check(NORTH_PIER).findings, []);
    assert_eq!((rig.name.as_str(), rig.payload.name.as_str()), ("north-pier", "survey-8"));
    assert_eq!((rig.rail.zero_mark_x_m, rig.rail.length_m, rig.plan.draw_m), (4.0, 7.0, 4.0));
    assert!((rig.incline_deg() - 6.0).abs() < 1e-12);
    assert_eq!((rig.limits.tension_n, rig.cords.count), (900.0, 6));
    assert!((rig.limits.peak_g - 10.0).abs() < 1e-12);
    assert_eq!((rig.devices.len(), rig.channels.len(), rig.uncalibrated.len()), (2, 4, 0));
    let accel = rig.channel_with_role(Role::ShuttleSpecificForce).expect("it has an accelerometer");
    assert!((accel.calibration.coefficients[1] - STANDARD_GRAVITY_MPS2 / 800.0).abs() < 1e-12);
    assert_eq!(rig.text, NORTH_PIER);
}

#[test]
fn a_mistyped_key_is_an_error_with_the_word_that_was_meant() {
    let findings = findings_with("incline = ", "inclin = ");
    assert_eq!(
        findings,
        "13:1: error: rail.incline: is missing\n15:1: error: rail.inclin: unknown key, did you mean \"incline\"?"
    );
}
