//! What the virtual rig's tests share: a rig with everything switched off, and the published values.

#![allow(clippy::expect_used, reason = "a test that cannot go on stops here")]

use std::path::Path;
use virtual_rig::launcher::{Brake, Hook, Launcher, RailBody, Shuttle};
use virtual_rig::physics::cord::{CordGroup, CordKind};
use virtual_rig::physics::course::Course;
use virtual_rig::physics::launch::{Held, Start, launch};
use virtual_rig::physics::rubber::ForceLaw;
use virtual_rig::physics::stroke::System;

/// A shuttle of `mass_kg` on a level rail of practically infinite mass: no cords, gas, friction, drag, brake, gravity.
pub fn bare(mass_kg: f64) -> Launcher {
    Launcher {
        gravity_mps2: 0.0,
        incline_rad: 0.0,
        air_density_kg_per_m3: 1.225,
        head_wind_mps: 0.0,
        zero_mark_x_m: 1e3,
        anchor_x_m: 1e3,
        shuttle: Shuttle { mass_kg, drag_area_m2: 0.0, friction_running_n: 0.0, friction_static_n: 1e-9 },
        payload: None,
        cords: Vec::new(),
        cord_force_factor: 1.0,
        gas: None,
        rail: RailBody { mass_kg: 1e18, stiffness_n_per_m: 0.0, damping_n_s_per_m: 0.0 },
        brake: Brake {
            x_m: 1e3,
            run_in_m: 1e-9,
            pad_n: 0.0,
            damper_n_s_per_m: 0.0,
            stop_x_m: 1e4,
            stop_stiffness_n_per_m: 0.0,
            stop_damping_n_s_per_m: 0.0,
        },
        hook: Hook { opening_s: 1e-3, line_stiffness_n_per_m: 6e4, line_damping_n_s_per_m: 0.0 },
        cord_breaks_x_m: None,
    }
}

/// An elastic cord without hysteresis, relaxation or damping, of `stiffness_n_per_m` when stretched.
pub fn linear_cord(free_length_m: f64, stiffness_n_per_m: f64, mass_kg: f64, n_masses: usize) -> CordGroup {
    let kind = CordKind {
        free_length_m,
        mass_kg,
        law: ForceLaw::Linear { stiffness_n: stiffness_n_per_m * free_length_m },
        hysteresis: 0.0,
        turn_stretch: 0.1,
        relaxation: [(0.0, 1.0), (0.0, 1.0)],
        damping_n_s: 0.0,
        n_masses,
    };
    CordGroup { count: 1.0, kind }
}

/// Lets `launcher` go from x = 0 at t = 0.
pub fn let_go(launcher: &Launcher, step_s: f64) -> Course {
    let memories = vec![Default::default(); launcher.cords.len()];
    let gas = launcher.gas.map_or_else(Default::default, |drive| drive.filled());
    let held = Held { t_s: 0.0, x_m: 0.0, v_mps: 0.0, line_n: 0.0, memories, gas };
    launch(System { launcher: launcher.clone(), rail_rest_n: 0.0, step_s }, &held, Start::HookOpens)
}

/// Rows of numbers of a reference file in `tests/reference/` of the repository; comments and header are left out.
pub fn reference_rows(name: &str) -> Vec<Vec<String>> {
    let path = Path::new(env!("CARGO_MANIFEST_DIR")).join("../../tests/reference").join(name);
    let text = std::fs::read_to_string(&path).unwrap_or_else(|error| panic!("{}: {error}", path.display()));
    text.lines()
        .filter(|line| !line.starts_with('#') && !line.is_empty())
        .skip(1)
        .map(|line| line.split(',').map(str::to_owned).collect())
        .collect()
}

/// Field `idx` of a reference row as a number.
pub fn number(row: &[String], idx: usize) -> f64 {
    row.get(idx).and_then(|text| text.parse().ok()).unwrap_or_else(|| panic!("no number in field {idx} of {row:?}"))
}

/// # Panics
/// When `found` is further than `tolerance` from `expected`.
#[track_caller]
pub fn assert_near(what: &str, found: f64, expected: f64, tolerance: f64) {
    assert!((found - expected).abs() <= tolerance, "{what}: found {found}, expected {expected} within {tolerance}");
}
