//! Gas, hysteresis, re-tensioning, recoil, waiting for pressure: closed forms and energy.

use super::super::{Curve, EventKind, GasPath, GasSource, LaunchSetup, Recoil, simulate};
use super::{assert_close, linear_cord};

fn vessel() -> GasSource {
    GasSource {
        charged_pressure_pa: 600_000.0,
        ambient_pressure_pa: 101_325.0,
        back_pressure_pa: 0.0,
        vessel_volume_m3: 0.004,
        dead_volume_m3: 0.0,
        temperature_k: 293.15,
        polytropic_exponent: 1.0,
        piston_area_m2: 0.0025,
        travel_ratio: 1.0,
        stroke_m: 3.0,
        hold_s: 0.0,
        leak_time_s: f64::INFINITY,
        path: GasPath::Straight,
    }
}

/// Speed with which a run passes a place.
fn speed_at_x(setup: &LaunchSetup, x_m: f64) -> f64 {
    let mut setup = setup.clone();
    setup.rail_end_x_m = x_m;
    simulate(&setup).unwrap().event(EventKind::EndStop).unwrap().v_mps
}

#[test]
fn leaking_loses_overpressure_not_the_atmosphere() {
    let leaky = GasSource { hold_s: 50.0, leak_time_s: 100.0, ..vessel() };
    let expected_pa = 101_325.0 + (600_000.0 - 101_325.0) * (-0.5_f64).exp();
    assert_close("pressure", leaky.release_pressure_pa(), expected_pa, 1e-14, 0.0);
}

#[test]
fn a_wide_valve_comes_near_the_open_vessel_and_a_narrow_one_takes_longer() {
    let mut setup = LaunchSetup::bare(6.0, 1.0);
    let through = |area_m2: f64| GasSource {
        polytropic_exponent: 1.4,
        dead_volume_m3: 1e-5,
        path: GasPath::Valve { valve_area_m2: area_m2, line_area_m2: 1.0, opening_s: 0.0 },
        ..vessel()
    };
    setup.gas = vec![GasSource { polytropic_exponent: 1.4, ..vessel() }];
    let open = speed_at_x(&setup, 1.0);
    setup.gas = vec![through(5e-3)];
    let wide = speed_at_x(&setup, 1.0);
    setup.gas = vec![through(2e-5)];
    let narrow = speed_at_x(&setup, 1.0);
    assert!((0.9..1.02).contains(&(wide / open)), "wide {wide}, open {open}");
    assert!(narrow < 0.6 * open, "narrow {narrow}, open {open}");
}

#[test]
fn a_choked_valve_fills_a_fixed_volume_at_the_constant_rate_of_the_nozzle() {
    // Choked mass flow C A p0/√T0 with C = 0.040 418 √K s/m for air (J. D. Anderson, Modern Compressible Flow, eq. 5.21,
    // and compressed-air handbooks; from memory). The shuttle stands: breakaway friction holds it.
    let mut setup = LaunchSetup::bare(6.0, 3.0);
    setup.losses.breakaway_n = 300.0;
    let source = GasSource {
        charged_pressure_pa: 2.0e6,
        vessel_volume_m3: 10.0,
        dead_volume_m3: 1e-3,
        path: GasPath::Valve { valve_area_m2: 1e-5, line_area_m2: 1e3, opening_s: 0.0 },
        ..vessel()
    };
    setup.gas = vec![source];
    let begins = *simulate(&setup).unwrap().event(EventKind::MotionBegins).unwrap();
    let flow_kg_per_s = 0.040_418 * 1e-5 * 2.0e6 / 293.15_f64.sqrt();
    let rate_pa_per_s = 287.05287 * 293.15 * flow_kg_per_s / 1e-3;
    assert_close("time to 300 N", begins.t_s, 300.0 / 0.0025 / rate_pa_per_s, 1e-3, 0.0);
    assert_close("stands", begins.x_m, 0.0, 0.0, 0.0);
}

#[test]
fn a_rail_on_a_soft_support_recoils_as_momentum_demands() {
    // Level, no support force: shuttle and rail carry equal and opposite momentum; energy of the spring shared.
    let mut setup = LaunchSetup::bare(4.0, 2.6);
    setup.cords.push(linear_cord(250.0, 2.5));
    setup.recoil = Some(Recoil { mass_kg: 120.0, stiffness_n_per_m: 0.0, damping_n_per_mps: 0.0 });
    let run = simulate(&setup).unwrap();
    let slack = run.event(EventKind::CordsSlack { set: 0 }).unwrap();
    let ground = (2.0_f64 * 781.25 / (4.0 * (1.0 + 4.0 / 120.0))).sqrt();
    assert_close("ground speed", slack.ground_v_mps, ground, 1e-9, 0.0);
    assert_close("rail speed", slack.v_mps - slack.ground_v_mps, ground * 4.0 / 120.0, 1e-8, 0.0);
}

