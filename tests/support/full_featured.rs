//! One launch with every feature at once, as numbers for the oracles and as a setup for the model: accuracy and speed are
//! measured on the same launch.

#![allow(clippy::unwrap_used, reason = "invented numbers of our own: a slip stops here")]

use serde_json::{Value, json};
use tautrail::model::{Brake, CordSet, Curve, LaunchSetup, RailLosses, Recoil};

pub fn number(value: &Value) -> f64 {
    value.as_f64().unwrap()
}

fn points(value: &Value) -> Vec<(f64, f64)> {
    value.as_array().unwrap().iter().map(|point| (number(&point[0]), number(&point[1]))).collect()
}

pub fn curve(value: &Value) -> Curve {
    Curve::through(&points(value)).unwrap()
}

/// Invented numbers that use every feature at once: two unequal cord sets with both branches, one of them slack early;
/// every loss; thrust and lift; wind; a recoiling rail; a sticking start; a brake that depends on place and speed.
pub fn full_featured() -> Value {
    let card = json!([[0, 0], [0.1, 12.5], [0.25, 25], [0.5, 39], [0.75, 51.5], [1.0, 66], [1.3, 88], [1.7, 131]]);
    let loading = json!([[0, 0], [0.1, 13.4], [0.25, 27], [0.5, 42], [0.75, 55.5], [1.0, 71], [1.3, 94], [1.7, 138]]);
    json!({
        "start": 0.0, "gravity": 9.81, "incline": 0.14, "density": 1.21, "wind": 3.0,
        "shuttle": 2.4, "payload": 6.2, "payload_area": 0.05, "shuttle_area": 0.02, "lift_area": 0.1,
        "thrust": [[0, 30], [10, 25], [25, 12], [40, 0]],
        "friction": 9.0, "load_coefficient": 0.05, "pull_coefficient": 0.01, "viscous": 0.8, "breakaway": 40.0,
        "along_x": [[0, 4], [1.5, 8], [3, 3], [5, 6], [7, 6]],
        "rail_mass": 150.0, "rail_stiffness": 4e4, "rail_damping": 300.0,
        "brake_from": 5.0, "brake": [500.0, 200.0, 15.0],
        "cords": [
            { "count": 5.0, "free_length": 2.5, "mass": 0.25, "ratio": 1.0, "zero_mark": 4.0, "unloading": card,
              "loading": loading, "held_gap": 5.0, "width": 0.06 },
            { "count": 2.0, "free_length": 1.8, "mass": 0.1, "ratio": 0.9, "zero_mark": 3.2, "unloading": card,
              "loading": loading, "held_gap": 4.0, "width": 0.05 },
        ],
    })
}

pub fn setup_of(d: &Value) -> LaunchSetup {
    let at = |key: &str| number(&d[key]);
    let cords = d["cords"].as_array().unwrap().iter().map(|c| CordSet {
        count: number(&c["count"]),
        free_length_m: number(&c["free_length"]),
        mass_kg: number(&c["mass"]),
        travel_ratio: number(&c["ratio"]),
        zero_mark_x_m: number(&c["zero_mark"]),
        retension_x_m: None,
        unloading: curve(&c["unloading"]),
        loading: Some(curve(&c["loading"])),
        held_gap_n: number(&c["held_gap"]),
        gap_width: number(&c["width"]),
    });
    LaunchSetup {
        payload_mass_kg: at("payload"),
        incline_rad: at("incline"),
        gravity_mps2: at("gravity"),
        air_density_kg_per_m3: at("density"),
        head_wind_mps: at("wind"),
        payload_drag_area_m2: at("payload_area"),
        shuttle_drag_area_m2: at("shuttle_area"),
        cords: cords.collect(),
        losses: RailLosses {
            friction_n: at("friction"),
            load_coefficient: at("load_coefficient"),
            pull_coefficient: at("pull_coefficient"),
            viscous_n_per_mps: at("viscous"),
            along_x_n: Some(curve(&d["along_x"])),
            breakaway_n: at("breakaway"),
        },
        brake: Brake {
            from_x_m: at("brake_from"),
            constant_n: number(&d["brake"][0]),
            per_metre_n_per_m: number(&d["brake"][1]),
            per_speed_n_per_mps: number(&d["brake"][2]),
        },
        recoil: Some(Recoil {
            mass_kg: at("rail_mass"),
            stiffness_n_per_m: at("rail_stiffness"),
            damping_n_per_mps: at("rail_damping"),
        }),
        thrust: Some(curve(&d["thrust"])),
        lift_area_m2: at("lift_area"),
        ..LaunchSetup::bare(at("shuttle"), 7.0)
    }
}
