//! The launch in limits that have closed forms. Source: `tests/reference/launch/*.csv` (textbook mechanics, each closed
//! form confirmed with SciPy's DOP853 at rtol 1e-12, as their headers say).

use crate::support::{assert_near, bare, let_go, linear_cord, number, reference_rows};
use virtual_rig::launcher::Launcher;
use virtual_rig::physics::gas::GasDrive;
use virtual_rig::physics::launch::STEP_S;
use virtual_rig::physics::trajectory::Trajectory;

const STANDARD_GRAVITY_MPS2: f64 = 9.80665;

/// Compares x and v at each time of a file `t_s, x_m, v_m_s, …`.
#[track_caller]
fn check_over_time(file: &str, launcher: &Launcher) {
    let trajectory = Trajectory { rows: let_go(launcher, STEP_S).rows };
    for row in reference_rows(file) {
        let (t_s, x_m, v_mps) = (number(&row, 0), number(&row, 1), number(&row, 2));
        let found = trajectory.at(t_s);
        assert_near(&format!("{file}: x at {t_s} s"), found.x_m, x_m, 1e-7);
        assert_near(&format!("{file}: v at {t_s} s"), found.v_mps, v_mps, 1e-6);
    }
}

/// A spring of 250 N/m stretched 2.5 m on 4 kg.
fn on_a_spring() -> Launcher {
    let mut launcher = bare(4.0);
    launcher.cords = vec![linear_cord(1.0, 250.0, 0.0, 0)];
    launcher.anchor_x_m = 3.5;
    launcher.zero_mark_x_m = 2.5;
    launcher
}

/// A constant force is gravity straight down a rail.
fn falling(mass_kg: f64, force_n: f64) -> Launcher {
    let mut launcher = bare(mass_kg);
    launcher.gravity_mps2 = force_n / mass_kg;
    launcher.incline_rad = -std::f64::consts::FRAC_PI_2;
    launcher
}

#[test]
fn a_constant_force_gives_the_square_root_of_the_way() {
    check_over_time("launch/constant_force.csv", &falling(5.0, 400.0));
}

#[test]
fn drag_on_a_constant_force_follows_the_hyperbolic_tangent() {
    let mut launcher = falling(5.0, 300.0);
    launcher.shuttle.drag_area_m2 = 2.0 * 0.6 / launcher.air_density_kg_per_m3;
    check_over_time("launch/constant_force_quadratic_drag.csv", &launcher);
}

#[test]
fn a_spring_gives_a_quarter_sine() {
    check_over_time("launch/linear_spring.csv", &on_a_spring());
}

#[test]
fn friction_and_incline_shorten_the_springs_stretch() {
    let mut launcher = on_a_spring();
    launcher.gravity_mps2 = STANDARD_GRAVITY_MPS2;
    launcher.incline_rad = 10.0_f64.to_radians();
    let normal_n = 4.0 * STANDARD_GRAVITY_MPS2 * launcher.incline_rad.cos();
    launcher.shuttle.friction_running_n = 0.12 * normal_n;
    launcher.shuttle.friction_static_n = 0.12 * normal_n;
    check_over_time("launch/spring_coulomb_incline.csv", &launcher);
}

#[test]
fn viscous_drag_damps_the_spring() {
    let mut launcher = on_a_spring();
    launcher.brake.x_m = -1.0;
    launcher.brake.damper_n_s_per_m = 8.0;
    check_over_time("launch/spring_viscous.csv", &launcher);
}

#[test]
fn quadratic_drag_on_a_spring_follows_its_energy() {
    let mut launcher = on_a_spring();
    launcher.shuttle.drag_area_m2 = 2.0 * 0.35 / launcher.air_density_kg_per_m3;
    let trajectory = Trajectory { rows: let_go(&launcher, STEP_S).rows };
    for row in reference_rows("launch/spring_quadratic_drag.csv") {
        let (x_m, v_mps, t_s) = (number(&row, 0), number(&row, 1), number(&row, 2));
        let found = trajectory.at(t_s);
        // The file's times are good to about 1e-9 s, its speeds to 2.2e-11 m/s; at 17 m/s that is 2e-8 m.
        assert_near(&format!("x at {t_s} s"), found.x_m, x_m, 1e-7);
        assert_near(&format!("v at {t_s} s"), found.v_mps, v_mps, 1e-6);
    }
}

/// Most of the gas stands in the cylinder, a small bottle follows through a wide valve: nearly one closed vessel, the
/// limit of the file. What is left of the pressure difference is worth less than 1e-4 of the speed.
#[test]
fn gas_from_a_closed_vessel_follows_its_polytrope() {
    for exponent in [1.0, 1.2] {
        let mut launcher = bare(6.0);
        launcher.gas = Some(GasDrive {
            reservoir_m3: 0.0002,
            charge_pa: 600_000.0,
            ambient_pa: 101_325.0,
            temperature_k: 293.15,
            polytropic_exponent: exponent,
            piston_area_m2: 0.0025,
            dead_volume_m3: 0.0038,
            stroke_m: 3.0,
            venting_m: 0.1,
            valve_area_m2: 1.0e-3,
            valve_opening_s: 0.01,
            leak_per_s: 0.0,
            back_pressure_pa_s2_per_m2: 0.0,
        });
        let rows = let_go(&launcher, STEP_S).rows;
        let cases: Vec<_> = reference_rows("launch/gas_expansion.csv")
            .into_iter()
            .filter(|row| (number(row, 1) - exponent).abs() < 1e-9)
            .collect();
        assert_eq!(cases.len(), 5, "the file has five strokes for exponent {exponent}");
        for case in cases {
            let (x_m, v_mps) = (number(&case, 2), number(&case, 6));
            let after = rows.partition_point(|row| row.x_m < x_m);
            let share = (x_m - rows[after - 1].x_m) / (rows[after].x_m - rows[after - 1].x_m);
            let found_mps = rows[after - 1].v_mps + share * (rows[after].v_mps - rows[after - 1].v_mps);
            assert_near(&format!("n = {exponent}, v at {x_m} m"), found_mps / v_mps, 1.0, 1e-4);
        }
    }
}

/// Critical pressure ratio 0.5283 and flow factor 0.0404 √K·s/m of air (Shapiro 1953, ch. 4; ISO 6358 uses the same).
#[test]
fn air_chokes_at_the_critical_ratio() {
    let drive = GasDrive {
        reservoir_m3: 1.0,
        charge_pa: 500_000.0,
        ambient_pa: 100_000.0,
        temperature_k: 293.15,
        polytropic_exponent: 1.0,
        piston_area_m2: 0.001,
        dead_volume_m3: 1.0,
        stroke_m: 1.0,
        venting_m: 0.1,
        valve_area_m2: 1e-4,
        valve_opening_s: 0.01,
        leak_per_s: 0.0,
        back_pressure_pa_s2_per_m2: 0.0,
    };
    let flow = |ratio: f64| {
        let mut state = drive.filled();
        state.cylinder_kg *= ratio;
        drive.flow_kg_per_s(&state, 0.0, 1.0)
    };
    let choked = 0.0404 * 500_000.0 * 1e-4 / 293.15_f64.sqrt();
    assert_near("choked flow against the handbook's", flow(0.3) / choked, 1.0, 2e-3);
    assert_near("flow below the critical ratio", flow(0.2), flow(0.528), 1e-12);
    assert!(flow(0.56) < flow(0.528) * 0.999, "above the critical ratio the flow falls");
    assert_near("no flow without a difference", flow(1.0), 0.0, 1e-12);
}