#[test]
fn a_branch_gap_gives_back_only_what_lies_under_the_path() {
    let mut cords = linear_cord(250.0, 2.5);
    cords.loading = Some(Curve::through(&[(0.0, 0.0), (1.0, 700.0)]).unwrap());
    cords.held_gap_n = 75.0;
    cords.gap_width = 0.1;
    let mut setup = LaunchSetup::bare(4.0, 2.6);
    setup.cords.push(cords);
    let run = simulate(&setup).unwrap();
    // ∫ of 625 e + 75 exp((e − 1)/0.1) over 0..1, times 2.5 m.
    let given_j = 2.5 * (312.5 + 7.5 * (1.0 - (-10.0_f64).exp()));
    let slack = run.event(EventKind::CordsSlack { set: 0 }).unwrap();
    assert_close("speed", slack.v_mps, (2.0 * given_j / 4.0).sqrt(), 1e-9, 0.0);
}

#[test]
fn a_shuttle_carried_past_its_anchor_is_pulled_back_and_loses_the_hysteresis() {
    let mut cords = linear_cord(250.0, 2.5);
    cords.loading = Some(Curve::through(&[(0.0, 0.0), (0.5, 350.0), (1.0, 700.0)]).unwrap());
    cords.mass_kg = 0.3;
    cords.retension_x_m = Some(3.0);
    let mut setup = LaunchSetup::bare(4.0, 20.0);
    setup.losses.friction_n = 20.0;
    setup.cords.push(cords);
    let run = simulate(&setup).unwrap();
    let kinds: Vec<EventKind> = run.events.iter().map(|event| event.kind).collect();
    assert!(kinds.contains(&EventKind::CordsTaut { set: 0 }) && kinds.contains(&EventKind::Reversal), "{kinds:?}");
    assert_eq!(kinds.last(), Some(&EventKind::Rest));
    let energy = run.energy_at_end;
    assert!(energy.hysteresis_j > 1.0, "{energy:?}");
    assert_close("closure", energy.closure_j, 0.0, 0.0, 1e-8 * energy.stored_j);
}

#[test]
fn a_valve_that_never_builds_the_force_is_told_so() {
    let mut setup = LaunchSetup::bare(6.0, 3.0);
    setup.losses.breakaway_n = 2000.0;
    let path = GasPath::Valve { valve_area_m2: 1e-4, line_area_m2: 1e-3, opening_s: 0.02 };
    setup.gas = vec![GasSource { dead_volume_m3: 1e-4, path, ..vessel() }];
    let error = simulate(&setup).unwrap_err().to_string();
    assert!(error.contains("does not move the shuttle against 2000.0 N"), "{error}");
}

#[test]
fn gas_behind_a_wide_valve_takes_few_steps_and_gives_the_same_launch() {
    let mut setup = LaunchSetup::bare(6.0, 4.0);
    for area_m2 in [4e-5, 1.2e-4, 5e-4, 3e-3] {
        let path = GasPath::Valve { valve_area_m2: area_m2, line_area_m2: 1e-2, opening_s: 0.02 };
        setup.gas = vec![GasSource { dead_volume_m3: 1e-5, polytropic_exponent: 1.3, path, ..vessel() }];
        let exact = simulate(&LaunchSetup { relative_tolerance: 1e-10, ..setup.clone() }).unwrap();
        let fast = simulate(&LaunchSetup { relative_tolerance: super::super::FAST, ..setup.clone() }).unwrap();
        let end = |run: &super::super::LaunchRun| *run.event(EventKind::StrokeEnd { gas: 0 }).unwrap();
        assert_close(&format!("speed, {area_m2} m²"), end(&fast).v_mps, end(&exact).v_mps, 1e-5, 0.0);
        assert_close(&format!("time, {area_m2} m²"), end(&fast).t_s, end(&exact).t_s, 1e-5, 0.0);
        assert!(fast.cost.evaluations < 2500, "{area_m2} m²: {:?} against {:?}", fast.cost, exact.cost);
    }
}
