//! Every scenario ends as its name says, and keeps its books.

#![allow(clippy::expect_used, reason = "a test that cannot go on stops here")]

use crate::support::assert_near;
use virtual_rig::performance::{Options, Performance, prepare};
use virtual_rig::physics::course::Happening;
use virtual_rig::physics::trajectory::Row;
use virtual_rig::scenario;
use virtual_rig::table;
use virtual_rig::truth::Truth;

fn performance(scenario: &str, change: impl FnOnce(&mut Options)) -> Performance {
    let mut options = Options { scenario: scenario.into(), pace: 0.3, ..Options::default() };
    change(&mut options);
    prepare(&options).expect("a performance")
}

fn truth(scenario: &str) -> Truth {
    Truth::of(&performance(scenario, |_| {}), "virtual", 0, &[])
}

fn speed_mps(truth: &Truth) -> f64 {
    truth.launch.as_ref().expect("a launch").speed_ground_mps
}

const OUTCOMES: [(&str, &str); 23] = [
    ("nominal", "launched"),
    ("incline-head-wind", "launched"),
    ("stage-1", "launched"),
    ("stage-2", "launched"),
    ("stage-3", "launched"),
    ("let-down", "let-down"),
    ("hang-fire", "hang-fire"),
    ("hook-slip", "hook slip"),
    ("cord-failure-in-hold", "cord failure before release"),
    ("early-release", "early release"),
    ("cord-failure-in-stroke", "cord failure in the stroke"),
    ("payload-left-early", "payload left early"),
    ("payload-not-separated", "payload not separated"),
    ("arrest-overrun", "arrest overrun"),
    ("clipped-accelerometer", "launched"),
    ("gas-launcher", "launched"),
    ("soft-rail", "launched"),
    ("misrigged-count", "launched"),
    ("misrigged-length", "launched"),
    ("misrigged-mass", "launched"),
    ("ageing", "launched"),
    ("free-pull", "shuttle alone"),
    ("coast-down", "shuttle alone"),
];

#[test]
fn every_scenario_ends_as_its_name_says_and_closes_its_energy() {
    let named: Vec<&str> = scenario::all(0, 0).iter().map(|scenario| scenario.name).collect();
    assert_eq!(named, OUTCOMES.map(|(name, _)| name));
    for (name, outcome) in OUTCOMES {
        let truth = truth(name);
        assert_eq!(truth.outcome, outcome, "{name}");
        if let Some(energy) = truth.energy {
            assert!(energy.closure_error < 1e-6, "{name}: energy closes to {}", energy.closure_error);
        }
    }
}

#[test]
fn the_log_of_the_energy_split_adds_up_to_the_elastic_energy_at_release() {
    let energy = truth("nominal").energy.unwrap();
    let split = energy.at_separation.unwrap();
    let parts_j = split.shuttle_kinetic_j
        + split.payload_kinetic_j
        + split.cord_kinetic_j
        + split.cord_elastic_j
        + split.gravity_gained_j
        + split.rail_j
        + split.cord_internal_loss_j
        + split.line_j
        + split.friction_j
        + split.brake_j
        + split.shuttle_drag_j
        + split.payload_drag_j
        + split.rail_damper_j
        + split.cord_ground_j;
    assert_near("sum of the parts, J", parts_j, energy.cord_elastic_at_release_j, 1e-3);
}

#[test]
fn a_soft_rail_recoils_and_its_two_launch_speeds_differ_by_the_recoil() {
    let soft = performance("soft-rail", |_| {});
    let launch = Truth::of(&soft, "virtual", 0, &[]).launch.unwrap();
    let separation = soft.separation().unwrap();
    assert_near("difference", launch.speed_ground_mps - launch.speed_rail_mps, separation.row.rail_v_mps, 1e-9);
    let recoil_mps = soft.trajectory.rows.iter().map(|row| row.rail_v_mps.abs()).fold(0.0, f64::max);
    assert!((0.1..0.5).contains(&recoil_mps), "the rail recoils at {recoil_mps} m/s");
}

