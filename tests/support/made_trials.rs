//! Trials that the model made with known losses, for fits and their oracle: the same numbers for both.

#![allow(dead_code, reason = "each test and tool uses its part")]
#![allow(clippy::unwrap_used, reason = "invented numbers of our own: a slip stops here")]

use serde_json::{Value, json};
use tautrail::estimation::Random;
use tautrail::model::{LaunchSetup, passings};
use tautrail::replay::fit::{FitTrial, LossFit, Nuisance, Term};
use tautrail::rig::{Given, Rig};

pub const TERMS: [Term; 4] = [Term::Friction, Term::Viscous, Term::ShuttleDragArea, Term::CordLag];
pub const TRUTH: [f64; 4] = [17.0, 0.5, 0.022, 0.02];
const U_MPS: f64 = 0.01;
const U_PULL: f64 = 0.002;

/// The rehearsal's rig with cords of one branch and without mass.
fn simple_rig() -> Rig {
    let path = std::path::Path::new(env!("CARGO_MANIFEST_DIR")).join("tools/rehearsal/north-pier.toml");
    let mut rig = tautrail::rig::load(&path).unwrap();
    rig.losses.friction_n = Given { value: 12.0, standard_uncertainty: 6.0 };
    rig.details.cords.loading_curve.clear();
    rig.cords.mass_kg = 0.0;
    rig
}

/// `n` trials with 3 to 6 cords, several masses and draws; noise on every speed, each hold a little off where asked.
pub fn made_trials(n: u32, seed: u64, own_pull: bool) -> Vec<FitTrial> {
    let mut random = Random::new(seed, 1);
    let trial = |number: u32| {
        let mut rig = simple_rig();
        rig.cords.count = 3 + number % 4;
        rig.payload.mass_kg.value = 3.0 + 1.1 * f64::from(number % 5);
        rig.plan.draw_m = 3.0 + 0.15 * f64::from(number % 6);
        let mut real = rig.clone();
        real.losses.friction_n.value = TRUTH[0];
        real.details.losses.viscous_n_per_mps = Some(Given::exactly(TRUTH[1]));
        real.losses.shuttle_drag_area_m2.value = TRUTH[2];
        real.details.losses.cord_lag = Some(Given::exactly(TRUTH[3]));
        let mut setup = LaunchSetup::planned(&real).unwrap();
        if own_pull {
            setup.scale_cords(1.0 + U_PULL * random.normal());
        }
        let way_m = rig.rail.zero_mark_x_m - setup.start_x_m;
        let places_m: Vec<f64> = (1..=20).map(|k| setup.start_x_m + way_m * f64::from(k) / 21.5).collect();
        let seen = passings(&setup, &places_m).unwrap();
        let speeds: Vec<f64> = seen.iter().map(|one| one.unwrap().v_mps + U_MPS * random.normal()).collect();
        let trial = FitTrial::from_speeds(&format!("made-{number}"), &rig, &places_m, &speeds, U_MPS).unwrap();
        let nuisances = if own_pull { vec![Nuisance::PullOverMass { u: U_PULL }] } else { Vec::new() };
        FitTrial { nuisances, ..trial }
    };
    (0..n).map(trial).collect()
}

/// The fit's own residuals in the oracle's words.
pub fn for_oracle(trials: &[FitTrial], found: &LossFit, jac: &str, tolerance: f64, rounds: u32) -> Value {
    let one = |trial: &FitTrial| {
        let rig = &trial.rig;
        let curve: Vec<[f64; 2]> = rig.cords.curve.iter().map(|point| [point.elongation, point.tension_n]).collect();
        json!({
            "curve": curve, "count": rig.cords.count, "free_length": rig.cords.free_length_m,
            "zero": rig.rail.zero_mark_x_m, "start": rig.rail.zero_mark_x_m - rig.plan.draw_m,
            "mass": rig.moving_mass_kg(), "incline": rig.rail.incline_rad,
            "gravity": tautrail::rig::local_gravity_mps2(rig.site.latitude_rad, rig.site.altitude_m),
            "density": rig.site.air_density_kg_per_m3, "wind": rig.site.head_wind_mps,
            "payload_area": rig.payload.drag_area_m2.value,
            "places": trial.places_m, "measured": trial.v_mps, "u": U_MPS, "u_pull": U_PULL,
        })
    };
    let prior = |k: usize| [found.terms[k].prior.value, found.terms[k].prior.standard_uncertainty];
    let named = |of: &dyn Fn(usize) -> Value| -> Value {
        TERMS
            .iter()
            .enumerate()
            .map(|(k, term)| (term.name().to_owned(), of(k)))
            .collect::<serde_json::Map<_, _>>()
            .into()
    };
    json!({
        "trials": trials.iter().map(one).collect::<Vec<_>>(),
        "prior": named(&|k| json!(prior(k))), "size": named(&|k| json!(TRUTH[k])),
        "own_pull": trials.iter().all(|trial| !trial.nuisances.is_empty()), "inflation": found.inflation,
        "jac": jac, "method": if jac == "2-point" { "lm" } else { "trf" }, "rtol": tolerance, "atol": 0.1 * tolerance,
        "max_step": if jac == "2-point" { 1.0 } else { 3e-3 }, "rounds": rounds,
    })
}
