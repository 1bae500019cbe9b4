//! Textbook launches through the public interface: every file of tests/reference/launch to its stated tolerance (course and
//! end values 1e-9 relative, the cord's mass 1e-10; formulas and sources in each file's first lines).

#![allow(clippy::unwrap_used, reason = "a test that cannot go on stops here")]

use tautrail::model::{
    CordSet, Curve, EventKind, ForceTable, GasPath, GasSource, LaunchRun, LaunchSetup, RailLosses, simulate,
};

const TOLERANCE: f64 = 1e-9;

/// Rows of a reference CSV after its comments and header, as numbers; words become NaN.
fn reference(name: &str) -> Vec<Vec<f64>> {
    let path = format!("{}/tests/reference/{name}", env!("CARGO_MANIFEST_DIR"));
    let text = std::fs::read_to_string(&path).unwrap_or_else(|error| panic!("{path}: {error}"));
    let rows = text.lines().filter(|line| !line.starts_with('#')).skip(1);
    rows.map(|row| row.split(',').map(|cell| cell.parse().unwrap_or(f64::NAN)).collect()).collect()
}

#[track_caller]
fn assert_close(what: &str, found: f64, expected: f64, relative: f64, absolute: f64) {
    let allowed = relative * expected.abs() + absolute;
    assert!((found - expected).abs() <= allowed, "{what}: found {found}, expected {expected}, allowed ±{allowed:e}");
}

/// One massless cord with a constant stiffness, taut by `stretch_m` at x = 0.
fn linear_cord(stiffness_n_per_m: f64, stretch_m: f64) -> CordSet {
    let tension_n = Curve::through(&[(0.0, 0.0), (1.0, stiffness_n_per_m * stretch_m)]).unwrap();
    CordSet::simple(1.0, stretch_m, stretch_m, tension_n)
}

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

#[test]
fn gas_expanding_from_a_closed_vessel_gives_the_polytropic_work() {
    for row in reference("launch/gas_expansion.csv") {
        let (exponent, place_x_m) = (row[1], row[2]);
        let mut setup = LaunchSetup::bare(6.0, place_x_m);
        setup.gas = vec![GasSource {
            charged_pressure_pa: 600_000.0,
            ambient_pressure_pa: 101_325.0,
            back_pressure_pa: 0.0,
            vessel_volume_m3: 0.004,
            dead_volume_m3: 0.0,
            temperature_k: 293.15,
            polytropic_exponent: exponent,
            piston_area_m2: 0.0025,
            travel_ratio: 1.0,
            stroke_m: 3.0,
            hold_s: 0.0,
            leak_time_s: f64::INFINITY,
            path: GasPath::Straight,
        }];
        let run = simulate(&setup).unwrap();
        let at_stop = run.event(EventKind::EndStop).unwrap();
        assert_close(&format!("v, n {exponent}, x {place_x_m}"), at_stop.v_mps, row[6], TOLERANCE, 0.0);
        assert_close("work", run.energy_at_end.gas_j, row[5], TOLERANCE, 0.0);
    }
}

/// A shuttle thrown into a cord of mass `ratio` times its own, which catches it: from taut to standstill is a quarter of
/// the period of spring, end mass and evenly strained cord. Breakaway friction, which does nothing in motion, keeps it there.
fn caught_by_a_cord(ratio: f64) -> LaunchRun {
    const STIFFNESS_N_PER_M: f64 = 250.0;
    const SHUTTLE_KG: f64 = 4.0;
    let mut setup = LaunchSetup::bare(SHUTTLE_KG, 30.0);
    setup.tables.push(ForceTable { force_n: Curve::through(&[(0.0, 400.0), (0.2, 400.0)]).unwrap() });
    setup.losses.breakaway_n = 390.0;
    setup.cords.push(CordSet {
        mass_kg: ratio * SHUTTLE_KG,
        zero_mark_x_m: -1.0,
        retension_x_m: Some(2.0),
        ..linear_cord(STIFFNESS_N_PER_M, 2.5)
    });
    simulate(&setup).unwrap()
}

#[test]
fn a_cords_mass_counts_a_third_as_lord_rayleigh_found() {
    // Columns: ratio, zeta, exact omega, Rayleigh's omega, Rayleigh's relative error.
    let rows = reference("launch/cord_mass.csv");
    assert_eq!(rows.len(), 7);
    for row in rows {
        let run = caught_by_a_cord(row[0]);
        let taut = run.event(EventKind::CordsTaut { set: 0 }).unwrap();
        let quarter_s = run.event(EventKind::Rest).unwrap().t_s - taut.t_s;
        let omega = std::f64::consts::FRAC_PI_2 / quarter_s / (250.0_f64 / 4.0).sqrt();
        assert_close(&format!("omega at {}", row[0]), omega, row[3], 1e-10, 0.0);
        // The file prints the error of the one third with seven digits.
        assert_close(&format!("error at {}", row[0]), omega / row[2] - 1.0, row[4], 1e-6, 1e-9);
    }
}
