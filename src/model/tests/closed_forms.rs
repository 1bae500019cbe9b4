//! Textbook launches: tests/reference/launch/*.csv, end values and course to 1e-9 relative (their stated tolerance).

use super::super::{Curve, EventKind, ForceTable, LaunchSetup, RailLosses, simulate};
use super::{assert_close, linear_cord, reference};

const TOLERANCE: f64 = 1e-9;

fn constant_force(force_n: f64, mass_kg: f64, stroke_m: f64) -> LaunchSetup {
    let mut setup = LaunchSetup::bare(mass_kg, stroke_m);
    setup.tables.push(ForceTable { force_n: Curve::through(&[(0.0, force_n), (stroke_m, force_n)]).unwrap() });
    setup
}

fn spring() -> LaunchSetup {
    let mut setup = LaunchSetup::bare(4.0, 2.5);
    setup.cords.push(linear_cord(250.0, 2.5));
    setup
}

/// Quadratic drag c v²: half density times area.
fn with_drag(mut setup: LaunchSetup, c: f64) -> LaunchSetup {
    setup.air_density_kg_per_m3 = 2.0;
    setup.shuttle_drag_area_m2 = c;
    setup
}

/// Course at each row's time: columns t, x, v, a.
#[track_caller]
fn check_course(file: &str, setup: &LaunchSetup) {
    let run = simulate(setup).unwrap();
    let rows = reference(&format!("launch/{file}"));
    let last = rows.last().unwrap();
    for row in &rows {
        let [t_s, x_m, v_mps, a_mps2] = row[..] else { panic!("{file}: {row:?}") };
        // A row whose t exceeds the event by rounding is the event.
        let sample = run.at_time(t_s).unwrap();
        let at = format!("{file} at {t_s} s");
        assert_close(&format!("{at}, x"), sample.x_m, x_m, TOLERANCE, TOLERANCE * last[1]);
        assert_close(&format!("{at}, v"), sample.v_mps, v_mps, TOLERANCE, TOLERANCE * last[2]);
        assert_close(&format!("{at}, a"), sample.a_mps2, a_mps2, TOLERANCE, TOLERANCE * rows[0][3]);
    }
}

#[test]
fn constant_force_gives_the_root_of_two_f_x_over_m() {
    check_course("constant_force.csv", &constant_force(400.0, 5.0, 3.0));
}

#[test]
fn constant_force_against_drag_approaches_its_terminal_speed() {
    check_course("constant_force_quadratic_drag.csv", &with_drag(constant_force(300.0, 5.0, 4.0), 0.6));
}

#[test]
fn a_linear_spring_runs_a_quarter_sine() {
    check_course("linear_spring.csv", &spring());
}

#[test]
fn a_viscous_loss_makes_a_damped_oscillator() {
    let mut setup = spring();
    setup.losses.viscous_n_per_mps = 8.0;
    check_course("spring_viscous.csv", &setup);
}

#[test]
fn coulomb_friction_and_incline_shift_the_springs_middle() {
    let mut setup = spring();
    setup.incline_rad = 10_f64.to_radians();
    setup.losses = RailLosses { load_coefficient: 0.12, ..RailLosses::default() };
    check_course("spring_coulomb_incline.csv", &setup);
}

#[test]
fn spring_and_drag_follow_their_closed_form_over_x() {
    let run = simulate(&with_drag(spring(), 0.35)).unwrap();
    for row in reference("launch/spring_quadratic_drag.csv") {
        // t is good to 1e-9 s only (file header), so x is compared at it to v · 1e-9.
        let sample = run.at_time(row[2]).unwrap();
        assert_close("x", sample.x_m, row[0], TOLERANCE, 2e-8);
        assert_close("v", sample.v_mps, row[1], TOLERANCE, 1.6e-7);
    }
    let slack = run.event(EventKind::CordsSlack { set: 0 }).unwrap();
    assert_close("v at slack", slack.v_mps, 17.12859445487613, TOLERANCE, 0.0);
}