#[test]
fn static_friction_hides_the_relaxation_from_the_release_line() {
    let nominal = performance("nominal", |options| options.pace = 1.0);
    let hold = nominal.phases.iter().find(|phase| phase.name == "hold").unwrap();
    let (start, end) = (nominal.trajectory.at(hold.t_s), nominal.trajectory.at(nominal.release_s().unwrap() - 0.01));
    let cords_n = start.cords_n - end.cords_n;
    let line_n = start.line_n - end.line_n;
    assert!(cords_n > 2.0, "the cords relax by {cords_n} N");
    // Both ends of what stiction can hide: running friction one way, static friction the other.
    assert!((line_n - cords_n).abs() <= 27.0 && (line_n - cords_n).abs() > 0.01, "the line shows {line_n} N of it");
}

#[test]
fn a_slip_of_the_hook_shows_as_a_spike_that_the_line_must_take() {
    let slip = performance("hook-slip", |_| {});
    let before_n = slip.hold.line_n;
    assert!(slip.hold.line_n_max > 1.2 * before_n, "greatest line force {} N", slip.hold.line_n_max);
    let instant = slip.instants.iter().find(|instant| instant.what == Happening::HookSlips).unwrap();
    let after = slip.trajectory.at(instant.t_s + 1.0);
    assert_near("the shuttle has moved by the slip", after.x_m - slip.hold.x_m, 0.008, 0.0015);
}

#[test]
fn a_hang_fire_stands_loaded_with_a_slack_line() {
    let hang = performance("hang-fire", |_| {});
    let opened = hang.instants.iter().find(|instant| instant.what == Happening::HookOpens).unwrap();
    let during = hang.trajectory.at(opened.t_s + 1.0);
    assert!(during.line_n == 0.0 && during.anchor_n > 550.0, "{during:?}");
    let end = hang.trajectory.at(hang.end_s);
    assert!(end.anchor_n == 0.0 && end.line_n == 0.0, "let down at the end: {end:?}");
}

#[test]
fn every_trial_that_is_let_down_ends_slack_at_the_zero_mark() {
    for name in ["let-down", "hang-fire", "hook-slip", "cord-failure-in-hold"] {
        let let_down = performance(name, |_| {});
        let end = let_down.trajectory.at(let_down.end_s);
        assert!(end.line_n == 0.0 && end.cords_n == 0.0, "{name} ends at {end:?}");
        assert_near(name, end.x_m, let_down.launcher().zero_mark_x_m, 0.01);
    }
}

#[test]
fn a_cord_that_breaks_takes_its_share_of_the_force() {
    let broken = performance("cord-failure-in-hold", |_| {});
    let instant = broken.instants.iter().find(|instant| instant.what == Happening::CordBreaks).unwrap();
    let (before, after) = (broken.trajectory.at(instant.t_s - 0.01), broken.trajectory.at(instant.t_s + 0.01));
    assert_near("share left", after.anchor_n / before.anchor_n, 5.0 / 6.0, 2e-3);
}

#[test]
fn ageing_costs_four_tenths_of_a_percent_a_cycle_and_one_cord_is_damaged_at_trial_23() {
    let hold_n = |cycle: u32, seed: u64| {
        let change = |options: &mut Options| (options.cycle, options.seed) = (cycle, seed);
        performance("ageing", change).hold.cords_n
    };
    let mean = |cycle: u32| (1..=3).map(|seed| hold_n(cycle, seed)).sum::<f64>() / 3.0;
    let (new_n, before_n, after_n) = (mean(0), mean(22), mean(23));
    assert_near("22 cycles", before_n / new_n, 0.996_f64.powi(22), 3e-3);
    assert_near("the damaged cord", after_n / before_n, (1.0 - 0.4 / 6.0) * 0.996, 3e-3);
    assert!((hold_n(5, 1) - hold_n(5, 2)).abs() > 1e-3, "no scatter from trial to trial");
}

