//! A joint fit against SciPy's least squares on the same residuals (tools/oracles/losses_fit.py).

#![allow(clippy::unwrap_used, reason = "a test that cannot go on stops here")]

#[path = "support/made_trials.rs"]
mod made_trials;
mod support;

use made_trials::{TERMS, TRUTH, for_oracle, made_trials};
use serde_json::Value;
use tautrail::replay::fit::{FitOptions, fit};

#[test]
fn losses_and_their_deviations_are_those_of_scipy() {
    let trials = made_trials(4, 1, true);
    let found = fit(&trials, &FitOptions { examine: false, ..FitOptions::of(TERMS.to_vec()) }).unwrap();
    let numbers = for_oracle(&trials, &found, "3-point", 1e-11, 1);
    let text = support::run_oracle(include_str!("../tools/oracles/losses_fit.py"), &[&numbers.to_string()]);
    let scipy: Value = serde_json::from_str(&text).unwrap();
    for (k, one) in found.terms.iter().enumerate() {
        let wanted = |what: &str| scipy[what][k].as_f64().unwrap();
        let (value, u) = (one.fitted.value, one.fitted.standard_uncertainty);
        let off = (value / wanted("values") - 1.0).abs();
        assert!(off < 1e-5, "{:?}: {value}, SciPy {}, off by {off:.1e}", one.term, wanted("values"));
        let off = (u / wanted("deviations") - 1.0).abs();
        assert!(off < 0.01, "deviation of {:?}: {u}, SciPy {}", one.term, wanted("deviations"));
        assert!((value - TRUTH[k]).abs() < 4.0 * u, "{:?}: {value} ± {u}, made with {}", one.term, TRUTH[k]);
    }
    for (trial, own) in found.trials.iter().zip(scipy["own"].as_array().unwrap()) {
        let (ours, theirs) = (trial.own[0].1, own.as_f64().unwrap());
        assert!((ours - theirs).abs() < 1e-4, "{}: {ours}, SciPy {theirs}", trial.id);
    }
}