#[test]
fn a_charged_bottle_leaks_and_its_piston_holds_less_for_it() {
    let gas = performance("gas-launcher", |options| options.pace = 1.0);
    let hold = gas.phases.iter().find(|phase| phase.name == "hold").unwrap();
    let (start, end) = (gas.trajectory.at(hold.t_s + 1.5), gas.trajectory.at(gas.release_s().unwrap() - 0.01));
    assert!(end.reservoir_pa < start.reservoir_pa && end.cylinder_pa < start.cylinder_pa, "{start:?} to {end:?}");
    // One second loses 0.04 % of the gas, which the polytrope turns into 0.05 % of the pressure.
    let lost = 1.0 - end.reservoir_pa / start.reservoir_pa;
    assert_near("pressure lost", lost / (end.t_s - start.t_s), 1.25 * 4e-4, 3e-5);
}

/// Kinetic theory (Treloar): force in proportion to absolute temperature. The winch stops within a stick and slip of the
/// shuttle, so that the draws differ by a tenth of a millimetre.
#[test]
fn cold_cords_pull_less_in_proportion_to_absolute_temperature() {
    let hold_n =
        |temperature_c| performance("nominal", |options| options.cord_temperature_c = Some(temperature_c)).hold.cords_n;
    assert_near("0 °C against 20 °C", hold_n(0.0) / hold_n(20.0), 273.15 / 293.15, 5e-4);
}

#[test]
fn overrides_change_what_they_name() {
    let speed = |change: fn(&mut Options)| speed_mps(&Truth::of(&performance("nominal", change), "virtual", 0, &[]));
    let nominal = speed(|_| {});
    assert!(speed(|options| options.payload_mass_kg = Some(7.0)) < nominal - 0.3);
    assert!(speed(|options| options.cord_force_factor = Some(1.1)) > nominal + 0.3);
    assert_near("a cell's offset moves no shuttle", speed(|options| options.cell_offset_n = Some(9.0)), nominal, 0.0);
    assert!(prepare(&Options { payload_mass_kg: Some(-1.0), ..Options::default() }).is_err());
    assert!(prepare(&Options { scenario: "nominel".into(), ..Options::default() }).is_err());
}

#[test]
fn a_varied_rig_differs_from_seed_to_seed_by_about_a_percent() {
    let speeds: Vec<f64> = (1..=6)
        .map(|seed| performance("nominal", |options| (options.vary, options.seed) = (true, seed)))
        .map(|performance| speed_mps(&Truth::of(&performance, "virtual", 0, &[])))
        .collect();
    let (least, most) = (speeds.iter().copied().fold(f64::MAX, f64::min), speeds.iter().copied().fold(0.0, f64::max));
    assert!((0.02..0.8).contains(&(most - least)), "launch speeds {speeds:?}");
}

/// A shuttle coasting on its own: −(friction + weight along the rail + drag)/m.
#[test]
fn the_coast_down_slows_by_friction_weight_and_drag() {
    let coast = performance("coast-down", |_| {});
    let slack_s = coast.launch.as_ref().unwrap().instant(Happening::CordsSlack).unwrap().t_s;
    let rows: Vec<&Row> = coast.trajectory.rows.iter().filter(|row| row.t_s > slack_s && row.v_mps > 1.0).collect();
    let launcher = coast.launcher();
    let free = rows.iter().filter(|row| row.cords_n == 0.0 && row.rail_v_mps.abs() < 1e-4);
    let mut n_checked = 0;
    for row in free {
        let drag_n = 0.5 * launcher.air_density_kg_per_m3 * launcher.shuttle.drag_area_m2 * row.v_mps.powi(2);
        let expected = -(launcher.shuttle.friction_running_n + drag_n) / launcher.shuttle.mass_kg
            - launcher.gravity_mps2 * launcher.incline_rad.sin();
        assert_near("deceleration", row.shuttle_a_ground_mps2, expected, 0.01);
        n_checked += 1;
    }
    assert!(n_checked > 1000, "only {n_checked} free rows");
}

/// The last column, the size of rounding errors, may differ from machine to machine.
#[test]
fn the_documents_table_is_what_the_tool_prints() {
    let document = include_str!("../../README.md");
    for scenario in scenario::all(0, 0) {
        let options = Options { scenario: scenario.name.into(), ..Options::default() };
        let line = table::row(&prepare(&options).expect("a performance"));
        let (told, _) = line.trim_end_matches(" |").rsplit_once(" | ").expect("a table has columns");
        assert!(document.contains(told), "README.md lacks this line; print it anew with `virtual-rig table`:\n{line}");
    }
}
